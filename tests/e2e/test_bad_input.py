"""Bad files and bad requests: told in words with line, column, value and what to do."""

import os
import resource
import sqlite3
import subprocess
import sys
import time
from contextlib import closing
from importlib import resources

import pytest

from foresaid.ledger import store
from support.desk import (
    CALL_HEADER,
    FORECASTERS,
    INSTRUMENTS,
    Desk,
    csv_rows,
    dump,
    invoke,
    prices_text,
    table_text,
)

RANGES = "instrument,session,high,low,close"
GOOD_CALL = ("C1", "t.mavren", "2025-03-03", "ORVA", "ends higher", "1 week")
FILES = {
    "instruments": INSTRUMENTS,
    "forecasters": FORECASTERS,
    "prices": prices_text(),
    "actions": "instrument,effective,action,ratio\nNELT,2025-03-10,split,2\n",
    "calls": table_text(CALL_HEADER, [GOOD_CALL]),
}


@pytest.fixture(scope="module")
def stocked(tmp_path_factory):
    return Desk(tmp_path_factory.mktemp("stocked")).stock()


@pytest.fixture
def desk(tmp_path, stocked):
    return Desk(tmp_path, like=stocked)


def price(*cells, header="instrument,session,close"):
    return table_text(header, [cells])


def call(header=CALL_HEADER, **cells):
    row = dict(zip(CALL_HEADER.split(","), GOOD_CALL, strict=True)) | cells
    names = [*CALL_HEADER.split(","), *(name for name in cells if name not in header)]
    return table_text(",".join(names), [[row[name] for name in names]])


# ------------------------------------------------------------------------- files as a whole
@pytest.mark.parametrize("what", FILES)
@pytest.mark.parametrize(
    ("content", "words"),
    [
        (lambda _: "", "the file is empty"),
        (lambda _: "\n\n  \n", "the file is empty"),
        (lambda text: text.split("\n", 1)[0] + "\n", "column names and no rows"),
        (lambda text: text.replace(",", ":"), "only one column was found"),
        (lambda _: b"PK\x03\x04\x14\x00\x06\x00\x08", "a workbook or ZIP archive"),
        (lambda _: bytes(range(256)) * 40, "NUL byte"),
        (lambda text: text.encode("utf-16-le"), ""),
    ],
)
def test_files_that_hold_no_table(desk, what, content, words):
    found = desk.refuse(what, content(FILES[what]), name="odd.csv")
    assert words in "\n".join(found)
    assert found[-1].endswith("odd.csv was refused; nothing was imported.")


@pytest.mark.parametrize("what", FILES)
def test_a_mark_windows_line_ends_and_semicolons_are_taken(tmp_path, what):
    desk = Desk(tmp_path)
    for name, text in FILES.items():
        if name == what:
            break
        desk.bring(name, text)
    text = FILES[what].replace(";", "/").replace(",", ";").replace("\n", "\r\n")
    done = desk.bring(what, b"\xef\xbb\xbf" + text.encode(), name="odd.csv")
    assert "delimiter: semicolon" in done.stderr
    assert f"of {what} added" in done.stderr


def test_a_missing_file_and_a_folder(desk, tmp_path):
    for path, words in ((tmp_path / "none.csv", "No such file"), (tmp_path, "Is a directory")):
        before = desk.dump()
        done = desk.run("import", "prices", path, status=3)
        assert f"{path}: the file cannot be read: {words}" in done.stderr
        assert desk.dump() == before


def test_a_line_of_a_hundred_megabytes_is_refused_quickly_in_little_memory(desk, tmp_path):
    path = tmp_path / "long.csv"
    with path.open("wb") as file:
        file.write(b"instrument,session,close\nORVA,2025-03-17,")
        for _ in range(100):
            file.write(b"9" * 1_000_000)
        file.write(b"\nORVA,2025-03-18,x\n")
    begin = time.monotonic()
    done = subprocess.run(
        [sys.executable, "-m", "foresaid", "import", "prices", path, "--ledger", desk.ledger],
        capture_output=True,
        text=True,
        check=False,
        preexec_fn=lambda: resource.setrlimit(resource.RLIMIT_AS, (2**30, 2**30)),
        env=os.environ | {"OPENBLAS_NUM_THREADS": "1"},
    )
    assert done.returncode == 3, done.stderr
    assert "line 2: the row is longer than 1,048,576 characters" in done.stderr
    assert "line 3, close: `x` is no number" in done.stderr
    assert len(done.stderr) < 2_000
    assert time.monotonic() - begin < 15


