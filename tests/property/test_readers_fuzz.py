"""Whatever a file holds, readers give rows and issues, never an exception."""

import csv
import datetime as dt
import io

import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from foresaid.ingest import lines as lines_module
from foresaid.ingest.cells import parse_date, parse_number, parse_probability
from foresaid.ingest.dates import parse_said_at
from foresaid.ingest.prices import parse_prices
from foresaid.ingest.readers import check_columns, read_table
from foresaid.ingest.rejects import write_rejects
from foresaid.ingest.things import parse_actions, parse_forecasters, parse_instruments
from foresaid.model.records import Instrument
from foresaid.model.said import CellFault, SaidAt

KNOWN = {"MARB": Instrument("MARB"), "MY10": Instrument("MY10", kind="yield")}
HEADERS = (
    "instrument,session,open,high,low,close,volume,total",
    "Date;Open;High;Low;Close;Adj Close",
    "session\tMARB\tMY10",
    "instrument,effective,action,ratio,amount,currency,into",
    "instrument,name,zone,opens,closes,sense,kind,benchmark,base,term,why",
    "forecaster|name|role|aliases",
    "",
)
WORDS = st.sampled_from(
    ["MARB", "MY10", "2025-03-14", "03/04/2025", "45730", "1,5", "1.5", "-2", "1e999", "nan",
     "split", "merger", "halt", "pair", "09:00", "Europe/Vienna", "'=x", '"', '""', "\r", "\n",
     "\0", "\ufeff", "\udcff", ",", ";", "\t", "|", " ", "é", "x;y"]
)  # fmt: skip
TEXTS = st.builds(
    lambda header, parts: f"{header}\n{''.join(parts)}",
    st.sampled_from(HEADERS),
    st.lists(st.one_of(WORDS, st.sampled_from(",;\n"), st.text(max_size=3)), max_size=60),
)
BYTES = st.one_of(
    st.binary(max_size=300),
    TEXTS.map(lambda text: text.encode("utf-8", "surrogatepass")),
    TEXTS.map(lambda text: text.encode("utf-8", "replace")),
    TEXTS.map(lambda text: text.encode("utf-16", "surrogatepass")),
    TEXTS.map(lambda text: text.encode("latin-1", "replace")),
)


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    return tmp_path_factory.mktemp("fuzz")


def check_table(table):
    assert len(table.columns) == len(table.headers) == len(table.positions)
    assert set(table.columns) == set(table.cells)
    assert all(len(column) == table.n_rows for column in table.cells.values())
    assert table.lines == sorted(set(table.lines))
    assert not set(table.lines) & set(table.broken)
    assert len(table.sha256) == 64
    assert set(table.broken) <= {issue.line for issue in table.issues}


def check_rows(parsed, table):
    assert set(parsed.lines) <= set(table.lines)
    assert len(parsed.rows) == len(parsed.lines)
    at_fault = {issue.line for issue in parsed.issues if issue.severity == "error"}
    assert not at_fault & set(parsed.lines)
    if not any(issue.line in (None, table.header_line) for issue in parsed.issues):
        assert at_fault == set(table.lines) - set(parsed.lines)


def check_prices(rows, table):
    assert not set(rows.bad_lines.tolist()) & set(rows.lines.tolist())
    assert set(rows.bad_lines.tolist()) <= set(table.lines)
    assert np.isfinite(rows.close).all()
    assert not np.isnat(rows.session).any()
    pairs = list(zip(rows.instrument.tolist(), rows.session.tolist(), strict=True))
    assert len(set(pairs)) == len(pairs)
    assert {rows.symbols[number] for number in rows.instrument} <= set(KNOWN)


def read_all_ways(path):
    table = read_table(path)
    check_table(table)
    check_columns(table, ("ref", "claim"), ("note",))
    check_rows(parse_instruments(table, kinds=("index", "pair"), known=KNOWN), table)
    check_rows(parse_forecasters(table), table)
    check_rows(parse_actions(table, KNOWN, dates="dmy"), table)
    for instrument in (None, "MARB", "none"):
        rows = parse_prices(
            table,
            instrument=instrument,
            known=KNOWN,
            allows_negative=lambda kind: kind == "yield",
            today=dt.date(2025, 6, 30),
        )
        check_prices(rows, table)
    return table


