import hashlib
import time
import tracemalloc

import pytest

from foresaid.ingest.faults import LISTED
from foresaid.ingest.readers import check_columns, read_table


@pytest.fixture
def read(tmp_path):
    def reader(data, **keywords):
        path = tmp_path / "some.csv"
        path.write_bytes(data if isinstance(data, bytes) else data.encode())
        return read_table(path, **keywords)

    return reader


def codes(table):
    return [(issue.line, issue.code) for issue in table.issues]


def test_a_plain_file(read):
    table = read("Ref, Close\na1,1.5\n b2 , 2.5 \n")
    assert table.columns == ("ref", "close")
    assert table.headers == ("Ref", "Close")
    assert table.header("ref") == "Ref"
    assert table.cells == {"ref": ["a1", "b2"], "close": ["1.5", "2.5"]}
    assert table.lines == [2, 3]
    assert table.n_rows == 2
    assert table.issues == ()
    assert table.remarks == ("delimiter: comma",)
    assert not table.has_errors


def test_the_digest_is_that_of_the_bytes(read):
    data = b"\xef\xbb\xbfa,b\r\n1,2\r\n"
    assert read(data).sha256 == hashlib.sha256(data).hexdigest()
    assert read(b"").sha256 == hashlib.sha256(b"").hexdigest()
    assert read(b"PK\x03\x04" + b"x" * 10**6).sha256 == (
        hashlib.sha256(b"PK\x03\x04" + b"x" * 10**6).hexdigest()
    )


def test_the_name_stands_as_given(read):
    table = read("a,b\n1\n")
    assert table.file.endswith("some.csv")
    assert table.issues[0].file == table.file


@pytest.mark.parametrize(
    ("delimiter", "name"), [(",", "comma"), (";", "semicolon"), ("\t", "tab"), ("|", "pipe")]
)
def test_delimiters_are_detected_and_told(read, delimiter, name):
    table = read(f"a{delimiter}b\n1{delimiter}2\n")
    assert table.cells == {"a": ["1"], "b": ["2"]}
    assert table.delimiter == delimiter
    assert f"delimiter: {name}" in table.remarks


def test_a_comma_in_a_quoted_name_is_no_delimiter(read):
    assert read('"a, b, c";d\n1;2\n').columns == ("a, b, c", "d")


def test_the_line_that_spreadsheets_put_first_names_the_delimiter(read):
    table = read("sep=;\na;b\n1;2\n")
    assert table.cells == {"a": ["1"], "b": ["2"]}
    assert table.lines == [3]


@pytest.mark.parametrize("end", ["\n", "\r\n", "\r"])
def test_line_ends_of_any_system(read, end):
    table = read(end.join(["a,b", "1,2", "", '3,"x', 'y"', "5,6"]))
    assert table.cells == {"a": ["1", "3", "5"], "b": ["2", "x\ny", "6"]}
    assert table.lines == [2, 4, 6]


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16", "utf-32"])
def test_encodings_with_their_marks(read, encoding):
    table = read("né,b\nñ,🙂\n".encode(encoding))
    assert table.cells == {"né": ["ñ"], "b": ["🙂"]}
    assert table.issues == ()


def test_a_byte_that_is_no_text_is_named_with_its_line(read):
    table = read(b"a,b\n1,2\nMu\xf1oz,3\n4,5\n")
    assert table.cells["a"] == ["1", "4"]
    assert codes(table) == [(3, "bad-encoding")]
    assert "0xF1" in table.issues[0].message
    assert set(table.broken) == {3}


def test_nul_bytes_are_named(read):
    assert codes(read(b"a,b\n1,\x002\n3,4\n")) == [(2, "nul-byte")]


@pytest.mark.parametrize(
    "data", [b"PK\x03\x04rest", b"\x1f\x8brest", b"PAR1rest", b"\xd0\xcf\x11\xe0rest"]
)
def test_files_that_are_no_text_are_refused(read, data):
    assert codes(read(data)) == [(None, "not-text")]


@pytest.mark.parametrize("data", ["", "\n\n", "\ufeff", "  \n"])
def test_an_empty_file(read, data):
    assert codes(read(data)) == [(None, "empty-file")]


def test_a_header_alone(read):
    table = read("a,b\n")
    assert codes(table) == [(1, "no-rows")]
    assert table.n_rows == 0
    assert table.cells == {"a": [], "b": []}


def test_a_missing_file_is_an_issue(tmp_path):
    assert codes(read_table(tmp_path / "none.csv")) == [(None, "unreadable-file")]
    assert codes(read_table(tmp_path)) == [(None, "unreadable-file")]


def test_rows_of_another_width_are_named(read):
    table = read("a,b\n1\n2,3\n4,5,6\n")
    assert codes(table) == [(2, "too-few-cells"), (4, "too-many-cells")]
    assert table.cells == {"a": ["2"], "b": ["3"]}
    assert table.broken == {2: ("1",), 4: ("4", "5", "6")}


def test_empty_cells_behind_a_row_do_no_harm(read):
    table = read("a,b,,\n1,2,,\n3,4\n,,,\n , \n")
    assert table.cells == {"a": ["1", "3"], "b": ["2", "4"]}
    assert table.issues == ()


def test_blank_lines_are_skipped_and_counted(read):
    assert read("\n\na,b\n\n1,2\n   \n3,4\n").lines == [5, 7]


def test_two_columns_of_one_name(read):
    table = read("a,b,A\n1,2,3\n")
    assert codes(table) == [(1, "double-column")]
    assert "1 and 3" in table.issues[0].message


def test_a_first_column_without_a_name_is_kept(read):
    assert read(",a\nx,1\n").columns == ("", "a")