def test_every_fault_of_a_file_is_told_at_once(desk):
    rows = [
        ("C1", "t.mavren", "31 February", "ORVA", "ends higher", "1 week"),
        ("C2", "t.maven", "2025-03-03", "ORVA", "ends higher", "1 week"),
        ("C3", "t.mavren", "2025-03-03", "ORVX", "ends higher", "1 week"),
        ("C4", "t.mavren", "2025-03-03", "ORVA", "ends hihger", "1 week"),
        ("C5", "t.mavren", "2025-03-03", "ORVA", "ends higher", "1 wek"),
        ("", "t.mavren", "2025-03-03", "ORVA", "ends higher", "1 week"),
        ("C7", "nobody", "2025-02-31", "NONE", "up", "2020-01-01"),
    ]
    found = desk.refuse("calls", table_text(CALL_HEADER, rows))
    places = [line.split(": ")[0].split(", ", 1)[1] for line in found[:-1]]
    single = ["said_at", "forecaster", "instrument", "claim", "horizon", "ref"]
    expected = [f"line {line}, {column}" for line, column in enumerate(single, 2)]
    assert places[:6] == expected
    assert set(places[6:]) == {
        f"line 8, {column}" for column in ("forecaster", "said_at", "instrument", "claim")
    }


def test_faults_of_prices_are_told_at_once(desk):
    text = table_text("instrument,session,high,low,close", [
        ("ORVA", "2025-02-30", "", "", "1"),
        ("ORVA", "2025-03-18", "90", "95", "92"),
        ("ORVA", "2025-03-19", "", "", "-1"),
        ("ORVX", "2025-03-19", "", "", "1"),
        ("ORVA", "2025-03-20", "", "", "1,5"),
        ("ORVA", "2025-03-21", "", "", ""),
        ("ORVA", "2199-03-21", "", "", "1"),
        ("NELT", "2025-03-21", "", "", "1"),
        ("NELT", "2025-03-21", "", "", "2"),
    ])  # fmt: skip
    found = desk.refuse("prices", text)
    lines = [line.split("line ")[1].split(":")[0] for line in found[:-1]]
    assert lines == [
        "2, session", "3, high", "4, close", "5, instrument", "6, close", "7, close",
        "8, session", "9, close", "10, close",
    ]  # fmt: skip


# ------------------------------------------------------------------------------- price cells
@pytest.mark.parametrize(
    ("text", "place", "words"),
    [
        (price("ORVA", "2025-03-17", "101,5"), "close", "Write 101.5."),
        (price("ORVA", "2025-03-17", "1,234.5"), "close", "Write 1234.5."),
        (price("ORVA", "2025-03-17", "1'234"), "close", "Write 1234."),
        (price("ORVA", "2025-03-17", "NaN"), "close", "is no price"),
        (price("ORVA", "2025-03-17", "inf"), "close", "is no price"),
        (price("ORVA", "2025-03-17", "1e999"), "close", "too large"),
        (price("ORVA", "2025-03-17", "=cmd()"), "close", "is no number"),
        (price("ORVA", "2025-03-17", "'=1+1"), "close", "is no number"),
        (price("ORVA", "2025-03-17", "0"), "close", "must be above zero"),
        (price("NELT", "2025-03-17", "-3"), "close", "must be above zero"),
        (price("ORVA", "2025-03-17", "$ 12"), "close", "Write 12."),
        (price("ORVA", "2025-03-17", ""), "close", "there is no close"),
        (price("ORVA", "31.02.2025", "1"), "session", "no day of the calendar"),
        (price("ORVA", "2025-02-31", "1"), "session", "The last day of February 2025"),
        (price("ORVA", "03/04/2025", "1"), "session", "3 April 2025 or 4 March 2025"),
        (price("ORVA", "14/03/2025", "1"), "session", "--dates dmy"),
        (price("ORVA", "2199-01-05", "1"), "session", "after today"),
        (price("ORVA", "45000", "1"), "session", "spreadsheet's number for a date"),
        (price("", "2025-03-17", "1"), "instrument", "no instrument is named"),
        (price("orva", "2025-03-17", "1"), "instrument", "nearest known is `ORVA`"),
        (
            price("ORVA", "2025-03-17", "9", "10", "9", header=RANGES),
            "high",
            "high 9 is below low 10",
        ),
        (
            price("ORVA", "2025-03-17", "12", "8", "13", header=RANGES),
            "close",
            "close 13 is not from low 8 to high 12",
        ),
    ],
)  # fmt: skip
def test_faults_of_price_cells(desk, text, place, words):
    found = desk.refuse("prices", text)
    assert f"line 2, {place}: " in found[0]
    assert words in found[0]
    assert len(found) == 2


