"""The three shapes of a price file, and the faults of its columns."""

from __future__ import annotations

from typing import TYPE_CHECKING

from foresaid.ingest.drafts import FIELDS
from foresaid.ingest.faults import IssueList
from foresaid.ingest.price_checks import name_or_none, unknown_hint
from foresaid.ingest.tables import REASON_COLUMN, check_columns
from foresaid.model.issues import Issue, clip

if TYPE_CHECKING:
    from collections.abc import Mapping

    from foresaid.ingest.tables import RawTable
    from foresaid.model.records import Instrument

REQUIRED = ("instrument", "session", "close")
OPTIONAL = ("open", "high", "low", "volume", "total")

_DATES = ("session", "date")
_ADJUSTED = ("adj close", "adj. close", "adj_close", "adjusted close", "adjclose")
_MOST_HINTS = 20

SHAPES = {
    "long": "a row for each instrument and session",
    "single": "one instrument",
    "wide": "a column of closes for each instrument",
}


def shape_of(table: RawTable, instrument: str | None) -> str:
    """Return the shape of a file, a key of ``SHAPES``."""
    if "instrument" in table.cells or dates_name(table) is None:
        return "long"
    if instrument is not None or table.cells.keys() & set(FIELDS):
        return "single"
    return "wide"


def dates_name(table: RawTable) -> str | None:
    """Return the column of dates, None where there is none; it may be a first one unnamed."""
    if "instrument" not in table.cells and table.columns[:1] == ("",):
        return ""
    return next((name for name in _DATES if name in table.cells), None)


def column_issues(
    table: RawTable, shape: str, instrument: str | None, known: Mapping[str, Instrument]
) -> list[Issue]:
    """Return the faults of the columns; an error that names no column leaves no rows."""
    if shape == "wide":
        return _wide_columns(table, known)
    column = dates_name(table) or "session"
    required = ("instrument", column, "close") if shape == "long" else (column, "close")
    issues = list(check_columns(table, required, (*OPTIONAL, *_ADJUSTED)))
    issues += [_adjusted_note(table, name) for name in _ADJUSTED if name in table.cells]
    if not table.columns:
        return issues
    fault = _instrument_fault(shape, instrument, known)
    return issues if fault is None else [Issue(*fault[:2], table.file, hint=fault[2]), *issues]


def _instrument_fault(
    shape: str, instrument: str | None, known: Mapping[str, Instrument]
) -> tuple[str, str, str] | None:
    """Return code, message and hint where file and ``--instrument`` do not fit together."""
    if shape == "long" and instrument is not None:
        message = "the file names its instruments and --instrument was given"
        return "two-instruments", message, "Leave --instrument out."
    if shape == "single" and instrument is None:
        message = "the file does not say which instrument it is about"
        hint = "Pass --instrument SYMBOL, or add a column `instrument`."
        return "no-instrument", message, hint
    if instrument is not None and instrument not in known:
        return "unknown-instrument", name_or_none(instrument), unknown_hint(instrument, known)
    return None


def _adjusted_note(table: RawTable, name: str) -> Issue:
    message = f"column `{table.header(name)}` is passed over: it changes after the fact"
    hint = "Name it `total` if it is a total-return series."
    place = (table.file, table.header_line, name)
    return Issue("adjusted-close", message, *place, hint=hint, severity="note")


def _wide_columns(table: RawTable, known: Mapping[str, Instrument]) -> list[Issue]:
    """Return an issue for every column that is no known instrument."""
    issues = IssueList(table.file)
    for number, name in enumerate(instrument_columns(table)):
        header = table.header(name)
        if header not in known and name != REASON_COLUMN:
            hint = unknown_hint(header, known if number < _MOST_HINTS else ())
            message = f"column `{clip(header)}` is no known instrument"
            place = (table.file, table.header_line, clip(header) or "(no name)")
            issues.add(Issue("unknown-instrument", message, *place, hint=hint))
    if not instrument_columns(table):
        message = "the file has dates and no prices"
        issues.add(Issue("missing-column", message, table.file, hint=_THREE_SHAPES))
    return list(issues.result())


_THREE_SHAPES = (
    "Bring columns `instrument, session, close`, or `session, close` with --instrument, or "
    "`session` and one column of closes for each instrument."
)


def instrument_columns(table: RawTable) -> list[str]:
    """Return the columns besides the dates, where every instrument has one."""
    column = dates_name(table)
    return [name for name in table.columns if name != column]