def test_other_columns_without_a_name_are_passed_over(read):
    table = read("a,,b\n1,2,3\n")
    assert table.columns == ("a", "b")
    assert [(issue.code, issue.severity) for issue in table.issues] == [
        ("nameless-column", "note")
    ]


def test_quoted_cells(read):
    table = read('a,b\n"x, y", "say ""no"""\n5" pipe,""\n')
    assert table.cells == {"a": ["x, y", '5" pipe'], "b": ['say "no"', ""]}


def test_line_numbers_stay_right_behind_long_cells(read):
    table = read('a,b\n"one\n\ntwo",1\nthree,2\n"4\n",3\nfive,4\n')
    assert table.lines == [2, 5, 6, 8]
    assert table.cells["a"][0] == "one\n\ntwo"


def test_a_quote_that_never_closes_names_its_line_and_spares_the_rest(read):
    table = read('a,b\n1,2\n"x,3\n4,5\n6,7\n')
    assert codes(table) == [(3, "open-quote")]
    assert "line 3" in table.issues[0].message
    assert table.lines == [2, 4, 5]


def test_text_behind_a_closed_quote_is_named(read):
    table = read('a,b\n"he said "up" today",2\n4,5\n')
    assert codes(table) == [(2, "stray-quote")]
    assert table.lines == [3]


def test_a_stray_quote_that_meets_a_later_one(read):
    table = read('a,b\n"x,1\n2,3\n"y",4\n5,6\n')
    assert codes(table) == [(2, "stray-quote")]
    assert table.cells["a"] == ["2", "y", "5"]


def test_a_huge_line_is_told_quickly_and_not_kept(tmp_path):
    path = tmp_path / "huge.csv"
    with path.open("wb") as stream:
        stream.write(b"a,b\n1,2\n")
        for _ in range(100):
            stream.write(b"x" * 10**6)
        stream.write(b"\n3,4\n")
    tracemalloc.start()
    begin = time.perf_counter()
    table = read_table(path)
    taken, peak = time.perf_counter() - begin, tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert codes(table) == [(3, "line-too-long")]
    assert table.lines == [2, 4]
    assert taken < 20.0
    assert peak < 30e6


def test_many_broken_rows_are_counted(read):
    table = read("a,b\n" + "1\n" * (LISTED + 7))
    assert len(table.issues) == LISTED + 1
    assert table.issues[-1].code == "more-issues"
    assert "7" in table.issues[-1].message
    assert table.has_errors
    assert len(table.broken) == LISTED + 7


def test_formulas_in_text_stay_and_their_guard_is_taken_off(read):
    table = read("a,b\n=cmd(),'=cmd()\n@SUM,'+A1\n'tis,'-5\n")
    assert table.cells == {"a": ["=cmd()", "@SUM", "'tis"], "b": ["=cmd()", "+A1", "-5"]}


def test_a_decimal_comma_is_detected_and_told(read):
    table = read("session;close;note\n2025-01-02;1,5;v1.2\n2025-01-03;2,5;v1.3\n")
    assert table.decimal == ","
    assert "decimal mark: comma" in table.remarks
    assert read("session;close\n2025-01-02;1.5\n").decimal == "."
    assert read('session,close\n2025-01-02,"1,5"\n').decimal == "."


def test_a_decimal_comma_where_columns_are_instruments(read):
    assert read("session;AAA;BBB\n2025-01-02;1,5;\n2025-01-03;2,5;7\n").decimal == ","


def test_progress_is_told_to_the_end(read):
    told = []
    data = "a,b\n" + "1,2\n" * 10**6
    table = read(data, progress=lambda done, total: told.append((done, total)))
    assert table.n_rows == 10**6
    assert told[-1] == (len(data), len(data))
    assert [done for done, _ in told] == sorted(done for done, _ in told)
    assert len(told) > 2


def test_blocks_and_single_rows_give_the_same(read):
    plain = [f"{number},x{number},{number / 7}" for number in range(60_000)]
    mixed = [*plain]
    mixed[30_000] = '30000,"x30000",4285.714285714285'
    first, second = read("a,b,c\n" + "\n".join(plain)), read("a,b,c\n" + "\n".join(mixed))
    assert first.cells == second.cells
    assert first.lines == second.lines == list(range(2, 60_002))


# --------------------------------------------------------------------------------- columns
def test_missing_columns_are_named_together(read):
    issues = check_columns(read("ref,who\n1,2\n"), ("ref", "claim", "horizon"))
    assert [issue.code for issue in issues] == ["missing-column", "unknown-column"]
    assert "`claim`" in issues[0].message
    assert "`horizon`" in issues[0].message


def test_a_misspelt_column_is_recognised(read):
    issues = check_columns(read("ref,Horizont\n1,2\n"), ("ref", "horizon"))
    assert "`Horizont`" in issues[0].hint
    assert "`horizon`" in issues[0].hint


def test_unknown_columns_are_notes_and_why_is_silent(read):
    issues = check_columns(read("ref,clam,why\n1,2,3\n"), ("ref",), ("claim",))
    assert [(issue.severity, issue.column) for issue in issues] == [("note", "clam")]
    assert "`claim`" in issues[0].hint


def test_one_column_only_is_the_wrong_delimiter(read):
    (issue,) = check_columns(read("ref:claim\n1:2\n"), ("ref", "claim"))
    assert issue.code == "one-column"
    assert "ref:claim" in issue.message


def test_one_column_may_be_enough(read):
    assert check_columns(read("forecaster\nm.tarrow\n"), ("forecaster",)) == ()


def test_a_file_that_was_not_read_has_no_faults_of_columns(read):
    assert check_columns(read(""), ("ref",)) == ()
