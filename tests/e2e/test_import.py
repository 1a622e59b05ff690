"""Importing files from the command line: shapes, repeats, dry runs, rejects, references."""

import sqlite3
from contextlib import closing

import pytest

from support.desk import (
    CALL_HEADER,
    CLOSES,
    FORECASTERS,
    INSTRUMENTS,
    SESSIONS,
    Desk,
    count,
    csv_rows,
    prices_text,
    table_text,
)

ACTIONS = """\
instrument,effective,action,ratio,amount,currency,into
NELT,2025-03-10,split,2,,,
NELT,2025-03-12,dividend,,0.4,KOR,
"""
CALLS = """\
ref,forecaster,said_at,instrument,claim,horizon,probability,quote
C1,t.mavren,2025-03-03,ORVA,ends higher,1 week,0.6,"Up, I say."
C2,Mavren,2025-03-04T12:00+01:00,ORVA,touches 107,end of month,,
C3,o.quist,2025-03-05 08:00 Europe/Vienna,ORVA,ends below 103,3 sessions,very likely,
"""
CALL_ROW = ("C1", "t.mavren", "2025-03-03", "ORVA", "ends higher", "1 week")
FILES = {
    "instruments": (INSTRUMENTS, 4),
    "forecasters": (FORECASTERS, 2),
    "prices": (prices_text() + prices_text("NELT").split("\n", 1)[1], 20),
    "actions": (ACTIONS, 2),
    "calls": (CALLS, 3),
}


@pytest.fixture(scope="module")
def things(tmp_path_factory):
    return Desk(tmp_path_factory.mktemp("things")).stock(prices=False)


@pytest.fixture
def bare(tmp_path, things):
    """A desk with instruments and forecasters."""
    return Desk(tmp_path, like=things)


@pytest.fixture
def desk(bare):
    """The same with prices."""
    bare.bring("prices", prices_text(), name="stock.csv")
    return bare


@pytest.fixture
def empty(tmp_path):
    return Desk(tmp_path)


def closes(desk, symbol="ORVA"):
    """Return session and close of the rows of a symbol, in the order of their loads."""
    with closing(sqlite3.connect(desk.ledger)) as opened:
        found = opened.execute(
            "SELECT p.session, p.close, p.load FROM price p JOIN instrument i "
            "ON i.id = p.instrument WHERE i.symbol = ? ORDER BY p.load, p.session",
            (symbol,),
        )
        return found.fetchall()


# --------------------------------------------------------------------- the five kinds of file
def test_five_files_one_after_the_other(empty):
    for what, (text, rows) in FILES.items():
        done = empty.bring(what, text)
        assert f"{what}.csv: {rows} rows of {what} added." in done.stderr
        assert done.stdout == ""
    empty.settle()
    assert {row["outcome"] for row in empty.outcomes().values()} <= {"hit", "miss", "open"}


def test_the_same_files_again_add_nothing_and_say_so(empty):
    for what, (text, _) in FILES.items():
        empty.bring(what, text)
    before = empty.dump()
    for what, (text, rows) in FILES.items():
        done = empty.bring(what, text)
        assert f"{what}.csv: nothing to add, {rows} rows already in" in done.stderr
    assert empty.dump() == before


def test_a_longer_file_adds_only_what_is_new(desk):
    more = CALLS + "C4,o.quist,2025-03-05,ORVA,ends lower,1 week,,\n"
    desk.bring("calls", CALLS)
    done = desk.bring("calls", more)
    assert "1 row of calls added, 3 already in the ledger" in done.stderr
    done = desk.bring("forecasters", FORECASTERS + "v.lenz,,,,\n")
    assert "1 row of forecasters added, 2 already" in done.stderr
    assert count(desk.ledger, "call") == 4


