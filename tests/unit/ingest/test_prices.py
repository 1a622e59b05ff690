import datetime as dt

import numpy as np
import pytest

from foresaid.ingest.faults import LISTED
from foresaid.ingest.prices import parse_prices
from foresaid.ingest.readers import read_table
from foresaid.model.records import Instrument

KNOWN = {
    "MARB": Instrument("MARB"),
    "TESX": Instrument("TESX"),
    "MY10": Instrument("MY10", kind="yield"),
}
TODAY = dt.date(2025, 6, 30)


@pytest.fixture
def parse(tmp_path):
    def parser(text, instrument=None, **keywords):
        path = tmp_path / "prices.csv"
        path.write_text(text, encoding="utf-8")
        options = {
            "known": KNOWN,
            "allows_negative": lambda kind: kind == "yield",
            "today": TODAY,
            **keywords,
        }
        return parse_prices(read_table(path), instrument=instrument, **options)

    return parser


def codes(rows):
    return [(issue.line, issue.code) for issue in rows.issues]


def days(rows):
    return rows.session.astype(str).tolist()


HEAD = "instrument,session,open,high,low,close,volume,total\n"


def test_long_files(parse):
    rows = parse(
        HEAD
        + "MARB,2025-03-13,10,11,9,10.5,100,20.5\n"
        + "TESX,2025-03-13,,,,7,,\n"
        + "MARB,2025-03-14,10,12,9,11,0,21\n"
    )
    assert rows.issues == ()
    assert rows.symbols == ("MARB", "TESX")
    assert rows.instrument.tolist() == [0, 1, 0]
    assert days(rows) == ["2025-03-13", "2025-03-13", "2025-03-14"]
    assert rows.session.dtype == np.dtype("datetime64[D]")
    assert rows.close.tolist() == [10.5, 7.0, 11.0]
    np.testing.assert_array_equal(rows.high, [11.0, np.nan, 12.0])
    np.testing.assert_array_equal(rows.total, [20.5, np.nan, 21.0])
    np.testing.assert_array_equal(rows.volume, [100.0, np.nan, 0.0])
    assert rows.lines.tolist() == [2, 3, 4]
    assert rows.bad_lines.tolist() == []
    assert "shape: a row for each instrument and session" in rows.remarks
    assert not rows.has_errors


def test_one_instrument_with_the_usual_columns(parse):
    rows = parse(
        "Date,Open,High,Low,Close,Adj Close,Volume\n2025-03-14 00:00:00,1,3,1,2,1.9,5\n",
        "MARB",
    )
    assert [(issue.code, issue.severity) for issue in rows.issues] == [
        ("adjusted-close", "note")
    ]
    assert rows.symbols == ("MARB",)
    assert rows.close.tolist() == [2.0]
    assert rows.n_rows == 1


@pytest.mark.parametrize("name", ["session", "Date", ""])
def test_wide_closes(parse, name):
    rows = parse(f"{name},TESX,MARB\n2025-03-13,7,\n2025-03-14,,11\n2025-03-17,8,12\n")
    assert rows.issues == ()
    assert rows.symbols == ("TESX", "MARB")
    assert rows.close.tolist() == [7.0, 8.0, 11.0, 12.0]
    assert rows.lines.tolist() == [2, 4, 3, 4]
    assert np.isnan(rows.high).all()


def test_decimal_commas(parse):
    rows = parse("session;close;volume\n2025-03-13;1,5;3\n2025-03-14;1.5;3\n", "MARB")
    rows = parse("session;close\n2025-03-12;1,5\n2025-03-13;1,75\n2025-03-14;1.5\n", "MARB")
    assert rows.close.tolist() == [1.5, 1.75]
    assert codes(rows) == [(4, "decimal-mark")]


def test_dates_in_another_order(parse):
    text = "session,close\n03/04/2025,1\n14/03/2025,2\n"
    assert codes(parse(text, "MARB")) == [(2, "ambiguous-date"), (3, "not-iso-date")]
    assert days(parse(text, "MARB", dates="dmy")) == ["2025-04-03", "2025-03-14"]