def test_a_yield_may_be_negative_and_an_index_may_not(desk):
    done = desk.bring("prices", price("ORY10", "2025-03-17", "-0.25"), name="y.csv")
    assert "1 row of prices added" in done.stderr


def test_a_session_that_stands_twice(desk):
    rows = [("NELT", "2025-03-17", "5"), ("NELT", "2025-03-17", "6")]
    found = desk.refuse("prices", table_text("instrument,session,close", rows))
    assert "NELT has different prices for 2025-03-17 on lines 2 and 3" in found[0]
    same = [rows[0], rows[0]]
    done = desk.bring("prices", table_text("instrument,session,close", same), name="s.csv")
    assert "the row repeats line 2 and is passed over" in done.stderr
    assert "1 row of prices added" in done.stderr


def test_a_decimal_comma_is_taken_where_it_cannot_be_mistaken(desk):
    done = desk.bring(
        "prices", "instrument;session;close\nNELT;2025-03-17;101,5\n", name="c.csv"
    )
    assert "decimal mark: comma" in done.stderr
    text = "instrument;session;close\n" + "".join(
        f"NELT;2025-03-{18 + n};{cell}\n"
        for n, cell in enumerate(("1.234,5", "5,0", "6,0", "1.234"))
    )
    found = desk.refuse("prices", text)
    assert "line 2, close" in found[0]
    assert "Write 1234,5." in found[0]
    assert "line 5, close: `1.234` may be 1234 with a thousands mark or 1,234" in found[1]


