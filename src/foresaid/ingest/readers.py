"""A CSV file as columns of text with line numbers, faults and what was detected."""

from __future__ import annotations

import io
import os
import re
from dataclasses import replace
from typing import TYPE_CHECKING

from foresaid.ingest.faults import IssueList
from foresaid.ingest.lines import Lines, Record, Tap, encoding_of, records
from foresaid.ingest.quotes import Fault
from foresaid.ingest.tables import RawTable, check_columns
from foresaid.model.issues import Issue, clip

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Iterator, Sequence
    from pathlib import Path

__all__ = ["RawTable", "check_columns", "read_table"]

DELIMITERS = {",": "comma", ";": "semicolon", "\t": "tab", "|": "pipe"}
NUMERIC = frozenset(
    ("open", "high", "low", "close", "volume", "total", "adj close", "ratio", "amount",
     "probability")
)  # fmt: skip

_MOST_COLUMNS = 20_000
_QUOTED = re.compile(r'"[^"]*"')
_EXCEL_HINT = re.compile(r'"?sep=([,;\t|])"?', re.IGNORECASE)
_DISARMED = ("'=", "'+", "'-", "'@")
_FOREIGN = (
    (b"PK\x03\x04", "a workbook or ZIP archive"),
    (b"\xd0\xcf\x11\xe0", "an old workbook"),
    (b"\x1f\x8b", "a gzip archive"),
    (b"PAR1", "a Parquet file"),
    (b"%PDF", "a PDF document"),
)


def read_table(path: Path, *, progress: Callable[[int, int], None] | None = None) -> RawTable:
    """Return a CSV file as text columns; whatever is wrong with it is an issue.

    Parameters
    ----------
    path : Path
        Comma, semicolon, tab or pipe between cells; UTF-8 (also UTF-16 with its mark); line
        ends of any system.
    progress : callable or None
        Called with the bytes read so far and the size of the file, about once a mebibyte.

    Returns
    -------
    RawTable
        Rows with too many or too few cells, bad bytes, or quotes that do not close are kept
        in ``broken``, and in ``issues`` with their lines.

    Notes
    -----
    The file is read once, as a stream, so a pipe will do. A record may have 2**20
    characters; a longer line is passed over without being kept.
    """
    try:
        with path.open("rb", buffering=0) as source:
            tap = Tap(source, total=os.fstat(source.fileno()).st_size, progress=progress)
            return _TableReader(str(path), tap).read()
    except OSError as fault:
        message = f"the file cannot be read: {fault.strerror or fault}"
        return RawTable(str(path), issues=(Issue("unreadable-file", message, str(path)),))


