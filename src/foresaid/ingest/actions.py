"""Corporate actions: rows of a file to records, with every fault of every row."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date
from typing import TYPE_CHECKING

from foresaid.ingest.cells import CellFault, parse_date, parse_number
from foresaid.ingest.faults import nearest
from foresaid.ingest.rows import RowReader, read_rows
from foresaid.ingest.tables import check_columns
from foresaid.model.issues import clip
from foresaid.model.records import Action, Parsed

if TYPE_CHECKING:
    from collections.abc import Collection

    from foresaid.ingest.tables import RawTable

ACTION_REQUIRED = ("instrument", "effective", "action")
ACTION_OPTIONAL = ("ratio", "amount", "currency", "into")


@dataclass(frozen=True, slots=True)
class Terms:
    """Which columns an action must have, and which it may have besides."""

    needs: tuple[str, ...] = ()
    may: tuple[str, ...] = ()


ACTIONS = {
    "split": Terms(("ratio",)),
    "dividend": Terms(("amount",), ("currency",)),
    "rebase": Terms(("ratio",)),
    "cash-out": Terms(("amount",), ("currency",)),
    "merger": Terms(("into", "ratio"), ("amount", "currency")),
    "wind-up": Terms(("amount",), ("currency",)),
    "halt": Terms(),
    "resume": Terms(),
}
"""Every action, with the columns it takes."""

_MEANINGS = {
    "ratio": "Write new units for each old one, such as 2 for two for one.",
    "amount": "Write the amount for each unit.",
    "into": "Write the instrument that it becomes.",
}


def parse_actions(
    table: RawTable, known: Collection[str], *, dates: str = "iso"
) -> Parsed[Action]:
    """Return the corporate actions of a file with every fault found in it.

    Parameters
    ----------
    table : RawTable
        A read file with the columns of ``ACTION_REQUIRED`` and any of ``ACTION_OPTIONAL``.
    known : collection of str
        Symbols that the ledger holds.
    dates : {"iso", "dmy", "mdy"}
        How dates are written.

    Returns
    -------
    Parsed of Action
        Rows without a fault. The faults of the table itself are not repeated.
    """
    issues = check_columns(table, ACTION_REQUIRED, ACTION_OPTIONAL)
    first: dict[tuple[str, date, str], int] = {}

    def read(row: RowReader) -> Action:
        action = _action(row, table.decimal, known, dates)
        key = action.instrument, action.effective, action.kind
        if not row.issues and key in first:
            message = f"line {first[key]} has this action already"
            row.fault("action", "double-action", message, "Keep one of the rows.")
        if not row.issues:
            first[key] = row.line
        return action

    return read_rows(table, issues, read)


def _action(row: RowReader, decimal: str, known: Collection[str], dates: str) -> Action:
    if row.cell("instrument") not in known:
        row.unknown("instrument", known)
    kind = _kind(row)
    _check_terms(row, kind)
    return Action(
        instrument=row.cell("instrument"),
        effective=_effective(row, dates),
        kind=kind,
        ratio=_number(row, "ratio", decimal),
        amount=_number(row, "amount", decimal),
        currency=row.text("currency"),
        into=_into(row, known),
    )


def _kind(row: RowReader) -> str:
    kind = row.cell("action").lower()
    if kind not in ACTIONS:
        close = nearest(kind, ACTIONS)
        hint = f"Write one of: {', '.join(ACTIONS)}."
        hint = f"Was `{close}` meant? {hint}" if close else hint
        message = f"`{clip(row.cell('action'))}` is no action" if kind else "no action is named"
        row.fault("action", "unknown-action", message, hint)
    return kind


def _check_terms(row: RowReader, kind: str) -> None:
    """Record the columns that an action lacks, and those it has no use for."""
    terms = ACTIONS.get(kind)
    if terms is None:
        return
    for column in ACTION_OPTIONAL:
        filled = bool(row.cell(column))
        if column in terms.needs and not filled:
            message = f"a {kind} needs `{column}`"
            row.fault(column, f"no-{column}", message, _MEANINGS[column])
        elif filled and column not in (*terms.needs, *terms.may):
            message = f"a {kind} has no `{column}`"
            row.fault(column, "not-needed", message, "Leave the cell empty.")


def _effective(row: RowReader, dates: str) -> date:
    day = parse_date(row.cell("effective"), order=dates)
    if isinstance(day, CellFault):
        row.fault("effective", day.code, day.message, day.hint)
        return date.min
    return day


def _number(row: RowReader, column: str, decimal: str) -> float | None:
    """Return a ratio above zero or an amount not below it."""
    text = row.cell(column)
    if not text:
        return None
    number = parse_number(text, decimal=decimal)
    if isinstance(number, CellFault):
        row.fault(column, number.code, number.message, number.hint)
        return None
    if number < 0.0 or (number == 0.0 and column == "ratio"):
        what = "above zero" if column == "ratio" else "zero or more"
        row.fault(column, f"bad-{column}", f"the {column} must be {what}", _MEANINGS[column])
    return number


def _into(row: RowReader, known: Collection[str]) -> str:
    into = row.cell("into")
    if into and into not in known:
        row.unknown("into", known)
    elif into and into == row.cell("instrument"):
        row.fault("into", "into-itself", "an instrument does not merge into itself")
    return into