def test_a_dry_run_changes_nothing_and_says_what_would_happen(bare):
    before, size = bare.dump(), bare.ledger.stat().st_size
    done = bare.bring("prices", prices_text(), "--dry-run")
    assert "10 rows of prices would be added" in done.stderr
    bare.bring("calls", CALLS, "--dry-run")
    done = bare.bring("calls", CALLS.replace("ends higher", "goes up"), "--dry-run", status=5)
    assert "would be refused" in done.stderr
    done = bare.bring(
        "calls", CALLS.replace("ends higher", "goes up"), "--dry-run", "--keep-good"
    )
    assert "2 rows of calls would be added, 1 rejected" in done.stderr
    assert not list(bare.folder.glob("*.rejects*"))
    assert (bare.dump(), bare.ledger.stat().st_size) == (before, size)


def test_several_files_at_once_and_the_first_bad_one_stops(bare):
    good = bare.file("a.csv", prices_text())
    bad = bare.file("b.csv", "instrument,session,close\nORVA,2025-03-17,nought\n")
    done = bare.run("import", "prices", good, bad, status=3)
    assert "a.csv: 10 rows of prices added" in done.stderr
    assert "b.csv was refused; nothing was imported" in done.stderr
    assert count(bare.ledger, "price") == 10


# --------------------------------------------------------------------------------- prices
SINGLE = table_text("Date,Open,High,Low,Close,Volume", [
    (day, c, c + 1, c - 1, c, 5000) for day, c in zip(SESSIONS, CLOSES, strict=True)
])  # fmt: skip
WIDE = table_text("Date,ORVA,NELT", [
    (day, c, c / 4 if n % 2 else "")
    for n, (day, c) in enumerate(zip(SESSIONS, CLOSES, strict=True))
])  # fmt: skip


def test_prices_of_one_instrument_in_a_file(bare):
    done = bare.bring("prices", SINGLE, "--instrument", "ORVA")
    assert "shape: one instrument" in done.stderr
    assert [close for _, close, _ in closes(bare)] == list(CLOSES)


def test_prices_with_a_column_for_each_instrument(bare):
    done = bare.bring("prices", WIDE)
    assert "15 rows of prices added" in done.stderr
    assert [day for day, *_ in closes(bare, "NELT")] == list(SESSIONS[1::2])


def test_one_instrument_without_its_name_is_refused(bare):
    found = bare.refuse("prices", SINGLE)
    assert "Pass --instrument SYMBOL" in found[-2]


@pytest.mark.parametrize("order", ["dmy", "mdy"])
def test_dates_in_another_order(bare, order):

    def local(day):
        year, month, number = day.split("-")
        first, second = (number, month) if order == "dmy" else (month, number)
        return f"{first}/{second}/{year}"

    rows = [("ORVA", local(day), c) for day, c in zip(SESSIONS, CLOSES, strict=True)]
    bare.bring("prices", table_text("instrument,session,close", rows), "--dates", order)
    assert [day for day, *_ in closes(bare)] == list(SESSIONS)
    split = f"instrument,effective,action,ratio\nNELT,{local('2025-03-10')},split,2\n"
    bare.bring("actions", split, "--dates", order)
    row = ("C1", "t.mavren", local("2025-03-03"), "ORVA", "ends higher", "1 week")
    moment = f"{local('2025-03-04')} 12:00 Europe/Vienna"
    row2 = ("C2", "t.mavren", moment, "ORVA", "ends higher", "1 week")
    bare.bring("calls", table_text(CALL_HEADER, [row, row2]), "--dates", order)
    found = bare.outcomes("2025-03-17")
    assert found["C1"]["said_at"] == "2025-03-03"
    assert found["C2"]["said_at"] == "2025-03-04T12:00:00+01:00"


def test_a_corrected_file_stores_the_rows_that_differ_beside_the_old_ones(desk):
    first = closes(desk)
    rows = prices_text().replace("2025-03-07,107,103,104", "2025-03-07,107,103,103.5")
    done = desk.bring("prices", rows, name="corrected.csv")
    assert "1 row of prices added, 9 already in the ledger" in done.stderr
    after = closes(desk)
    assert after[:10] == first
    assert [row[:2] for row in after[10:]] == [("2025-03-07", 103.5)]
    # the old numbers again: what counts now is the newest row, so they are a new one
    done = desk.bring("prices", prices_text(), name="back.csv")
    assert "1 row of prices added, 9 already" in done.stderr
    assert len(closes(desk)) == 12