# -------------------------------------------------------------------------------- call cells
@pytest.mark.parametrize(
    ("text", "column", "words"),
    [
        (call(said_at="31 February"), "said_at", "is no date or time"),
        (call(said_at="2025-02-31"), "said_at", "last day of February 2025 is 2025-02-28"),
        (call(said_at="03/04/2025"), "said_at", "may be 3 April 2025 or 4 March 2025"),
        (call(said_at="2199-01-01"), "said_at", "after today"),
        (call(said_at="2025-03-14 12:00", instrument="BARE"), "said_at", "has none to lend"),
        (call(said_at="2025-03-14 12:00 Europe/Viena"), "said_at", "`Europe/Vienna`"),
        (call(said_at="2025-03-30 02:30 Europe/Vienna"), "said_at", "skipped 02:30"),
        (call(said_at="2025-03-14 25:00"), "said_at", "Hours run from 00 to 23"),
        (call(said_at=""), "said_at", "there is no date"),
        (call(instrument="ORVX"), "instrument", "nearest known is `ORVA`"),
        (call(instrument=""), "instrument", "there is no instrument"),
        (call(forecaster="nobody"), "forecaster", "foresaid import forecasters FILE"),
        (call(claim="ends higher by 5"), "claim", "5"),
        (call(claim="ends above 5%"), "claim", "level"),
        (call(claim="touches 10%"), "claim", "level"),
        (call(claim="falls 100%"), "claim", "100"),
        (call(claim="ends above -5"), "claim", "Write a level above zero"),
        (call(claim="ends higher by 5pp"), "claim", "does not move in `pp`"),
        (call(claim="goes to the moon"), "claim", ""),
        (call(claim=""), "claim", "there is no claim"),
        (call(claim="=cmd()"), "claim", "=cmd()"),
        (call(horizon="2025-03-01"), "horizon", "before"),
        (call(horizon="next blue moon"), "horizon", "next blue moon"),
        (call(horizon="0 days"), "horizon", ""),
        (call(probability="65"), "probability", "Write 65% or 0.65"),
        (call(probability="-0.2"), "probability", "from 0 to 1"),
        (call(probability="120%"), "probability", "from 0% to 100%"),
        (call(probability="NaN"), "probability", "NaN"),
        (call(probability="=0.5"), "probability", "=0.5"),
        (call(probability="lickely"), "probability", "likely"),
        (call(claim="range 90 to 110 at 80%", probability="0.8"), "probability", "itself"),
        (call(link="example.org/x"), "link", "https://"),
        (call(given="if it rains"), "given", ""),
        (call(given="ORVX ends higher by 2025-04-01"), "given", "ORVX"),
        (call(ref="two\nlines"), "ref", "short text"),
        (call(ref="x" * 300), "ref", "short text"),
        (call(coded_at="2025-02-01"), "coded_at", "before the statement"),
    ],
)  # fmt: skip
def test_faults_of_call_cells(desk, text, column, words):
    found = desk.refuse("calls", text)
    assert f"line 2, {column}: " in found[0], found
    assert words in found[0]
    assert len(found) == 2
    value = csv_rows(text)[0][column]
    if value and value.isprintable() and len(value) < 60:
        assert f"[{value}]" in found[0]


def test_half_a_percent_of_a_yield_has_two_readings_and_both_are_shown(desk):
    found = desk.refuse("calls", call(instrument="ORY10", claim="ends higher by 0.5%"))
    assert "two readings: 0.5 percentage points, or 0.5 percent of its value" in found[0]
    assert "Write `0.5pp` for the first" in found[0]
    assert "`2bp`" in found[0]


def test_one_ref_for_two_rows(desk):
    found = desk.refuse("calls", table_text(CALL_HEADER, [GOOD_CALL, GOOD_CALL]))
    assert "line 3, ref: the ref `C1` stands on line 2 already" in found[0]


def test_cells_too_many_and_too_few(desk):
    text = CALL_HEADER + "\nC1,t.mavren,2025-03-03,ORVA,ends higher,1 week,more\nC2,t.mavren\n"
    found = desk.refuse("calls", text)
    assert "line 2: the row has 7 cells, the first row names 6 columns" in found[0]
    assert "line 3: the row has 2 cells" in found[1]


@pytest.mark.parametrize(
    ("what", "text", "column", "words"),
    [
        ("instruments", "instrument,zone\nX,Mars/Olympus\n", "zone", "is no time zone"),
        ("instruments", "instrument,opens,closes\nX,9am,17:00\n", "opens", "no time of day"),
        ("instruments", "instrument,opens\nX,09:00\n", "closes", "Write both, or neither"),
        ("instruments", "instrument,kind\nX,stock\n", "kind", "Write one of: index, share"),
        ("instruments", "instrument,sense\nX,upside\n", "sense", "direct, inverse"),
        ("instruments", "instrument,kind\nX,pair\n", "base", "no base"),
        ("instruments", "instrument\n\nX\nX\n", "instrument", "stands on line 3 already"),
        ("forecasters", "forecaster,aliases\na,c\nb,c\n", "aliases", "forecaster of line 2"),
        ("actions", "instrument,effective,action\nX,2025-03-03,split\n", "instrument", "known"),
        ("actions", "instrument,effective,action\nNELT,2025-03-03,split\n", "ratio", "needs"),
        ("actions", "instrument,effective,action\nNELT,2025-03-03,spilt\n", "action", "split"),
        (
            "actions",
            "instrument,effective,action,ratio\nNELT,2025-03-03,split,-2\n",
            "ratio",
            "above zero",
        ),
    ],
)  # fmt: skip
def test_faults_of_things_and_actions(desk, what, text, column, words):
    found = desk.refuse(what, text)
    assert words in found[0]
    assert f", {column}: " in found[0]


