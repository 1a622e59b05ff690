"""Worked cases from files to results: when it was said, by when, and what came of it.

The index ORVA has the ten sessions of docs/settlement.md, 2025-03-03 through 2025-03-14; all
expectations are worked out by hand from them.
"""

import json

import pytest

from support.desk import CALL_HEADER, Desk, csv_rows, prices_text, table_text

YIELDS = """\
instrument,session,close
ORY10,2025-03-03,4.00
ORY10,2025-03-14,3.60
"""
# around the end of a short month, and with no session on Wednesday 2025-03-05
MONTHS = """\
instrument,session,close
NELT,2025-01-30,49
NELT,2025-01-31,50
NELT,2025-02-27,52
NELT,2025-02-28,51
NELT,2025-03-03,53
NELT,2025-03-04,54
NELT,2025-03-06,55
NELT,2025-03-07,56
"""
# two new shares for each old one from 2025-03-10 on
RAW = """\
instrument,session,high,low,close
NELT,2025-02-28,81,78,79
NELT,2025-03-03,82,78,80
NELT,2025-03-06,90,79,88
NELT,2025-03-07,93,87,92
NELT,2025-03-10,47,45,46
NELT,2025-03-12,47.5,44,44.5
NELT,2025-03-14,46,43,45
"""
SPLIT = "instrument,effective,action,ratio\nNELT,2025-03-10,split,2\n"


@pytest.fixture(scope="module")
def stocked(tmp_path_factory):
    desk = Desk(tmp_path_factory.mktemp("stocked")).stock()
    desk.bring("prices", YIELDS, name="yields.csv")
    return desk


@pytest.fixture
def desk(tmp_path, stocked):
    return Desk(tmp_path, like=stocked)


def calls(desk, *rows, header=CALL_HEADER):
    """Bring calls of t.mavren; each row is said_at, instrument, claim, horizon and more."""
    numbered = [(f"C{n}", "t.mavren", *row) for n, row in enumerate(rows, 1)]
    desk.bring("calls", table_text(header, numbered))


def picked(rows, *names):
    """Return the named cells of each row, in the order of the calls."""
    return [tuple(row[name] for name in names) for row in rows.values()]


# ------------------------------------------------------------------------- when it was said
WHEN = [
    # said, reference session, its close, first session of the path
    ("2025-03-04 08:00", "2025-03-04", "102.0", "2025-03-04"),  # before the open
    ("2025-03-04 12:00", "2025-03-04", "102.0", "2025-03-05"),  # while it is open
    ("2025-03-04 17:30", "2025-03-04", "102.0", "2025-03-05"),  # on the close
    ("2025-03-04 17:31", "2025-03-05", "101.0", "2025-03-05"),  # after the close
    ("2025-03-08 11:00", "2025-03-10", "98.0", "2025-03-10"),  # Saturday
    ("2025-03-09", "2025-03-10", "98.0", "2025-03-10"),  # Sunday, no time
    ("2025-03-04", "2025-03-04", "102.0", "2025-03-05"),  # no time
    # five past midnight in Vienna is the day before in New York
    ("2025-03-04T18:05-05:00", "2025-03-05", "101.0", "2025-03-05"),
    ("2025-03-04T23:30Z", "2025-03-05", "101.0", "2025-03-05"),
    # noon in New York is 18:00 in Vienna, but 17:00 while only America has put clocks forward
    ("2025-03-04 12:00 America/New_York", "2025-03-05", "101.0", "2025-03-05"),
    ("2025-03-11 12:00 America/New_York", "2025-03-11", "95.0", "2025-03-12"),
]


