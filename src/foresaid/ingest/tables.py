"""A read file as text columns, and the check of its column names."""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property
from typing import TYPE_CHECKING

from foresaid.ingest.faults import IssueList, nearest
from foresaid.model.issues import Issue, clip

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

REASON_COLUMN = "why"
"""The column that a reject file adds; it is passed over wherever it turns up."""

_MOST_HINTS = 20


@dataclass(frozen=True)
class RawTable:
    """One file as text, column by column.

    Attributes
    ----------
    file : str
        Name of the file as given.
    columns : tuple of str
        Column names in the order of the file, stripped and in lower case. A first column
        without a name is called ``""``.
    headers : tuple of str
        The same names as written.
    cells : dict of str to list of str
        Stripped text by column name; all lists are as long as ``lines``. An apostrophe
        before ``= + - @``, which keeps a spreadsheet from running a formula, is taken off.
    lines : list of int
        Line of the file on which each row starts, counted from 1.
    issues : tuple of Issue
        Faults of the file and of rows that could not be split.
    remarks : tuple of str
        What was detected: delimiter, decimal mark, encoding.
    decimal, delimiter : str
        The marks in use.
    sha256 : str
        Digest of the bytes of the file.
    header_line : int
        Line of the column names, 0 where there is none.
    broken : dict of int to tuple of str
        The rows that could not be split or trusted, by line: not in ``cells``.
    positions : tuple of int
        Where each of ``columns`` stands in a row of the file.
    """

    file: str
    columns: tuple[str, ...] = ()
    headers: tuple[str, ...] = ()
    cells: dict[str, list[str]] = field(default_factory=dict)
    lines: list[int] = field(default_factory=list)
    issues: tuple[Issue, ...] = ()
    remarks: tuple[str, ...] = ()
    decimal: str = "."
    delimiter: str = ","
    sha256: str = ""
    header_line: int = 0
    broken: dict[int, tuple[str, ...]] = field(default_factory=dict)
    positions: tuple[int, ...] = ()

    @property
    def n_rows(self) -> int:
        """How many rows could be split into cells."""
        return len(self.lines)

    @property
    def has_errors(self) -> bool:
        """Whether any issue keeps a row or the file out."""
        return any(issue.severity == "error" for issue in self.issues)

    def header(self, column: str) -> str:
        """Return the name of a column as written in the file."""
        return self._written[column]

    @cached_property
    def _written(self) -> dict[str, str]:
        return dict(zip(self.columns, self.headers, strict=True))


def check_columns(
    table: RawTable, required: Sequence[str], optional: Iterable[str] = ()
) -> tuple[Issue, ...]:
    """Return the faults of a table's column names.

    Parameters
    ----------
    table : RawTable
        A read file.
    required : sequence of str
        Columns without which the file is of no use.
    optional : iterable of str
        Columns that may be there.

    Returns
    -------
    tuple of Issue
        One error that names all missing columns, and a note for every column that is passed
        over. Nothing for a file whose first row could not be read: the table says so itself.
    """
    if not table.columns:
        return ()
    known = (*required, *optional)
    missing = [name for name in required if name not in table.cells]
    unknown = [name for name in table.columns if name not in known and name != REASON_COLUMN]
    if missing and len(table.columns) == 1:
        return (_one_column(table, required),)
    issues = IssueList(table.file)
    if missing:
        issues.add(_missing_columns(table, missing, unknown))
    for number, name in enumerate(unknown):
        issues.add(_unknown_column(table, name, known if number < _MOST_HINTS else ()))
    return issues.result()


def _one_column(table: RawTable, required: Sequence[str]) -> Issue:
    header = table.headers[0]
    message = f"only one column was found, `{clip(header)}`"
    hint = f"Put a comma, semicolon, tab or pipe between the columns: {', '.join(required)}."
    return Issue(
        "one-column", message, table.file, table.header_line, value=clip(header), hint=hint
    )


def _missing_columns(table: RawTable, missing: Sequence[str], unknown: Sequence[str]) -> Issue:
    names = ", ".join(f"`{name}`" for name in missing)
    plural = "columns" if len(missing) > 1 else "column"
    renames = []
    for name in missing:
        close = nearest(name, unknown)
        if close:
            renames.append(f"Rename `{clip(table.header(close))}` to `{name}`.")
    hint = " ".join(renames) or "Name the columns in the first row of the file."
    return Issue(
        "missing-column", f"missing {plural}: {names}", table.file, table.header_line, hint=hint
    )


def _unknown_column(table: RawTable, name: str, known: Iterable[str]) -> Issue:
    header = clip(table.header(name)) or "(no name)"
    close = nearest(name, known)
    return Issue(
        "unknown-column",
        f"column `{header}` is not known and is passed over",
        table.file,
        table.header_line,
        header,
        hint=f"Was `{close}` meant?" if close else "",
        severity="note",
    )