@pytest.mark.parametrize(
    ("row", "code", "column"),
    [
        ("MARBB,2025-03-14,,,,1,,", "unknown-instrument", "instrument"),
        (",2025-03-14,,,,1,,", "unknown-instrument", "instrument"),
        ("MARB,2025-02-30,,,,1,,", "no-such-date", "session"),
        ("MARB,,,,,1,,", "empty", "session"),
        ("MARB,2025-07-01,,,,1,,", "future-session", "session"),
        ("MARB,2025-03-14,,,,nan,,", "not-finite", "close"),
        ("MARB,2025-03-14,,,,1e999,,", "not-finite", "close"),
        ("MARB,2025-03-14,,,,=A1,,", "not-a-number", "close"),
        ('MARB,2025-03-14,,,,"1,234.5",,', "thousands-mark", "close"),
        ("MARB,2025-03-14,,,,,,", "missing-close", "close"),
        ("MARB,2025-03-14,,,,0,,", "not-positive", "close"),
        ("MARB,2025-03-14,-1,,,1,,", "not-positive", "open"),
        ("MARB,2025-03-14,,,,1,,-3", "not-positive", "total"),
        ("MARB,2025-03-14,,1,2,1.5,,", "high-below-low", "high"),
        ("MARB,2025-03-14,,2,1,3,,", "outside-range", "close"),
        ("MARB,2025-03-14,,2,,3,,", "outside-range", "close"),
        ("MARB,2025-03-14,0.5,2,1,1.5,,", "outside-range", "open"),
        ("MARB,2025-03-14,,,,1,-5,", "negative-volume", "volume"),
        ("MARB,2025-03-14,,,,1,many,", "not-a-number", "volume"),
    ],
)
def test_a_wrong_row_is_named_and_kept_out(parse, row, code, column):
    rows = parse(HEAD + "TESX,2025-03-13,,,,7,,\n" + row + "\n")
    assert [(issue.line, issue.code, issue.column) for issue in rows.issues] == [
        (3, code, column)
    ]
    assert rows.close.tolist() == [7.0]
    assert rows.bad_lines.tolist() == [3]
    assert rows.has_errors


def test_a_price_on_the_bound_is_inside(parse):
    rows = parse(HEAD + "MARB,2025-03-14,1.1,1.1,1.1,1.1000000001,,\n")
    assert rows.issues == ()


def test_a_session_today_is_no_future(parse):
    assert parse(f"session,close\n{TODAY},1\n", "MARB").issues == ()


def test_yields_may_be_negative(parse):
    rows = parse(
        "session,high,low,close\n2025-03-14,-0.1,-0.3,-0.2\n2025-03-17,0,0,0\n", "MY10"
    )
    assert rows.issues == ()
    assert rows.close.tolist() == [-0.2, 0.0]


def test_an_unknown_instrument_is_told_once(parse):
    rows = parse(
        "instrument,session,close\n"
        + "".join(f"MARBX,2025-03-{day:02d},1\n" for day in range(1, 21))
        + "TESX,2025-03-14,2\n"
    )
    (issue,) = rows.issues
    assert (issue.code, issue.line) == ("unknown-instrument", 2)
    assert "20 rows" in issue.message
    assert "`MARB`" in issue.hint
    assert rows.bad_lines.tolist() == list(range(2, 22))
    assert rows.close.tolist() == [2.0]


def test_two_prices_for_one_session_name_both_lines(parse):
    rows = parse(
        "session,close\n2025-03-14,1\n2025-03-13,5\n2025-03-14,1\n2025-03-14,2\n", "MARB"
    )
    assert codes(rows) == [(2, "double-session"), (4, "double-session"), (5, "double-session")]
    assert "lines 2 and 5" in rows.issues[0].message
    assert "lines 4 and 5" in rows.issues[1].message
    assert rows.close.tolist() == [5.0]


def test_repeated_rows_are_kept_once(parse):
    rows = parse("session,close,open\n2025-03-14,1,\n2025-03-14,1.0,\n2025-03-14,1,\n", "MARB")
    assert codes(rows) == [(3, "repeated-row"), (4, "repeated-row")]
    assert "line 2" in rows.issues[0].message
    assert {issue.severity for issue in rows.issues} == {"note"}
    assert rows.lines.tolist() == [2]
    assert not rows.has_errors
    assert rows.bad_lines.tolist() == []


