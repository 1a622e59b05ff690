"""Whole columns of text to arrays; the rows that fail are named and looked at singly."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from foresaid.ingest.cells import NUMBER, CellFault, parse_date

if TYPE_CHECKING:
    from collections.abc import Sequence

    from foresaid.model.bars import BoolArray, FloatArray, IntArray

_DIGITS = frozenset("0123456789.eE+-")
_NAN = float("nan")


@dataclass(frozen=True)
class NumberColumn:
    """Numbers of a column, shape (n,): NaN where empty, and NaN where ``is_bad``."""

    values: FloatArray
    is_bad: BoolArray


def number_column(cells: Sequence[str], *, decimal: str = ".") -> NumberColumn:
    """Return a column of numbers.

    Parameters
    ----------
    cells : sequence of str, length n
        Stripped text; empty cells are no fault.
    decimal : {".", ","}
        The decimal mark of the file.

    Returns
    -------
    NumberColumn
        ``is_bad`` exactly where ``cells.parse_number`` finds a fault in a cell that is not
        empty.

    Examples
    --------
    >>> number_column(["1.5", "", "x"]).is_bad.tolist()
    [False, False, True]
    """
    points, is_bad = _with_points(cells, decimal)
    if not is_bad.any() and _DIGITS.issuperset("".join(points)):
        try:
            values = np.array([float(cell) if cell else _NAN for cell in points], dtype=float)
        except ValueError:
            return _by_cell(points, is_bad)
        return NumberColumn(np.where(np.isinf(values), _NAN, values), np.isinf(values))
    return _by_cell(points, is_bad)


def _with_points(cells: Sequence[str], decimal: str) -> tuple[Sequence[str], BoolArray]:
    """Return the cells with decimal points, and which had one where a comma is due."""
    if decimal == ".":
        return cells, np.zeros(len(cells), dtype=np.bool_)
    is_bad = np.array(["." in cell for cell in cells], dtype=np.bool_)
    return [cell.replace(",", ".") for cell in cells], is_bad


def _by_cell(points: Sequence[str], is_bad: BoolArray) -> NumberColumn:
    is_number = np.array(
        [NUMBER.fullmatch(cell) is not None for cell in points], dtype=np.bool_
    )
    is_empty = np.array([not cell for cell in points], dtype=np.bool_)
    good = is_number & ~is_bad
    values = np.full(len(points), np.nan)
    values[good] = [float(points[row]) for row in np.flatnonzero(good).tolist()]
    good &= ~np.isinf(values)
    return NumberColumn(np.where(good, values, np.nan), ~good & ~is_empty)


@dataclass(frozen=True)
class DateColumn:
    """Dates of a column, shape (n,): NaT where the text has a fault."""

    days: np.ndarray[Any, np.dtype[np.datetime64]]
    faults: dict[str, CellFault]


def date_column(cells: Sequence[str], *, order: str = "iso") -> DateColumn:
    """Return a column of dates, and the fault of every text that is none.

    Parameters
    ----------
    cells : sequence of str, length n
        Stripped text; an empty cell is a fault.
    order : {"iso", "dmy", "mdy"}
        How dates are written in this file.

    Examples
    --------
    >>> date_column(["2025-03-14", "2025-02-30"]).days.astype(str).tolist()
    ['2025-03-14', 'NaT']
    """
    days: dict[str, np.datetime64] = {}
    faults: dict[str, CellFault] = {}
    for text in dict.fromkeys(cells):
        day = parse_date(text, order=order)
        if isinstance(day, CellFault):
            faults[text] = day
            days[text] = np.datetime64("NaT", "D")
        else:
            days[text] = np.datetime64(day, "D")
    names, codes = name_column(cells)
    by_name = np.array([days[name] for name in names], dtype="datetime64[D]")
    return DateColumn(by_name[codes] if len(names) else by_name, faults)


def name_column(cells: Sequence[str]) -> tuple[tuple[str, ...], IntArray]:
    """Return the different texts of a column in order, and their numbers row by row.

    Examples
    --------
    >>> name_column(["b", "a", "b"])[1].tolist()
    [0, 1, 0]
    """
    numbers = {name: number for number, name in enumerate(dict.fromkeys(cells))}
    codes = np.fromiter(map(numbers.__getitem__, cells), dtype=np.int64, count=len(cells))
    return tuple(numbers), codes
