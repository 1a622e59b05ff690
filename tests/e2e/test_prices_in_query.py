"""Prices so far off that a person has to look: listed, confirmed, corrected."""

import json
from datetime import date, timedelta

import pytest

from support.desk import Desk, csv_rows, table_text

HEADER = "instrument,session,high,low,close"


def weekdays(start, n):
    day, found = start, []
    while len(found) < n:
        if day.weekday() < 5:
            found.append(day.isoformat())
        day += timedelta(days=1)
    return found


SESSIONS = weekdays(date(2025, 1, 20), 40)
SPIKE = SESSIONS[34]  # 2025-03-07


def prices(*, high=141):
    rows = []
    for i, session in enumerate(SESSIONS):
        close = 100 + (i % 2) / 2
        rows.append(("ORVA", session, high if session == SPIKE else close, close, close))
    return table_text(HEADER, rows)


@pytest.fixture
def desk(tmp_path):
    desk = Desk(tmp_path).stock(prices=False)
    desk.bring("prices", prices())
    desk.calls(
        ("C1", "t.mavren", "2025-03-03", "ORVA", "touches 120", "2025-03-14"),
        ("C2", "t.mavren", "2025-03-03", "ORVA", "stays below 130", "2025-03-14"),
        ("C3", "t.mavren", "2025-03-03", "ORVA", "ends lower by 5%", "2025-03-14"),
    )
    return desk


def waiting(desk):
    return csv_rows(desk.run("confirm", "--format", "csv").stdout)


def test_calls_wait_until_the_price_is_confirmed(desk):
    found = desk.outcomes("2025-03-17")
    assert [found[ref]["outcome"] for ref in ("C1", "C2", "C3")] == ["open", "open", "miss"]
    assert found["C1"]["reason"] == "a price in query decides it"
    (one,) = waiting(desk)
    assert one == {
        "instrument": "ORVA",
        "session": SPIKE,
        "price": "high",
        "value": "141.0",
        "close": "100.0",
        "close_before": "100.5",
        "calls": "C1 C2",
    }
    shown = desk.run("confirm")
    assert "141" in shown.stdout
    assert "C1 C2" in shown.stdout
    assert "high 141" in desk.run("trace", "C1").stdout
    done = desk.run("confirm", "ORVA", SPIKE, "--evidence", "Bulletin no. 47", "--who", "anna")
    assert "right as it stands" in done.stderr
    settled = desk.settle("2025-03-17", "--changes", "--format", "json")
    changes = json.loads(settled.stdout)
    assert [(one["ref"], one["after"]) for one in changes] == [("C1", "hit"), ("C2", "miss")]
    assert {one["because"] for one in changes} == {"prices confirmed by a person"}
    assert waiting(desk) == []
    assert "No call waits" in desk.run("confirm").stderr


def test_a_confirmation_makes_results_stale(desk):
    desk.settle("2025-03-17")
    desk.run("confirm", "ORVA", SPIKE, "--evidence", "Bulletin no. 47")
    assert "newly confirmed prices" in desk.run("calls").stderr
    assert "Prices were confirmed" in desk.run("trace", "C1", status=2).stderr


def test_a_right_price_in_a_later_file_needs_no_confirming(desk):
    desk.settle("2025-03-17")
    desk.bring("prices", prices(high=101), name="mended.csv")
    found = desk.outcomes("2025-03-17")
    assert [found[ref]["outcome"] for ref in ("C1", "C2")] == ["miss", "hit"]


def test_a_confirmation_is_for_the_prices_it_was_given_for(desk):
    desk.run("confirm", "ORVA", SPIKE, "--evidence", "Bulletin no. 47")
    assert desk.outcomes("2025-03-17")["C1"]["outcome"] == "hit"
    desk.bring("prices", prices(high=150), name="other.csv")
    assert desk.outcomes("2025-03-17")["C1"]["outcome"] == "open"
    # at the earlier vintage the confirmation holds as before
    vintages = [row for row in desk.dump()["load"] if "prices" in row]
    assert len(vintages) == 2
    desk.settle("2025-03-17", "--vintage", "3")
    assert desk.outcomes()["C1"]["outcome"] == "hit"


@pytest.mark.parametrize(
    ("args", "told"),
    [
        (("ORVA", SPIKE), "needs its evidence"),
        (("ORVA", SPIKE, "--evidence", " "), "needs its evidence"),
        (("XXXX", SPIKE, "--evidence", "x"), "no instrument 'XXXX'"),
        (("ORVA", "2025-03-08", "--evidence", "x"), "no price of ORVA on 2025-03-08"),
        (("ORVA", "soon", "--evidence", "x"), "soon"),
        (("ORVA", "", "--evidence", "x"), "there is no date"),
    ],
)
def test_a_confirmation_that_cannot_be_kept(desk, args, told):
    before = desk.dump()
    assert told in desk.run("confirm", *args, status=2).stderr
    assert desk.dump() == before


def test_nothing_is_settled_yet(desk):
    assert "Nothing is settled yet" in desk.run("confirm", status=2).stderr


THINGS = """instrument,kind,currency,base,term
METAL,share,SEL,,
GONE,share,KOR,,
PAIR,pair,KOR,SEL,KOR
"""


def test_what_rests_on_a_price_in_query_names_where_it_stands(tmp_path):
    """A rate in query is confirmed for the pair, whatever is converted by it."""
    desk = Desk(tmp_path).stock(prices=False)
    desk.bring("instruments", THINGS, name="things.csv")
    rows = [(symbol, day, "", "", 10) for symbol in ("METAL", "GONE") for day in SESSIONS[:6]]
    rates = [12 if day == SESSIONS[4] else 1.2 for day in SESSIONS[:6]]
    rows += [("PAIR", day, "", "", rate) for day, rate in zip(SESSIONS, rates, strict=False)]
    desk.bring("prices", table_text(HEADER, rows))
    merged = f"GONE,{SESSIONS[3]},merger,1,METAL\n"
    desk.bring("actions", f"instrument,effective,action,ratio,into\n{merged}")
    desk.calls(("C1", "t.mavren", SESSIONS[2], "GONE", "ends above 15", SESSIONS[4]))
    assert desk.outcomes(SESSIONS[5])["C1"]["reason"] == "a price in query decides it"
    found = {(one["instrument"], one["session"], one["value"]) for one in waiting(desk)}
    assert found == {("PAIR", SESSIONS[4], "12.0")}
    assert "PAIR" in desk.run("trace", "C1").stdout
    desk.run("confirm", "PAIR", SESSIONS[4], "--evidence", "Bulletin no. 48")
    assert desk.outcomes(SESSIONS[5])["C1"]["outcome"] == "hit"
    assert float(desk.outcomes()["C1"]["decided_price"]) == pytest.approx(120)
