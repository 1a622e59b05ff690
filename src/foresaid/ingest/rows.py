"""One row at a time: its cells, its faults, and the loop over a table."""

from __future__ import annotations

import unicodedata
from typing import TYPE_CHECKING, TypeVar

from foresaid.ingest.faults import by_line, cell_issue, nearest
from foresaid.model.issues import clip
from foresaid.model.records import Parsed
from foresaid.model.said import CellFault

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable

    from foresaid.ingest.tables import RawTable
    from foresaid.model.issues import Issue

LONGEST_TEXT = 200
"""Characters that a name may have."""

_MOST_HINTS = 50
_NOT_TEXT = frozenset(("Cc", "Cs", "Zl", "Zp"))

Thing = TypeVar("Thing")


class RowReader:
    """One row of a table while it is being read; collects its issues.

    Attributes
    ----------
    line : int
        Line of the file.
    issues : list of Issue
        Faults found so far.
    """

    def __init__(self, table: RawTable, index: int) -> None:
        self.line = table.lines[index]
        self.issues: list[Issue] = []
        self._table, self._index = table, index

    def cell(self, column: str) -> str:
        """Return a cell as it stands, empty where there is no such column."""
        cells = self._table.cells.get(column)
        return cells[self._index] if cells else ""

    def text(self, column: str, *, limit: int | None = LONGEST_TEXT) -> str:
        """Return a cell of text, checked for length and for characters that are no text."""
        text = self.cell(column)
        self.check_text(column, text, limit=limit)
        return text

    def check_text(self, column: str, text: str, *, limit: int | None = LONGEST_TEXT) -> None:
        """Record a text that is too long or holds control characters."""
        if limit is not None and len(text) > limit:
            message = f"the text has {len(text):,} characters"
            self.fault(column, "text-too-long", message, f"At most {limit} are kept.")
        if any(unicodedata.category(letter) in _NOT_TEXT for letter in text):
            message = f"`{clip(text)}` holds a line break or control character"
            self.fault(column, "control-character", message, "Take it out.")

    def fault(self, column: str, code: str, message: str, hint: str = "") -> None:
        """Record a fault of one cell."""
        fault = CellFault(code, message, hint)
        value = self.cell(column)
        self.issues.append(cell_issue(fault, self._table.file, self.line, column, value))

    def unknown(self, column: str, known: Iterable[str]) -> None:
        """Record that a cell names no known instrument."""
        value = self.cell(column)
        close = nearest(value, known) if self._index < _MOST_HINTS else ""
        hint = "Import it first: foresaid import instruments FILE."
        hint = f"The nearest known is `{close}`." if close else hint
        what = f"`{clip(value)}` is no known" if value else "there is no"
        self.fault(column, "unknown-instrument", f"{what} instrument", hint)


def own_name(row: RowReader, column: str, first: dict[str, int]) -> None:
    """Check the name of a row: there, fit to be printed, and the first of its kind.

    Parameters
    ----------
    row : RowReader
        The row.
    column : str
        Where its name stands.
    first : dict of str to int
        First line of every name so far; the row's own is added.
    """
    name = row.text(column)
    if not name:
        hint = "Write one, or take the row out."
        row.fault(column, f"no-{column}", f"there is no {column}", hint)
    elif name in first:
        message = f"`{clip(name)}` stands on line {first[name]} already"
        row.fault(column, f"double-{column}", message, "Keep one of the rows.")
    first.setdefault(name, row.line)


def read_rows(
    table: RawTable, issues: Iterable[Issue], read: Callable[[RowReader], Thing]
) -> Parsed[Thing]:
    """Return what ``read`` makes of every row, without the rows in which it finds faults.

    Parameters
    ----------
    table : RawTable
        The file.
    issues : iterable of Issue
        Faults of its columns; where one of them is an error no row is read.
    read : callable
        From a row to a record; it records the row's faults in the row.
    """
    found = list(issues)
    rows: list[Thing] = []
    lines: list[int] = []
    n_rows = 0 if any(issue.severity == "error" for issue in found) else table.n_rows
    for index in range(n_rows):
        row = RowReader(table, index)
        thing = read(row)
        found += row.issues
        if not row.issues:
            rows.append(thing)
            lines.append(row.line)
    return Parsed(tuple(rows), tuple(lines), tuple(sorted(found, key=by_line)), table.remarks)
