"""Price files in three shapes to arrays of prices, checked as whole columns."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from foresaid.ingest.columns import NumberColumn, date_column, name_column, number_column
from foresaid.ingest.drafts import FIELDS, Draft, Finding, bad_lines, list_issues
from foresaid.ingest.price_checks import (
    date_faults,
    number_faults,
    range_faults,
    sign_faults,
    unknown_names,
)
from foresaid.ingest.price_doubles import double_sessions
from foresaid.ingest.price_shapes import (
    SHAPES,
    column_issues,
    dates_name,
    instrument_columns,
    shape_of,
)

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping, Sequence
    from datetime import date

    from foresaid.ingest.columns import DateColumn
    from foresaid.ingest.tables import RawTable
    from foresaid.model.bars import FloatArray, IntArray
    from foresaid.model.issues import Issue
    from foresaid.model.records import Instrument


@dataclass(frozen=True)
class PriceRows:
    """The prices of one file, without those at fault; arrays have shape (n,).

    Attributes
    ----------
    symbols : tuple of str
        Instruments of the file, by number.
    instrument : ndarray of int
        Number of the instrument of each row.
    session : ndarray of datetime64[D]
        Local date of the session.
    open, high, low, close, volume, total : ndarray of float
        In the units of the file; NaN where absent, which ``close`` never is.
    lines : ndarray of int
        Line of the file; rows are in the order of the file (column by column where every
        instrument has a column).
    issues : tuple of Issue
        Faults by line, at most ``faults.LISTED`` of them and one that counts the others.
        The faults of the table itself are not repeated.
    remarks : tuple of str
        What was detected.
    bad_lines : ndarray of int
        Every line that was kept out by an error, sorted, listed or not.
    """

    symbols: tuple[str, ...]
    instrument: IntArray
    session: np.ndarray[Any, np.dtype[np.datetime64]]
    open: FloatArray
    high: FloatArray
    low: FloatArray
    close: FloatArray
    volume: FloatArray
    total: FloatArray
    lines: IntArray
    issues: tuple[Issue, ...]
    remarks: tuple[str, ...]
    bad_lines: IntArray

    @property
    def n_rows(self) -> int:
        """How many prices there are."""
        return len(self.lines)

    @property
    def has_errors(self) -> bool:
        """Whether any issue keeps a row out."""
        return any(issue.severity == "error" for issue in self.issues)


def parse_prices(
    table: RawTable,
    *,
    instrument: str | None,
    known: Mapping[str, Instrument],
    allows_negative: Callable[[str], bool],
    today: date,
    dates: str = "iso",
) -> PriceRows:
    """Return the prices of a file with every fault found in it.

    Parameters
    ----------
    table : RawTable
        A read file in one of three shapes: rows of ``instrument, session, close`` and any of
        ``open, high, low, volume, total``; the same without ``instrument`` for the one that
        is given; or a column of dates and a column of closes for every instrument, where an
        empty cell is no session. The dates stand under ``session`` or ``date``.
    instrument : str or None
        The instrument of the whole file; None where the file names them.
    known : mapping of str to Instrument
        By symbol.
    allows_negative : callable
        Whether prices of an instrument kind may be zero or below.
    today : date
        No session may be later.
    dates : {"iso", "dmy", "mdy"}
        How dates are written.

    Returns
    -------
    PriceRows
        One row for each instrument and session. Where one price of a line is at fault the
        whole line is kept out.
    """
    shape = shape_of(table, instrument)
    issues = column_issues(table, shape, instrument, known)
    column = dates_name(table)
    if column is None or any(issue.severity == "error" for issue in issues if not issue.column):
        return _no_rows(table, issues)
    days = date_column(table.cells[column], order=dates)
    draft = _draft(table, shape, instrument, known, days)
    findings = date_faults(table, column, days, today=today) + unknown_names(draft, known)
    negative = np.array(
        [name in known and allows_negative(known[name].kind) for name in draft.symbols],
        dtype=np.bool_,
    )
    findings += number_faults(draft) + sign_faults(draft, negative) + range_faults(draft)
    return _checked(draft, findings, issues, (*table.remarks, f"shape: {SHAPES[shape]}"))


# ----------------------------------------------------------------------------------- drafts
def _draft(
    table: RawTable,
    shape: str,
    instrument: str | None,
    known: Mapping[str, Instrument],
    days: DateColumn,
) -> Draft:
    if shape == "wide":
        return _wide_draft(table, known, days)
    numbers = {
        field: number_column(table.cells[field], decimal=table.decimal)
        for field in FIELDS
        if field in table.cells
    }
    symbols: tuple[str, ...] = (instrument or "",)
    codes = np.zeros(table.n_rows, dtype=np.int64)
    if shape == "long":
        symbols, codes = name_column(table.cells["instrument"])
    return Draft(
        table,
        symbols,
        codes,
        np.arange(table.n_rows),
        days.days,
        *_filled(numbers, table.n_rows),
    )


def _filled(
    numbers: Mapping[str, NumberColumn], size: int
) -> tuple[dict[str, Any], dict[str, Any]]:
    """Return values and faults of all fields, those of absent ones empty."""
    absent = NumberColumn(np.full(size, np.nan), np.zeros(size, dtype=np.bool_))
    columns = {field: numbers.get(field, absent) for field in FIELDS}
    values = {field: column.values for field, column in columns.items()}
    return values, {field: column.is_bad for field, column in columns.items()}


def _wide_draft(table: RawTable, known: Mapping[str, Instrument], days: DateColumn) -> Draft:
    symbols: list[str] = []
    codes, rows, closes = [], [], list[NumberColumn]()
    for name in instrument_columns(table):
        if table.header(name) not in known:
            continue
        column = number_column(table.cells[name], decimal=table.decimal)
        filled = np.flatnonzero(~np.isnan(column.values) | column.is_bad)
        closes.append(NumberColumn(column.values[filled], column.is_bad[filled]))
        codes.append(np.full(len(filled), len(symbols)))
        rows.append(filled)
        symbols.append(table.header(name))
    row = _joined(rows, np.int64)
    close = NumberColumn(
        _joined([part.values for part in closes], np.float64),
        _joined([part.is_bad for part in closes], np.bool_),
    )
    filled_ = _filled({"close": close}, len(row))
    return Draft(
        table,
        tuple(symbols),
        _joined(codes, np.int64),
        row,
        days.days[row],
        *filled_,
        is_wide=True,
    )


def _joined(parts: Sequence[Any], dtype: type) -> Any:  # noqa: ANN401 - dtype decides
    return np.concatenate([np.zeros(0, dtype=dtype), *parts]).astype(dtype)


# ---------------------------------------------------------------------------------- results
def _checked(
    draft: Draft, findings: list[Finding], issues: Sequence[Issue], remarks: tuple[str, ...]
) -> PriceRows:
    """Return the rows that no finding keeps out."""
    doubles, repeats = double_sessions(draft, np.isin(draft.lines, bad_lines(findings)))
    findings += doubles
    out = bad_lines(findings)
    kept = np.flatnonzero(~np.isin(draft.lines, out) & ~repeats)
    return PriceRows(
        symbols=draft.symbols,
        instrument=draft.instrument[kept],
        session=draft.session[kept],
        **{field: draft.values[field][kept] for field in FIELDS},
        lines=draft.lines[kept],
        issues=(*issues, *list_issues(findings, draft.table.file)),
        remarks=remarks,
        bad_lines=out,
    )


def _no_rows(table: RawTable, issues: Sequence[Issue]) -> PriceRows:
    none = np.zeros(0)
    return PriceRows(
        symbols=(),
        instrument=none.astype(np.int64),
        session=none.astype("datetime64[D]"),
        **dict.fromkeys(FIELDS, none),
        lines=none.astype(np.int64),
        issues=tuple(issues),
        remarks=table.remarks,
        bad_lines=np.array(table.lines, dtype=np.int64),
    )