# ------------------------------------------------------------------------ hostile but honest
STRANGE = (
    'Tilda "Til" O\'Mavren, the 3rd',
    "😀 Ōno 東京 Ünë",
    "مثال עברית",
    "'; DROP TABLE statement; --",
    "=HYPERLINK(1)",
    "[bold]not markup[/bold] :smile:",
    "a\tb",
)


@pytest.mark.parametrize("text", STRANGE)
def test_strange_text_goes_through_unchanged(desk, text):
    symbol = text.replace("\t", " ")
    desk.bring("forecasters", table_text("forecaster,name", [(symbol, symbol)]), name="f.csv")
    desk.bring("instruments", table_text("instrument,name", [(symbol, symbol)]), name="i.csv")
    desk.bring("prices", prices_text(symbol), name="p.csv")
    header = CALL_HEADER + ",quote,outlet,note"
    row = (symbol, symbol, "2025-03-03", symbol, "ends higher", "1 week", text, text, text)
    desk.bring("calls", table_text(header, [row]))
    desk.settle()
    shown = csv_rows(desk.run("calls", "--format", "csv").stdout)[0]
    kept = {name: value.removeprefix("'") if text[0] == "=" else value
            for name, value in shown.items()}  # fmt: skip
    assert (kept["ref"], kept["forecaster"], kept["instrument"]) == (symbol,) * 3
    assert (kept["quote"], kept["note"]) == (text, text)
    assert kept["outcome"] == "miss"
    if text[0] == "=":
        assert shown["quote"] == "'" + text
    assert invoke("trace", "--ledger", desk.ledger, "--", symbol).stdout.startswith(symbol)
    assert symbol in desk.run("calls").stdout
    assert [row["forecaster"] for row in desk.scores()] == [symbol]
    assert "statement" in desk.dump()


def test_exported_calls_come_in_again_elsewhere(desk, tmp_path):
    header = CALL_HEADER + ",quote"
    desk.bring("calls", table_text(header, [
        (*GOOD_CALL, "=cmd()"), ("-C2", *GOOD_CALL[1:], "- so he said"),
    ]))  # fmt: skip
    text = desk.run("calls", "--format", "csv").stdout
    (tmp_path / "other").mkdir()
    other = Desk(tmp_path / "other").stock()
    rows = csv_rows(text)
    names = (*CALL_HEADER.split(","), "quote")
    text = table_text(",".join(names), [[row[name] for name in names] for row in rows])
    other.bring("calls", text)
    assert csv_rows(other.run("calls", "--format", "csv").stdout) == rows


def test_control_characters_do_not_reach_the_terminal(desk):
    header = CALL_HEADER + ",quote,outlet,note,collection,coder"
    row = (*GOOD_CALL, "red \x1b[31m", "bell \x07", "\x1b]0;x", "\x9b1m", "\x08")
    found = desk.refuse("calls", table_text(header, [row]))
    columns = [line.split(", ")[2].split(":")[0] for line in found[:-1]]
    assert sorted(columns) == ["coder", "collection", "note", "outlet", "quote"]
    assert "\x1b" not in "\n".join(found)
    # line breaks and tabs are part of a quote
    desk.bring("calls", table_text(header, [(*GOOD_CALL, "one\ntwo\tthree", "", "", "", "")]))


# -------------------------------------------------------------------------------- the ledger
COMMANDS = (
    ("calls",),
    ("settle",),
    ("score",),
    ("trace", "C1"),
    ("import", "prices", "x.csv"),
    ("decide", "C1", "met", "--at", "2025-03-03", "--evidence", "x"),
)