class _TableReader:
    """One file while it is being read."""

    def __init__(self, file: str, tap: Tap) -> None:
        self.file, self.tap = file, tap
        self.buffer = io.BufferedReader(tap, 1 << 18)
        self.issues = IssueList(file)
        self.remarks: list[str] = []
        self.broken: dict[int, tuple[str, ...]] = {}
        self.lines: list[int] = []

    def read(self) -> RawTable:
        """Return the table."""
        head = self.buffer.peek(8)[:8]
        for mark, what in _FOREIGN:
            if head.startswith(mark):
                return self._refuse("not-text", f"this is {what}", "Save it as CSV in UTF-8.")
        encoding = encoding_of(head)
        replaced = not encoding.startswith("utf-8")
        errors = "replace" if replaced else "surrogateescape"
        stream = io.TextIOWrapper(self.buffer, encoding=encoding, errors=errors)
        lines = Lines(stream)
        delimiter = self._delimiter(lines)
        rows = records(lines, delimiter, replaced=replaced)
        header = next(rows, None)
        if header is None:
            return self._refuse("empty-file", "the file is empty", "Is it the right file?")
        if replaced:
            self.remarks.append(f"encoding: {encoding.upper()}")
        return self._body(header, rows, lines, delimiter)

    def _refuse(self, code: str, message: str, hint: str) -> RawTable:
        """Return a table without rows, for a file that holds none."""
        while self.buffer.read(1 << 20):
            pass
        issue = Issue(code, message, self.file, hint=hint)
        return RawTable(self.file, issues=(issue,), sha256=self.tap.sha256())

    def _delimiter(self, lines: Lines) -> str:
        """Return the delimiter that cuts the first line into most cells."""
        text = ""
        for number, line in lines:
            named = _EXCEL_HINT.fullmatch(line.strip(" "))
            if named is not None:
                return self._told_delimiter(named[1])
            if line.strip():
                lines.give_back([(number, line)])
                text = _QUOTED.sub("", line)
                break
        best = max(DELIMITERS, key=text.count)
        return self._told_delimiter(best if text.count(best) else ",")

    def _told_delimiter(self, delimiter: str) -> str:
        self.remarks.append(f"delimiter: {DELIMITERS[delimiter]}")
        return delimiter

    def _body(
        self, header: Record, rows: Iterator[Record], lines: Lines, delimiter: str
    ) -> RawTable:
        headers = [_one_line(cell) for cell in header.cells]
        while headers and not headers[-1]:
            headers.pop()
        fault = header.fault or _header_fault(headers)
        if fault is not None:
            self.issues.add(self._issue(header.line, fault))
            return self._table(header, delimiter, {})
        parts: list[list[str]] = [[] for _ in headers]
        self._rows(lines, rows, delimiter, parts)
        kept = self._kept(headers, header.line)
        if not self.lines and not self.broken:
            self.issues.add(self._issue(header.line, _NO_ROWS))
        columns = {headers[at].lower(): parts[at] for at in kept}
        table = self._table(header, delimiter, columns)
        written = tuple(headers[at] for at in kept)
        return replace(table, headers=written, positions=tuple(kept))

    def _rows(
        self, lines: Lines, rows: Iterator[Record], delimiter: str, parts: list[list[str]]
    ) -> None:
        """Read all rows into the columns, whole blocks at a time where nothing is odd."""
        width = len(parts)
        while True:
            plain = lines.take_plain(delimiter, width) if width > 1 else None
            if plain is not None:
                first, flat = plain
                self.lines += range(first, first + len(flat) // width)
                _extend(parts, [flat[at::width] for at in range(width)])
            elif not self._single_rows(lines, rows, parts):
                break

    def _single_rows(
        self, lines: Lines, rows: Iterator[Record], parts: list[list[str]]
    ) -> bool:
        """Read rows one by one to the end of a block; return False at the end of the file."""
        chunk: list[list[str]] = []
        for record in rows:
            if (cells := self._checked(record, len(parts))) is not None:
                chunk.append(cells)
                self.lines.append(record.line)
            if not lines.has_pending:
                break
        else:
            _extend(parts, zip(*chunk, strict=True))
            return False
        _extend(parts, zip(*chunk, strict=True))
        return True

    def _checked(self, record: Record, width: int) -> list[str] | None:
        """Return a record's cells, None when it has a fault or is empty."""
        cells, fault = record.cells, record.fault
        if fault is None:
            if len(cells) == width and cells[0].strip():
                return cells
            if not any(map(str.strip, cells)):
                return None
            while len(cells) > width and not cells[-1].strip():
                cells = cells[:-1]
            if len(cells) == width:
                return cells
            fault = _width_fault(len(cells), width)
        self.broken[record.line] = tuple(cells)
        self.issues.add(self._issue(record.line, fault, clip("|".join(cells[:20]))))
        return None

    def _kept(self, headers: list[str], line: int) -> list[int]:
        """Return the positions of the columns that are used; tell of the others."""
        kept: list[int] = []
        first: dict[str, int] = {}
        for at, name in enumerate(headers):
            if not name and at > 0:
                message = f"column {at + 1} has no name and is passed over"
                fault = Fault("nameless-column", message, "Name it, or take it out.")
                self.issues.add(replace(self._issue(line, fault), severity="note"))
            elif name.lower() in first:
                places = f"{first[name.lower()] + 1} and {at + 1}"
                message = f"columns {places} are both named `{clip(name)}`"
                fault = Fault("double-column", message, "Rename one, or take it out.")
                self.issues.add(self._issue(line, fault, column=name))
            else:
                first[name.lower()] = at
                kept.append(at)
        return kept

    def _table(
        self,
        header: Record,
        delimiter: str,
        cells: dict[str, list[str]],
    ) -> RawTable:
        while self.buffer.read(1 << 20):
            pass
        decimal = _decimal(cells, delimiter)
        if decimal == ",":
            self.remarks.append("decimal mark: comma")
        return RawTable(
            file=self.file,
            columns=tuple(cells),
            cells=cells,
            lines=self.lines if cells else [],
            issues=self.issues.result(),
            remarks=tuple(self.remarks),
            decimal=decimal,
            delimiter=delimiter,
            sha256=self.tap.sha256(),
            header_line=header.line,
            broken=self.broken,
        )

    def _issue(
        self, line: int, fault: Fault, value: str | None = None, column: str | None = None
    ) -> Issue:
        column = clip(column) if column else None
        return Issue(fault.code, fault.message, self.file, line, column, value, fault.hint)


_NO_ROWS = Fault("no-rows", "the file has column names and no rows", "Is it the right file?")


def _header_fault(headers: Sequence[str]) -> Fault | None:
    if not any(headers):
        return Fault("no-columns", "the first row names no column", "Name the columns.")
    if len(headers) > _MOST_COLUMNS:
        message = f"the first row names {len(headers):,} columns"
        return Fault("too-many-columns", message, f"At most {_MOST_COLUMNS:,} are read.")
    return None


def _width_fault(n_cells: int, width: int) -> Fault:
    message = f"the row has {n_cells} cells, the first row names {width} columns"
    if n_cells > width:
        hint = 'Put a cell that holds the delimiter in quotes: "a, b".'
        return Fault("too-many-cells", message, hint)
    return Fault("too-few-cells", message, "Add the missing cells, empty ones too.")


def _one_line(text: str) -> str:
    return " ".join(text.replace("\ufeff", "").split())


def _extend(parts: list[list[str]], columns: Iterable[Iterable[str]]) -> None:
    """Put cells at the ends of their columns, stripped."""
    for part, column in zip(parts, columns, strict=False):
        stripped = list(map(str.strip, column))
        if "'" in "".join(stripped):
            stripped = [cell[1:] if cell.startswith(_DISARMED) else cell for cell in stripped]
        part.extend(stripped)


def _decimal(cells: dict[str, list[str]], delimiter: str) -> str:
    """Return the decimal mark: a comma where more numbers have one than have a point."""
    if delimiter == ",":
        return "."
    names = [name for name in cells if name in NUMERIC] or list(cells)[1:]
    text = "".join("".join(cells[name]) for name in names)
    return "," if text.count(",") > text.count(".") else "."