def test_one_instrument_has_one_kind_of_series(desk):
    found = desk.refuse("prices", prices_text(), "--series", "total-return")
    assert "ledger holds raw prices of ORVA, the file is total-return" in found[0]
    assert "--series raw" in found[0]


# -------------------------------------------------------------------------------- rejects
def test_rejected_rows_mended_in_their_file_come_in(desk):
    text = CALLS.replace("touches 107", "touchs 107").replace("3 sessions", "3 session s")
    done = desk.bring("calls", text, "--keep-good")
    assert "1 row of calls added, 2 rejected" in done.stderr
    rejects = desk.folder / "calls.rejects.csv"
    assert str(rejects) in done.stderr
    rows = csv_rows(rejects.read_text("utf-8"))
    assert [row["ref"] for row in rows] == ["C2", "C3"]
    assert list(rows[0]) == [*CALLS.split("\n", 1)[0].split(","), "why"]
    assert rows[0]["why"].startswith("claim: ")
    assert rows[1]["why"].startswith("horizon: ")
    mended = rejects.read_text("utf-8").replace("touchs", "touches").replace("n s", "ns")
    rejects.write_text(mended, encoding="utf-8")
    done = desk.run("import", "calls", rejects)
    assert "2 rows of calls added" in done.stderr
    assert count(desk.ledger, "call") == 3


def test_rejected_prices_and_a_second_reject_file(bare):
    text = prices_text().replace("101,98,100", "101,98,hundred")
    for name in ("prices.rejects.csv", "prices.rejects-2.csv"):
        done = bare.bring("prices", text, "--keep-good")
        assert "1 rejected" in done.stderr
        assert name in done.stderr
    assert count(bare.ledger, "price") == 9
    rows = csv_rows((bare.folder / "prices.rejects.csv").read_text("utf-8"))
    assert len(rows) == 1
    assert rows[0]["close"] == "hundred"


def test_keep_good_cannot_help_a_file_that_is_wrong_as_a_whole(desk):
    found = desk.refuse("calls", CALLS.replace("horizon", "horizont"), "--keep-good")
    assert "missing column: `horizon`" in found[0]
    assert not list(desk.folder.glob("*.rejects*"))


# ------------------------------------------------------------------------- names and refs
def test_aliases_lead_to_the_forecaster(desk):
    desk.calls(CALL_ROW, ("C2", "Tilda M.", *CALL_ROW[2:]), ("C3", "Mavren", *CALL_ROW[2:]))
    rows = desk.outcomes("2025-03-17")
    assert {row["forecaster"] for row in rows.values()} == {"t.mavren"}


def test_unknown_names_are_refused_with_the_nearest(desk):
    found = desk.refuse("calls", table_text(CALL_HEADER, [
        ("C1", "Tilda N.", *CALL_ROW[2:]),
        ("C2", "nobody.at.all", *CALL_ROW[2:]),
        ("C3", "", *CALL_ROW[2:]),
    ]))  # fmt: skip
    assert "line 2, forecaster: `Tilda N.` is no known forecaster" in found[0]
    assert "The nearest known is `Tilda M.`" in found[0]
    assert "foresaid import forecasters FILE" in found[1]
    assert "there is no forecaster" in found[2]


REF_HEADER = CALL_HEADER + ",copy_of,revises"


def refs(*rows):
    return table_text(REF_HEADER, [(ref, *CALL_ROW[1:], *more) for ref, *more in rows])


def test_copies_and_revisions_may_point_forward(desk):
    desk.bring("calls", refs(
        ("A1", "A3", ""), ("A2", "", "A4"), ("A3", "", ""), ("A4", "", ""), ("A5", "A3", "")
    ))  # fmt: skip
    rows = desk.outcomes("2025-03-17")
    assert set(rows) == {"A2", "A3", "A4"}
    assert (rows["A3"]["copies"], rows["A2"]["revises"]) == ("2", "A4")
    assert count(desk.ledger, "statement") == 5
    # and into the ledger
    desk.bring("calls", refs(("B1", "A3", ""), ("B2", "", "A2")), name="later.csv")
    assert desk.outcomes()["A3"]["copies"] == "3"