def test_reference_and_path_begin_by_the_clock_of_the_venue(desk):
    calls(desk, *((said, "ORVA", "ends higher", "2025-03-14") for said, *_ in WHEN))
    rows = desk.outcomes("2025-03-17")
    found = picked(rows, "reference_session", "reference_price", "first_session")
    assert found == [expected for _, *rest in WHEN for expected in [tuple(rest)]]
    # the deadline close is 102: above 101, 98 and 95, equal to the 102 of the fourth
    for row in rows.values():
        tie = row["reference_price"] == "102.0"
        assert row["outcome"] == ("miss" if tie else "hit")
        assert ("tie" in row["flags"].split("; ")) == tie
        assert ("date only" in row["flags"]) == ("T" not in row["said_at"])
        assert (row["decided_session"], row["decided_price"]) == ("2025-03-14", "102.0")
    assert float(rows["C5"]["move_frac"]) == pytest.approx(4 / 98, rel=1e-12)
    assert float(rows["C5"]["move_points"]) == 4.0
    assert rows["C10"]["said_at"] == "2025-03-04T12:00:00-05:00"
    assert rows["C11"]["said_at"] == "2025-03-11T12:00:00-04:00"


# ----------------------------------------------------------------------------- by when
def test_deadlines(desk):
    desk.bring("prices", MONTHS, name="months.csv")
    calls(
        desk,
        ("2025-01-31", "NELT", "ends higher", "1 month"),  # clamped to 28 February: 51 on 50
        ("2025-03-03", "NELT", "ends at least 54", "2025-03-05"),  # no session that day
        ("2025-03-04", "ORVA", "ends higher", "3 sessions"),  # Friday 03-07: 104 on 102
        ("2025-03-05", "ORVA", "ends lower", "end of week"),  # Sunday 03-09: 104 on 101
        ("2025-03-03", "ORVA", "ends higher", "1 week"),  # Monday 03-10: 98 on 100
    )
    rows = desk.outcomes("2025-03-17")
    names = ("deadline", "deadline_session", "outcome")
    assert picked(rows, *names) == [
        ("2025-02-28", "2025-02-28", "hit"),
        ("2025-03-05", "2025-03-04", "hit"),
        ("", "2025-03-07", "hit"),
        ("2025-03-09", "2025-03-07", "miss"),
        ("2025-03-10", "2025-03-10", "miss"),
    ]
    rolled = [ref for ref, row in rows.items() if "deadline rolled back" in row["flags"]]
    assert rolled == ["C2", "C4"]
    assert rows["C3"]["sessions"] == "3"


# -------------------------------------------------------------------------------- comparing
CLAIMS = [
    # claim, result, deciding session and price, tie; said 03-03 (100), deadline 03-14
    ("ends above 102", "miss", "2025-03-14", "102.0", True),
    ("ends at least 102", "hit", "2025-03-14", "102.0", False),
    ("ends higher by 2%", "hit", "2025-03-14", "102.0", False),
    ("ends within 1.9%", "miss", "2025-03-14", "102.0", False),
    ("touches 107", "hit", "2025-03-07", "107.0", False),
    ("trades above 107", "miss", None, None, True),
    ("touches 93", "hit", "2025-03-12", "93.0", False),
    ("closes below 95", "miss", None, None, True),
    ("rises 5%", "hit", "2025-03-06", "105.0", False),
    ("falls 6%", "miss", None, None, False),
    ("stays above 95", "miss", "2025-03-11", "94.0", False),
    ("touches 107 before 94", "hit", "2025-03-07", "107.0", False),
    ("range 95 to 103 at 80%", "hit", "2025-03-14", "102.0", False),
]


def test_claims_on_the_sheet(desk):
    calls(desk, *(("2025-03-03", "ORVA", claim, "2025-03-14") for claim, *_ in CLAIMS))
    rows = desk.outcomes("2025-03-17")
    for row, (claim, outcome, session, price, tie) in zip(rows.values(), CLAIMS, strict=True):
        assert row["outcome"] == outcome, claim
        assert ("tie" in row["flags"].split("; ")) == tie, claim
        if session:
            assert (row["decided_session"], row["decided_price"]) == (session, price), claim
    assert rows["C13"]["probability"] == "0.8"