def test_wide_lines_are_doubled_once(parse):
    rows = parse("session,MARB,TESX\n2025-03-14,1,2\n2025-03-14,1,2\n2025-03-17,3,4\n")
    assert codes(rows) == [(3, "repeated-row")]
    rows = parse("session,MARB,TESX\n2025-03-14,1,2\n2025-03-14,1,3\n2025-03-17,3,4\n")
    assert codes(rows) == [(2, "double-session"), (3, "double-session")]
    assert rows.close.tolist() == [3.0, 4.0]


def test_a_wide_cell_at_fault_keeps_its_line_out(parse):
    rows = parse("session,MARB,TESX\n2025-03-14,x,2\n2025-03-17,3,4\n2025-02-30,,\n")
    assert [(issue.line, issue.code, issue.column) for issue in rows.issues] == [
        (2, "not-a-number", "MARB"),
        (4, "no-such-date", "session"),
    ]
    assert rows.close.tolist() == [3.0, 4.0]


def test_a_wide_column_of_no_instrument_is_named(parse):
    rows = parse("session,MARB,TESY\n2025-03-14,1,2\n")
    (issue,) = rows.issues
    assert (issue.code, issue.column, issue.line) == ("unknown-instrument", "TESY", 1)
    assert "`TESX`" in issue.hint
    assert rows.close.tolist() == [1.0]


@pytest.mark.parametrize(
    ("text", "instrument", "code"),
    [
        ("session,close\n2025-03-14,1\n", None, "no-instrument"),
        ("session,close\n2025-03-14,1\n", "NONE", "unknown-instrument"),
        ("session,open\n2025-03-14,1\n", "MARB", "missing-column"),
        ("session,price\n2025-03-14,1\n", "MARB", "missing-column"),
        ("instrument,session,close\nMARB,2025-03-14,1\n", "MARB", "two-instruments"),
        ("instrument,close\nMARB,1\n", None, "missing-column"),
        ("a,b\n1,2\n", None, "missing-column"),
        ("session\n2025-03-14\n", None, "missing-column"),
        ("session:close\n2025-03-14:1\n", None, "one-column"),
    ],
)
def test_files_of_no_known_shape_give_no_rows(parse, text, instrument, code):
    rows = parse(text, instrument)
    assert code in [issue.code for issue in rows.issues]
    assert rows.has_errors
    assert rows.n_rows == 0


def test_an_unread_file_gives_no_rows_and_no_further_issue(parse):
    rows = parse("")
    assert (rows.n_rows, rows.issues) == (0, ())


def test_very_many_faults_are_counted(parse):
    rows = parse("session,close\n" + "2025-03-14,x\n" * (LISTED + 50), "MARB")
    assert len(rows.issues) == LISTED + 1
    assert rows.issues[-1].code == "more-issues"
    assert rows.issues[-1].message.startswith("50 ")
    assert rows.issues[-1].severity == "error"
    assert len(rows.bad_lines) == LISTED + 50


def test_errors_are_listed_before_notes(parse):
    day = dt.date(1990, 1, 1)
    lines = [f"{day},1"] * (LISTED + 5) + ["2025-03-14,x"]
    rows = parse("session,close\n" + "\n".join(lines) + "\n", "MARB")
    assert (len(lines) + 1, "not-a-number") in codes(rows)
    assert rows.issues[-1].severity == "note"


def test_huge_numbers_do_not_warn(parse):
    rows = parse(
        "session,high,low,close\n2025-03-14,1.7e308,-1.7e308,1.7e308\n2025-03-17,1e308,1e-320,1\n",
        "MY10",
    )
    assert rows.issues == ()


def test_columns_agree_with_cells(parse):
    texts = ["1", "1.5", ".5", "5.", "1e3", "-2", "+3", "1_0", "e5", ".", "-", "", "0x1", "--1"]
    rows = parse(
        "session,close\n"
        + "".join(f"2025-01-{day:02d},{text}\n" for day, text in enumerate(texts, start=1)),
        "MY10",
    )
    assert rows.close.tolist() == [1.0, 1.5, 0.5, 5.0, 1000.0, -2.0, 3.0]
    assert rows.bad_lines.tolist() == list(range(9, 16))
