"""Price rows before they are checked, and what the checks find in them."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np

from foresaid.ingest.faults import LISTED, by_line, cell_issue, more_issues
from foresaid.model.issues import Issue
from foresaid.model.said import CellFault

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Sequence

    from foresaid.ingest.tables import RawTable
    from foresaid.model.bars import BoolArray, FloatArray, IntArray

FIELDS = ("open", "high", "low", "close", "volume", "total")

NO_LINES = np.zeros(0, dtype=np.int64)


@dataclass(frozen=True)
class Draft:
    """Price rows before they are checked; arrays have shape (n,).

    Attributes
    ----------
    table : RawTable
        The file.
    symbols : tuple of str
        Instruments, by number.
    instrument : ndarray of int
        Number of the instrument.
    row : ndarray of int
        Row of the table.
    session : ndarray of datetime64[D]
        NaT where the date has a fault.
    values : dict of str to ndarray of float
        By field; NaN where empty or at fault.
    is_bad : dict of str to ndarray of bool
        By field: whether the cell has a fault.
    is_wide : bool
        Whether instruments are columns, so that one line holds many rows.
    """

    table: RawTable
    symbols: tuple[str, ...]
    instrument: IntArray
    row: IntArray
    session: np.ndarray[Any, np.dtype[np.datetime64]]
    values: dict[str, FloatArray]
    is_bad: dict[str, BoolArray]
    is_wide: bool = False

    @cached_property
    def lines(self) -> IntArray:
        """Line of each row, shape (n,)."""
        return np.array(self.table.lines, dtype=np.int64)[self.row]

    def symbol(self, number: int) -> str:
        """Return the instrument of a row."""
        return self.symbols[int(self.instrument[number])]

    def column(self, field: str, number: int) -> str:
        """Return the name of the column in which a row keeps a field."""
        return self.symbol(number) if self.is_wide else field

    def text(self, field: str, number: int) -> str:
        """Return the cell of a row and field as written."""
        cells = self.table.cells.get(self.column(field, number).lower())
        return cells[self.row[number]] if cells else ""

    def issue(self, number: int, field: str, code: str, message: str, hint: str) -> Issue:
        """Return an issue of one row and field."""
        fault = CellFault(code, message, hint)
        text, line = self.text(field, number), int(self.lines[number])
        return cell_issue(fault, self.table.file, line, self.column(field, number), text)


@dataclass(frozen=True)
class Finding:
    """Lines that break one rule.

    ``describe`` gives the issue of the k-th of ``lines``; ``also`` are lines at fault for the
    same reason that need no issue of their own.
    """

    lines: IntArray
    describe: Callable[[int], Issue]
    is_note: bool = False
    also: IntArray | None = None


def bad_lines(findings: Iterable[Finding]) -> IntArray:
    """Return the lines that errors keep out, sorted."""
    parts = [NO_LINES]
    for finding in findings:
        if not finding.is_note:
            parts += [finding.lines, NO_LINES if finding.also is None else finding.also]
    return np.unique(np.concatenate(parts))


def list_issues(findings: Sequence[Finding], file: str) -> tuple[Issue, ...]:
    """Return issues by line, errors before notes where not all can be listed."""
    sizes = [len(finding.lines) for finding in findings]
    if not sum(sizes):
        return ()
    lines = np.concatenate([finding.lines for finding in findings])
    which = np.repeat(np.arange(len(findings)), sizes)
    place = np.concatenate([np.arange(size) for size in sizes])
    is_note = np.array([finding.is_note for finding in findings])[which]
    listed = np.lexsort((which, lines, is_note))
    rest = listed[LISTED:]
    issues = [findings[which[at]].describe(int(place[at])) for at in listed[:LISTED]]
    issues.sort(key=by_line)
    if len(rest):
        issues.append(more_issues(len(rest), file, are_errors=not is_note[rest].all()))
    return tuple(issues)


def find(
    draft: Draft, mask: BoolArray, field: str, words: Callable[[int], tuple[str, str, str]]
) -> Finding:
    """Return the rows of a draft under a mask, shape (n,).

    ``words`` gives code, message and hint of a row.
    """
    rows = np.flatnonzero(mask)
    return Finding(
        draft.lines[rows], lambda at: draft.issue(int(rows[at]), field, *words(int(rows[at])))
    )