def test_other_readings_stand_beside_the_result(desk):
    calls(
        desk,
        ("2025-03-03", "ORVA", "touches 107", "2025-03-14"),
        ("2025-03-03", "ORVA", "ends above 104", "2025-03-14"),
        ("2025-03-03", "ORVA", "ends lower", "2025-03-14"),
        ("2025-03-04", "ORVA", "ends higher", "2025-03-14"),
    )
    rows = desk.outcomes("2025-03-17")
    names = ("outcome", "alt_any_time", "alt_closes", "alt_deadline", "alt_close_before")
    assert picked(rows, *names) == [
        ("hit", "", "miss", "miss", ""),  # the first session has no close before it
        ("miss", "hit", "", "", ""),
        ("miss", "", "", "", ""),
        ("miss", "", "", "", "hit"),  # 102 on the 102 of 03-04 is a tie, on the 100 before not
    ]
    differing = [ref for ref, row in rows.items() if "alternates disagree" in row["flags"]]
    assert differing == ["C1", "C2", "C4"]


def test_yields_are_compared_by_difference_and_read_the_other_way_round(desk):
    calls(
        desk,
        ("2025-03-03", "ORY10", "strengthens by 40bp", "2025-03-14"),
        ("2025-03-03", "ORY10", "ends lower by 0.41pp", "2025-03-14"),
    )
    rows = desk.outcomes("2025-03-17")
    assert [row["outcome"] for row in rows.values()] == ["hit", "miss"]
    assert rows["C1"]["move_frac"] == ""
    assert float(rows["C1"]["move_points"]) == pytest.approx(-0.4, abs=1e-12)
    assert rows["C1"]["direction"] == "down"


# ---------------------------------------------------------------------------- open and void
def test_open_calls_say_why(desk):
    calls(
        desk,
        ("2025-03-03", "ORVA", "ends higher", "2025-03-14"),
        ("2025-03-11", "NELT", "ends higher", "2025-03-14"),
        ("2025-03-11", "ORVA", "ends higher", "2025-03-17"),
        ("2025-03-11", "ORVA", "ends higher", "20 sessions"),
    )
    assert picked(desk.outcomes("2025-03-12"), "outcome", "reason") == [
        ("open", "the window still runs"),
        ("open", "no price yet on or after the statement"),
        ("open", "the window still runs"),
        ("open", "the window still runs"),
    ]
    assert picked(desk.outcomes("2025-03-17"), "outcome", "reason") == [
        ("hit", ""),
        ("open", "no price yet on or after the statement"),
        ("open", "no price at the deadline"),
        ("open", "the window still runs"),
    ]
    row = desk.scores()[0]
    assert (row["n"], row["hits"], row["open"]) == (1, 1, 3)


def test_calls_without_an_answer_are_void(desk):
    calls(
        desk,
        ("2025-03-08", "ORVA", "ends higher", "2025-03-09"),
        ("2025-03-04", "ORVA", "ends higher", "2025-03-04"),
        ("2025-03-03", "ORVA", "touches 100", "2025-03-14"),
        ("2025-03-03", "ORVA", "touches 106 before 94", "2025-03-14"),
    )
    assert picked(desk.outcomes("2025-03-17"), "outcome", "reason", "chance") == [
        ("void", "the deadline is before the reference session", ""),
        ("void", "the deadline close is the reference close", ""),
        ("void", "the level is the reference price", ""),
        ("hit", "", desk.outcomes()["C4"]["chance"]),
    ]
    assert desk.scores()[0]["void"] == 3


def test_what_was_not_said_yet_is_not_settled(desk):
    calls(desk, ("2025-03-10", "ORVA", "ends higher", "2025-03-14"))
    assert desk.outcomes("2025-03-07")["C1"]["outcome"] == ""
    assert desk.scores() == []
    assert "came after the last settlement" in desk.run("trace", "C1", status=2).stderr
    assert desk.outcomes("2025-03-17")["C1"]["outcome"] == "hit"


