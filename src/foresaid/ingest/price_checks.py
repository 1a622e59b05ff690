"""Rules that price rows must meet, each checked on whole columns at once."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from foresaid.ingest.cells import parse_number
from foresaid.ingest.drafts import FIELDS, NO_LINES, Draft, Finding, find
from foresaid.ingest.faults import LISTED, cell_issue, nearest
from foresaid.model.issues import Issue, clip
from foresaid.model.said import CellFault

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Mapping
    from datetime import date

    from foresaid.ingest.columns import DateColumn
    from foresaid.ingest.tables import RawTable
    from foresaid.model.bars import BoolArray, IntArray
    from foresaid.model.records import Instrument

PRICES = ("open", "high", "low", "close", "total")

_TOLERANCE = 1e-9
_MOST_HINTS = 20


# ------------------------------------------------------------------------- names and dates
def unknown_names(draft: Draft, known: Mapping[str, Instrument]) -> list[Finding]:
    """Return one finding for each instrument that is not known, at its first line."""
    findings = []
    unknown = [at for at, name in enumerate(draft.symbols) if name not in known]
    for count, at in enumerate(unknown):
        lines = draft.lines[draft.instrument == at] if count < LISTED else NO_LINES
        hint = unknown_hint(draft.symbols[at], known if count < _MOST_HINTS else ())
        message = f"{name_or_none(draft.symbols[at])} ({_rows(len(lines))})"
        value = clip(draft.symbols[at])
        line = int(lines[0]) if len(lines) else 0
        issue = Issue(
            "unknown-instrument", message, draft.table.file, line, "instrument", value, hint
        )
        findings.append(Finding(lines[:1], lambda _, issue=issue: issue, also=lines))  # type: ignore[misc]
    if len(unknown) > LISTED:
        findings.append(_further_unknown(draft, unknown[LISTED:]))
    return findings


def _rows(number: int) -> str:
    return f"{number:,} row" + ("" if number == 1 else "s")


def _further_unknown(draft: Draft, unknown: list[int]) -> Finding:
    lines = draft.lines[np.isin(draft.instrument, unknown)]
    message = f"{len(unknown):,} more names are no known instruments"
    issue = Issue("unknown-instrument", message, draft.table.file, int(lines[0]), "instrument")
    return Finding(lines[:1], lambda _: issue, also=lines)


def name_or_none(name: str) -> str:
    """Return what is wrong with a name that is not known."""
    return f"`{clip(name)}` is no known instrument" if name else "no instrument is named"


def unknown_hint(name: str, known: Iterable[str]) -> str:
    """Return what to do about a name that is not known."""
    close = nearest(name, known)
    if close:
        return f"The nearest known is `{close}`."
    return "Import it first: foresaid import instruments FILE."


def date_faults(
    table: RawTable, column: str, dates: DateColumn, *, today: date
) -> list[Finding]:
    """Return rows whose date has a fault or is later than today."""
    cells, lines = table.cells[column], np.array(table.lines, dtype=np.int64)

    def found(rows: IntArray, fault: Callable[[str], CellFault]) -> Finding:
        def describe(at: int) -> Issue:
            text, line = cells[rows[at]], int(lines[rows[at]])
            return cell_issue(fault(text), table.file, line, column, text)

        return Finding(lines[rows], describe)

    future = CellFault(
        "future-session",
        f"the session is after today, {today}",
        "Mend the date, or take the row out.",
    )
    return [
        found(np.flatnonzero(np.isnat(dates.days)), dates.faults.__getitem__),
        found(np.flatnonzero(dates.days > np.datetime64(today, "D")), lambda _: future),
    ]


# --------------------------------------------------------------------------------- numbers
def number_faults(draft: Draft) -> list[Finding]:
    """Return cells that hold no number, and rows without a close."""
    findings = [
        find(draft, draft.is_bad[field], field, _number_fault(draft, field)) for field in FIELDS
    ]
    missing = np.isnan(draft.values["close"]) & ~draft.is_bad["close"]
    hint = "Write the closing price, or take the row out."
    findings.append(
        find(draft, missing, "close", lambda _: ("missing-close", "there is no close", hint))
    )
    return findings


def _number_fault(draft: Draft, field: str) -> Callable[[int], tuple[str, str, str]]:
    def words(number: int) -> tuple[str, str, str]:
        fault = parse_number(draft.text(field, number), decimal=draft.table.decimal)
        if isinstance(fault, CellFault):
            return fault.code, fault.message, fault.hint
        return "not-a-number", f"{field} is no number", ""

    return words


def sign_faults(draft: Draft, may_be_negative: BoolArray) -> list[Finding]:
    """Return prices at or below zero where they may not be, and volumes below zero.

    Parameters
    ----------
    draft : Draft
        Rows.
    may_be_negative : ndarray of bool, shape (n_symbols,)
        Whether an instrument's price may be zero or below.
    """
    hint = "Where zero stands for no price, take the row out or leave the cell empty."
    strict = ~may_be_negative[draft.instrument]
    findings = []
    for field in PRICES:
        message = f"{field} of {{}} must be above zero"
        words = _words(draft, "not-positive", message, hint)
        findings.append(find(draft, strict & (draft.values[field] <= 0.0), field, words))
    message, hint = "the volume is below zero", "Leave the cell empty where it is not known."
    below = draft.values["volume"] < 0.0
    findings.append(find(draft, below, "volume", lambda _: ("negative-volume", message, hint)))
    return findings


def _words(
    draft: Draft, code: str, message: str, hint: str
) -> Callable[[int], tuple[str, str, str]]:
    return lambda number: (code, message.format(clip(draft.symbol(number))), hint)


def range_faults(draft: Draft) -> list[Finding]:
    """Return rows whose high is below the low, or whose open or close is outside of both."""
    high, low = draft.values["high"], draft.values["low"]
    with np.errstate(over="ignore", invalid="ignore"):
        slack = _TOLERANCE * np.maximum(np.abs(high), np.abs(low))
        slack = np.where(np.isnan(slack), _TOLERANCE * np.abs(np.fmax(high, low)), slack)
        crossed = high < low - slack
        outside = {
            field: ~crossed
            & ((draft.values[field] > high + slack) | (draft.values[field] < low - slack))
            for field in ("open", "close")
        }
    findings = [find(draft, crossed, "high", lambda at: _crossed_words(draft, at))]
    for field, mask in outside.items():
        findings.append(find(draft, mask, field, _outside_words(draft, field)))
    return findings


def _crossed_words(draft: Draft, number: int) -> tuple[str, str, str]:
    high, low = draft.text("high", number), draft.text("low", number)
    return "high-below-low", f"high {clip(high)} is below low {clip(low)}", "Mend one of them."


def _outside_words(draft: Draft, field: str) -> Callable[[int], tuple[str, str, str]]:
    def words(number: int) -> tuple[str, str, str]:
        price, high, low = (clip(draft.text(name, number)) for name in (field, "high", "low"))
        message = f"{field} {price} is not from low {low or '?'} to high {high or '?'}"
        return "outside-range", message, "Mend the price that is wrong."

    return words