@pytest.mark.parametrize("command", COMMANDS)
@pytest.mark.parametrize(
    ("content", "words"),
    [
        (None, "There is no ledger at"),
        (b"", "is not a foresaid ledger"),
        (b"just some words\n" * 100, "is not a usable ledger"),
        ("folder", "There is no ledger at"),
    ],
)
def test_paths_that_are_no_ledger(tmp_path, command, content, words):
    path = tmp_path / "desk.foresaid"
    if content == "folder":
        path.mkdir()
    elif content is not None:
        path.write_bytes(content)
    done = invoke(*command, "--ledger", path, status=4)
    assert words in done.stderr
    assert done.stdout == ""
    assert content in (None, "folder") or path.read_bytes() == content


def test_another_program_s_database_is_no_ledger(tmp_path):
    path = tmp_path / "other.db"
    with closing(sqlite3.connect(path)) as opened:
        opened.execute("CREATE TABLE statement (x)")
        opened.commit()
    before = path.read_bytes()
    assert "is not a foresaid ledger" in invoke("calls", "--ledger", path, status=4).stderr
    assert path.read_bytes() == before


def test_a_ledger_of_a_newer_program(desk):
    with closing(sqlite3.connect(desk.ledger)) as opened:
        opened.execute("PRAGMA user_version = 99")
    done = desk.run("calls", status=4)
    assert "was made by a newer foresaid" in done.stderr


def test_a_read_only_ledger(desk, monkeypatch):
    """SQLite opens the file for reading alone, as where the disk or user may not write."""
    path = desk.file("calls.csv", FILES["calls"])
    before = desk.dump()
    connect = store._connect
    monkeypatch.setattr(store, "_connect", lambda path, **_: connect(path, mode="ro"))
    for args in (("import", "calls", path), ("settle",)):
        told = desk.run(*args, status=4).stderr
        assert str(desk.ledger) in told
        assert "Nothing was changed" in told
    desk.run("calls")
    monkeypatch.undo()
    assert desk.dump() == before


def test_new_takes_no_path_twice(desk, tmp_path):
    before = desk.dump()
    done = invoke("new", desk.ledger, status=2)
    assert "is there already" in done.stderr
    assert desk.dump() == before
    text = desk.file("notes.txt", "dear diary\n")
    invoke("new", text, status=2)
    assert text.read_text() == "dear diary\n"
    done = invoke("new", tmp_path / "none" / "desk.foresaid", status=2)
    assert "There is no folder" in done.stderr
    invoke("demo", "--ledger", desk.ledger, status=2)
    assert dump(desk.ledger) == before


# ------------------------------------------------------------------------------ the requests
@pytest.mark.parametrize(
    ("args", "words"),
    [
        (("settle", "--as-of", "31 March"), "is not a date"),
        (("settle", "--as-of", "2025-02-31"), "is not a date"),
        (("settle", "--vintage", "7"), "no price vintage 7"),
        (("score", "--by", "mood"), "the keys are forecaster"),
        (("score", "--by", "year,year"), "twice"),
        (("trace", "C9"), "C9"),
        (("calls", "--outcome", "hits"), "hit"),
        (("calls", "--forecaster", "t.maven"), "t.mavren"),
        (("calls", "--instrument", "orva"), "ORVA"),
        (("import", "quotes", "x.csv"), "instruments"),
        (("settle", "--format", "xml"), "csv"),
    ],
)
def test_requests_that_make_no_sense(desk, args, words):
    desk.calls(GOOD_CALL)
    desk.settle()
    before = desk.dump()
    done = desk.run(*args, status=2)
    assert words in done.stderr
    assert done.stdout == ""
    assert desk.dump() == before


def test_nothing_settled_and_nothing_there(tmp_path):
    desk = Desk(tmp_path)
    for args in (("score",), ("trace", "C1")):
        assert "Nothing is settled yet" in desk.run(*args, status=2).stderr
    assert "Nothing is settled yet" in desk.run("calls").stderr
    assert desk.outcomes("2025-03-17") == {}
    assert desk.scores() == []
    assert "There is no call to score yet" in desk.run("score").stderr
    assert desk.scores("all")[0]["verdict"] == "too few to tell"
    desk.stock(prices=False).calls(GOOD_CALL)
    row = desk.outcomes("2025-03-17")["C1"]
    assert row["outcome"] == "open"
    assert row["reason"] == "no price yet on or after the statement"
    assert desk.scores()[0]["open"] == 1
    assert desk.run("trace", "C1").stdout.startswith("C1: open\n")