# -------------------------------------------------------------------------------- maturity
def test_an_early_hit_is_no_part_of_a_rate_before_its_deadline(desk):
    calls(
        desk,
        ("2025-03-04", "ORVA", "touches 107", "2025-03-31"),
        ("2025-03-04", "ORVA", "stays above 99", "2025-03-31"),
    )
    rows = desk.outcomes("2025-03-17")
    names = ("outcome", "matured", "decided_session", "deadline_session")
    assert picked(rows, *names) == [
        ("hit", "0", "2025-03-07", ""),
        ("miss", "0", "2025-03-10", ""),
    ]
    assert all("early" in row["flags"].split("; ") for row in rows.values())
    row = desk.scores()[0]
    assert (row["n"], row["hits"], row["early"], row["hit_rate"]) == (0, 0, 2, None)
    desk.bring("prices", "instrument,session,close\nORVA,2025-03-31,101\n", name="more.csv")
    assert [row["matured"] for row in desk.outcomes("2025-04-01").values()] == ["1", "1"]
    row = desk.scores()[0]
    assert (row["n"], row["hits"], row["early"]) == (2, 1, 0)


def test_an_imputed_horizon_stays_out_of_the_headline(desk):
    """`immediately` is one week: 98 on 03-10. One session: 102. Two weeks are not over."""
    calls(
        desk,
        ("2025-03-03", "ORVA", "ends higher", "immediately"),
        ("2025-03-03", "ORVA", "ends higher", "1 week"),
    )
    rows = desk.outcomes("2025-03-16")
    names = ("outcome", "horizon_class", "alt_shorter", "alt_longer")
    assert picked(rows, *names) == [
        ("miss", "undated", "hit", ""),
        ("miss", "up to 1 month", "", ""),
    ]
    assert "imputed horizon" in rows["C1"]["flags"]
    row = desk.scores()[0]
    assert (row["n"], row["imputed_n"], row["imputed_hits"]) == (1, 1, 0)


def test_likelihood_words_lean_and_are_scored_over_their_band(desk):
    calls(
        desk,
        ("2025-03-03", "ORVA", "ends higher", "2025-03-14", "very likely"),
        ("2025-03-03", "ORVA", "ends lower", "2025-03-14", "remote"),
        ("2025-03-03", "ORVA", "ends higher", "2025-03-14", "ipcc-ar5: very likely"),
        ("2025-03-03", "ORVA", "ends lower", "2025-03-14", "25%"),
        header=CALL_HEADER + ",probability",
    )
    rows = desk.outcomes("2025-03-17")
    assert picked(rows, "probability_low", "probability_high", "likelihood") == [
        ("0.8", "0.95", "icd-203: very likely"),
        ("0.01", "0.05", "icd-203: remote"),
        ("0.9", "1.0", "ipcc-ar5: very likely"),
        ("0.25", "0.25", ""),
    ]
    assert float(rows["C1"]["probability"]) == pytest.approx(0.875)
    row = desk.scores()[0]
    assert (row["n"], row["hits"], row["n_probability"]) == (4, 4, 4)
    bands = [(0.8, 0.95, 1), (0.01, 0.05, 0), (0.9, 1.0, 1), (0.25, 0.25, 0)]
    brier = [((a + b) / 2 - y) ** 2 + (b - a) ** 2 / 12 for a, b, y in bands]
    assert row["brier"] == pytest.approx(sum(brier) / 4, rel=1e-12)


# ---------------------------------------------------------------------------------- splits
SPLIT_CLAIMS = (
    ("ends above 85", "hit"),  # 45 are 90 in old units
    ("ends higher by 10pt", "hit"),  # 80 + 10 = 90
    ("ends higher by 10.5pt", "miss"),
    ("ends higher by 12.5%", "hit"),  # 90 / 80
    ("touches 95", "hit"),  # 47.5 on 03-12
    ("trades above 95", "miss"),
    ("stays above 86", "miss"),  # low 79 on 03-06
    ("falls 5%", "miss"),
    ("rises 15%", "hit"),  # 92 on 03-07
)