@settings(max_examples=400, deadline=None)
@given(BYTES)
@example(b'"')
@example(b'a,b\n"x\n1,2\n"y" z\n')
@example(b"\xff\xfe\x00")
@example(b"\xff\xfe\x00\x00\x01")
@example(b",,\n1,2,3\n")
def test_any_bytes_give_issues(folder, data):
    path = folder / "any.csv"
    path.write_bytes(data)
    table = read_all_ways(path)
    target = write_rejects(path, table, {line: [] for line in (*table.lines, *table.broken)})
    try:
        read_all_ways(target)
    finally:
        target.unlink()


@settings(max_examples=100, deadline=None)
@given(st.lists(st.sampled_from(['"', "x", "\n", ",", '""', " "]), max_size=80))
def test_a_small_limit_is_kept(folder, parts):
    path = folder / "limit.csv"
    path.write_text("a,b\n1,2\n" + "".join(parts), encoding="utf-8")
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(lines_module, "LONGEST_RECORD", 7)
        patch.setattr(lines_module, "_BLOCK", 5)
        table = read_table(path)
    check_table(table)
    assert all(len(cell) <= 7 for column in table.cells.values() for cell in column)


CELL = st.text(
    st.characters(exclude_categories=("Cs",), exclude_characters="\0\r\ufeff"), max_size=12
).filter(lambda text: not text.startswith("'"))


@settings(max_examples=200, deadline=None)
@given(
    st.integers(2, 5).flatmap(
        lambda width: st.lists(
            st.lists(CELL, min_size=width, max_size=width).filter(
                lambda row: any(cell.strip() for cell in row)
            ),
            max_size=8,
        ).map(lambda rows: (width, rows))
    ),
    st.sampled_from(",;\t|"),
    st.tuples(
        st.sampled_from(["\n", "\r\n", "\r"]), st.sampled_from(["utf-8", "utf-8-sig", "utf-16"])
    ),
    st.booleans(),
    st.sampled_from([1, 20, 1 << 18]),
)
def test_well_formed_tables_come_back(folder, sized, delimiter, form, quote_all, block):
    end, encoding = form
    width, rows = sized
    if encoding == "utf-16":
        rows = [[cell.replace("\ufffd", "?") for cell in row] for row in rows]
    names = [f"c{number}" for number in range(width)]
    stream = io.StringIO()
    quoting = csv.QUOTE_ALL if quote_all else csv.QUOTE_MINIMAL
    writer = csv.writer(stream, delimiter=delimiter, lineterminator="\n", quoting=quoting)
    writer.writerows([names, *rows])
    path = folder / "well.csv"
    path.write_bytes(stream.getvalue().replace("\n", end).encode(encoding))
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(lines_module, "_BLOCK", block)
        table = read_table(path)
    assert [issue for issue in table.issues if issue.code != "no-rows"] == []
    assert table.columns == tuple(names)
    columns = list(zip(*rows, strict=True)) or [()] * width
    for name, column in zip(names, columns, strict=True):
        assert table.cells[name] == [cell.strip() for cell in column]
    starts, line = [], 2
    for row in rows:
        starts.append(line)
        line += 1 + sum(cell.count("\n") for cell in row)
    assert table.lines == starts


@given(st.one_of(st.text(max_size=30), WORDS, st.datetimes().map(str), st.floats().map(str)))
def test_any_text_in_a_cell_gives_a_value_or_a_fault(text):
    for decimal in ".,":
        assert isinstance(parse_number(text, decimal=decimal), (float, CellFault))
    for order in ("iso", "dmy", "mdy"):
        assert isinstance(parse_date(text, order=order), (dt.date, CellFault))
    assert isinstance(parse_said_at(text), (SaidAt, CellFault))
    number = parse_probability(text)
    assert number is None or isinstance(number, CellFault) or 0.0 <= number <= 1.0


@given(
    st.dates(dt.date(1900, 1, 1), dt.date(2199, 12, 31)),
    st.times().map(lambda time: time.isoformat("seconds")),
    st.sampled_from(["America/New_York", "Europe/Vienna", "Asia/Kathmandu", "Pacific/Apia"]),
)
def test_canonical_moments_are_read_as_themselves(day, time, zone):
    said = parse_said_at(f"{day} {time} {zone}")
    if isinstance(said, SaidAt):
        again = parse_said_at(said.text)
        assert again.text == said.text
        assert again.utc == said.utc
    else:
        assert said.code in {"no-such-time", "ambiguous-time"}