def test_references_that_lead_nowhere(desk):
    text = refs(("A1", "A2", ""), ("A2", "", "A1"), ("A3", "A3", ""), ("A4", "Z9", ""))
    found = desk.refuse("calls", text)
    assert len(found) == 5
    # in the order of the file
    assert "line 2, copy_of: `A2`" in found[0]
    assert "line 3, revises: `A1`" in found[1]
    for line, place in zip(found[2:], ("line 4, copy_of", "line 5, copy_of"), strict=False):
        assert place in line
        assert "no other statement" in line


def test_a_reference_to_a_rejected_row_is_rejected_with_it(desk):
    text = refs(("A1", "", ""), ("A2", "A1", ""), ("A3", "", ""))
    text = text.replace("ends higher", "goes higher", 1)
    done = desk.bring("calls", text, "--keep-good")
    assert "1 row of calls added, 2 rejected" in done.stderr
    rejects = csv_rows((desk.folder / "calls.rejects.csv").read_text("utf-8"))
    assert [row["ref"] for row in rejects] == ["A1", "A2"]
    assert rejects[1]["why"].startswith("copy_of: `A1`")
    assert set(desk.outcomes("2025-03-17")) == {"A3"}


def test_a_copy_is_of_the_same_forecaster(desk):
    header = CALL_HEADER + ",copy_of"
    rows = [(*CALL_ROW, ""), ("C2", "o.quist", *CALL_ROW[2:], "C1")]
    found = desk.refuse("calls", table_text(header, rows))
    assert "line 3, copy_of: `C1` was said by `t.mavren`" in found[0]


def test_statements_that_are_no_calls_need_neither_instrument_nor_horizon(desk):
    desk.calls(
        ("C1", "o.quist", "2025-03-03", "", "not a call: no date", ""),
        ("C2", "o.quist", "2025-03-03", "ORVA", "NOT A CALL: opinion", ""),
    )
    rows = desk.outcomes("2025-03-17")
    assert {row["outcome"] for row in rows.values()} == {"not a call"}
    assert rows["C1"]["reason"] == "no date"
    assert desk.scores()[0]["not_a_call"] == 2
    assert "never scored" in desk.run("trace", "C1").stdout
    found = desk.refuse("calls", table_text(CALL_HEADER, [
        ("C3", "o.quist", "2025-03-03", "", "not a call: no idea", "")
    ]))  # fmt: skip
    assert "`no idea` is no reason the codebook knows" in found[0]


def test_a_known_name_with_other_details_is_refused(desk):
    found = desk.refuse("instruments", INSTRUMENTS.replace("Nelt Works", "Nelt Mills"))
    assert "line 3, instrument: `NELT` is in the ledger with other details" in found[0]
    found = desk.refuse("forecasters", FORECASTERS.replace("columnist", "editor"))
    assert "line 3, forecaster: `o.quist` is in the ledger with other details" in found[0]
    desk.calls(CALL_ROW)
    found = desk.refuse("calls", table_text(CALL_HEADER, [(*CALL_ROW[:-1], "2 weeks")]))
    assert "line 2, ref: the ledger holds another row under the ref `C1`" in found[0]
    assert "revises" in found[0]
    desk.bring("actions", ACTIONS)
    found = desk.refuse("actions", ACTIONS.replace("split,2", "split,3"))
    assert "line 2, action: the ledger holds another split of NELT on that day" in found[0]


def test_aliases_of_two_files_do_not_clash(desk):
    found = desk.refuse("forecasters", "forecaster,aliases\nv.lenz,Mavren\n")
    assert "line 2, aliases: `Mavren`" in found[0]
    found = desk.refuse("forecasters", "forecaster,aliases\nv.lenz,o.quist\n")
    assert "line 2, aliases: `o.quist`" in found[0]
    found = desk.refuse("forecasters", "forecaster\nMavren\n")
    assert "line 2, forecaster: `Mavren`" in found[0]