# ------------------------------------------------------------------------------ codebooks
def codebook():
    return (resources.files("foresaid.model") / "codebook.toml").read_text("utf-8")


@pytest.mark.parametrize(
    ("text", "status", "words"),
    [
        ("not = [toml", 3, "is not valid TOML"),
        ("version = 1\n", 3, "is missing"),
        (codebook().replace("level = 0.05 ", "level = 5 "), 3, "level"),
        (codebook().replace("\nyield = ", "\nrate = "), 2, "no instrument kind `yield`"),
    ],
)
def test_codebooks_by_which_nothing_can_be_settled(desk, text, status, words):
    desk.calls(GOOD_CALL)
    before = desk.dump()
    path = desk.file("own.toml", text)
    for args in (("settle",), ("import", "calls", desk.file("c.csv", FILES["calls"]))):
        done = desk.run(*args, "--codebook", path, status=status)
        assert words in done.stderr
    assert desk.dump() == before
    assert "none.toml" in desk.run("settle", "--codebook", "none.toml", status=3).stderr


def test_a_codebook_of_ones_own_is_kept_with_what_it_settled(desk):
    text = codebook().replace('name = "foresaid default"', 'name = "own"')
    text = text.replace('day_only = "before-close"', 'day_only = "after-close"')
    desk.calls(GOOD_CALL)
    desk.settle("2025-03-17", "--codebook", desk.file("own.toml", text))
    row = desk.outcomes()["C1"]
    assert (row["reference_session"], row["first_session"]) == ("2025-03-04", "2025-03-04")
    assert "that day's after" not in desk.run("trace", "C1").stdout
    assert desk.outcomes("2025-03-17")["C1"]["reference_session"] == "2025-03-03"


# --------------------------------------------------------------------------- very many faults
@pytest.mark.parametrize("what", ["prices", "calls"])
def test_very_many_faults_are_cut_and_counted(desk, what):
    if what == "prices":
        rows = [("NELT", "2025-03-17", f"x{n}") for n in range(1_500)]
        found = desk.refuse(what, table_text("instrument,session,close", rows))
        assert "500 more issues of this file are not listed" in found[-2]
    else:
        rows = [(f"C{n}", *GOOD_CALL[1:4], "up", "1 week") for n in range(1_500)]
        found = desk.refuse(what, table_text(CALL_HEADER, rows))
        assert found[-2] == "... and 500 more of the same file."
    assert len(found) == 1_002


def test_a_trace_waits_for_a_settlement_after_a_decision(desk):
    header = CALL_HEADER + ",given"
    desk.bring("calls", table_text(header, [(*GOOD_CALL, "fact: the dam opens by 2025-03-06")]))
    decide = ("decide", "C1", "met", "--at", "2025-03-04", "--evidence", "Gazette 7")
    desk.settle()
    desk.run(*decide)
    assert "decided since" in desk.run("trace", "C1", status=2).stderr
    desk.settle()
    assert "came true" in desk.run("trace", "C1").stdout


@pytest.mark.parametrize(
    ("claim", "told"),
    [
        ("beats ORVA", "`ORVA` is compared with itself"),
        ("tops NELT, ORVA", "`ORVA` is compared with itself"),
        ("beats NELTT", "`NELTT` is no known instrument"),
        ("quantiles 10%=95, 5%=100", "percentages do not rise"),
        ("bins <95: 20%, >95: 70%", "add up to 90"),
    ],
)
def test_claims_that_cannot_be_judged(tmp_path, claim, told):
    desk = Desk(tmp_path).stock()
    row = ("C1", "t.mavren", "2025-03-03", "ORVA", claim, "2025-03-10")
    message, *rest = desk.refuse("calls", table_text(CALL_HEADER, [row]))
    assert len(rest) <= 1, "one fault, and that the file was refused"
    assert told in message
    assert "line 2, claim" in message
