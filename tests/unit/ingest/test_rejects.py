import pytest

from foresaid.ingest.readers import read_table
from foresaid.ingest.rejects import rejected_lines, write_rejects
from foresaid.ingest.things import parse_forecasters
from foresaid.model.errors import UsageError
from foresaid.model.issues import Issue


@pytest.fixture
def source(tmp_path):
    return tmp_path / "people.csv"


def table_of(path, text):
    path.write_bytes(text.encode())
    return read_table(path)


def test_refused_rows_are_written_with_the_reason(source):
    table = table_of(source, "Forecaster;Name\na;1\n;2\nb;3\n")
    issues = parse_forecasters(table).issues
    target = write_rejects(source, table, rejected_lines(table, issues))
    assert target.name == "people.rejects.csv"
    lines = target.read_text(encoding="utf-8").splitlines()
    assert lines[0] == "Forecaster;Name;why"
    assert lines[1].startswith(";2;forecaster: there is no forecaster.")
    assert len(lines) == 2


def test_no_file_is_overwritten(source):
    table = table_of(source, "forecaster,name\na,1\n")
    bad = {2: [Issue("odd", "odd")]}
    names = [write_rejects(source, table, bad).name for _ in range(3)]
    assert names == ["people.rejects.csv", "people.rejects-2.csv", "people.rejects-3.csv"]


def test_rejects_of_rejects_keep_a_short_name(source):
    table = table_of(source, "forecaster,name\na,1\n")
    bad = {2: [Issue("odd", "odd")]}
    first = write_rejects(source, table, bad)
    second = write_rejects(first, read_table(first), bad)
    assert second.name == "people.rejects-2.csv"
    assert second.read_text(encoding="utf-8") == first.read_text(encoding="utf-8")


def test_mended_rows_come_back_as_they_were(source):
    odd = '"x, ""y""","=cmd()|z",-5,"a\nb",@SUM'
    table = table_of(source, f"ref,text,number,long,at\n{odd}\n")
    cells = {name: column[0] for name, column in table.cells.items()}
    target = write_rejects(source, table, {2: [Issue("odd", "=odd")]})
    text = target.read_text(encoding="utf-8")
    assert "'=cmd()" in text
    assert "'@SUM" in text
    assert "'-5" not in text
    assert "'=odd" in text
    again = read_table(target)
    assert {name: again.cells[name][0] for name in cells} == cells


def test_broken_rows_are_written_as_far_as_they_go(source):
    table = table_of(source, "a,,b,why\n1,x\n1,x,2,old,more\n")
    target = write_rejects(source, table, rejected_lines(table, ()))
    lines = target.read_text(encoding="utf-8").splitlines()
    assert lines[0] == "a,b,why"
    assert lines[1].startswith('1,,"the row has 2 cells')
    assert lines[2].startswith('1,2,more,"the row has 5 cells')


def test_bad_bytes_stay_bad(source):
    source.write_bytes(b"a,b\nMu\xf1oz,2\n")
    table = read_table(source)
    target = write_rejects(source, table, rejected_lines(table, ()))
    assert b"Mu\xf1oz,2," in target.read_bytes()
    assert [issue.code for issue in read_table(target).issues] == ["bad-encoding"]


def test_notes_and_whole_files_reject_no_row(source):
    table = table_of(source, "forecaster,name\na,1\n")
    issues = [
        Issue("note", "x", line=2, severity="note"),
        Issue("file", "x"),
        Issue("header", "x", line=1),
    ]
    assert rejected_lines(table, issues) == {}
    assert rejected_lines(table, issues, [2]) == {2: []}


def test_a_folder_that_cannot_be_written_is_a_usage_error(tmp_path):
    table = table_of(tmp_path / "people.csv", "forecaster\na\n")
    with pytest.raises(UsageError, match="cannot be written"):
        write_rejects(tmp_path / "none" / "people.csv", table, {2: []})