def adjusted():
    """Return the same prices in the units of the last session."""
    rows = csv_rows(RAW)
    for row in rows:
        for name in ("high", "low", "close"):
            if row["session"] < "2025-03-10":
                row[name] = float(row[name]) / 2
    return table_text(",".join(rows[0]), [row.values() for row in rows])


def test_a_split_changes_no_result_whatever_the_series(tmp_path, stocked):
    found = {}
    for series, text in (("raw", RAW), ("split-adjusted", adjusted())):
        (tmp_path / series).mkdir()
        desk = Desk(tmp_path / series, like=stocked)
        desk.bring("prices", text, "--series", series, name="nelt.csv")
        desk.bring("actions", SPLIT)
        calls(desk, *(("2025-03-03", "NELT", claim, "2025-03-14") for claim, _ in SPLIT_CLAIMS))
        rows = desk.outcomes("2025-03-17")
        assert [row["outcome"] for row in rows.values()] == [one for _, one in SPLIT_CLAIMS]
        assert float(rows["C1"]["move_frac"]) == pytest.approx(0.125, rel=1e-12)
        assert float(rows["C1"]["move_points"]) in (10.0, 5.0)
        found[series] = rows
        trace = desk.run("trace", "C1").stdout
        assert "2025-03-10: split (ratio 2)" in trace
    same = ("outcome", "decided_session", "flags", "alt_any_time", "alt_closes",
            "alt_deadline", "alt_close_before", "chance_windows")  # fmt: skip
    assert picked(found["raw"], *same) == picked(found["split-adjusted"], *same)
    assert found["raw"]["C1"]["reference_price"] == "80.0"
    assert found["split-adjusted"]["C1"]["reference_price"] == "40.0"


def test_a_total_return_series_has_no_levels(desk):
    text = prices_text("NELT", ranges=False)
    desk.bring("prices", text, "--series", "total-return", name="total.csv")
    calls(
        desk,
        ("2025-03-03", "NELT", "ends above 85", "2025-03-14"),
        ("2025-03-03", "NELT", "ends higher by 2%", "2025-03-14"),
    )
    assert picked(desk.outcomes("2025-03-17"), "outcome", "reason") == [
        ("void", "a total-return series has no levels"),
        ("hit", ""),
    ]


# ---------------------------------------------------------------------------- again and again
def test_settling_twice_adds_nothing_and_a_later_day_changes_open_to_hit(desk):
    calls(desk, ("2025-03-03", "ORVA", "ends higher", "2025-03-14"))
    done = desk.settle("2025-03-12", "--format", "csv")
    assert csv_rows(done.stdout) == [
        {"result": "open", "calls": "1"},
        {"result": "open: the window still runs", "calls": "1"},
    ]
    before = desk.dump()
    done = desk.settle("2025-03-12")
    assert "Nothing has changed since the last settlement" in done.stderr
    assert desk.dump() == before
    done = desk.settle("2025-03-17")
    assert "Changed since the run before: 1 result." in done.stderr
    assert desk.outcomes()["C1"]["outcome"] == "hit"
    # the earlier run is still there
    assert len(desk.dump()["outcome"]) == 2
    done = desk.settle("2025-03-12", "--changes", "--format", "json")
    assert json.loads(done.stdout) == [
        {"ref": "C1", "before": "hit", "after": "open", "because": "another day"}
    ]


def test_new_calls_and_prices_make_the_settlement_stale(desk):
    calls(desk, ("2025-03-03", "ORVA", "ends higher", "2025-03-14"))
    desk.settle()
    assert "Since the last settlement" not in desk.run("calls").stderr
    desk.bring("prices", MONTHS, name="months.csv")
    row = ("D1", "o.quist", "2025-03-03", "ORVA", "ends lower", "2025-03-14")
    desk.bring("calls", table_text(CALL_HEADER, [row]), name="more.csv")
    for command in (("calls",), ("score",)):
        said = desk.run(*command).stderr
        assert "Since the last settlement there are new calls and new prices" in said
