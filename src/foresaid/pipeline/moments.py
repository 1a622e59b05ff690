"""The time a user gives with ``--at``, and the call it is about."""

from __future__ import annotations

from typing import TYPE_CHECKING

from foresaid.ingest.dates import parse_said_at
from foresaid.ledger import queries
from foresaid.model.errors import UsageError
from foresaid.model.said import CellFault

if TYPE_CHECKING:
    from datetime import date

    import pandas as pd

    from foresaid.ledger.store import Ledger
    from foresaid.model.said import SaidAt


def read_moment(text: str, *, today: date) -> SaidAt:
    """Return the moment written after ``--at``.

    Raises
    ------
    UsageError
        If it is none, is a time without a zone, or lies in the future.
    """
    moment = parse_said_at(text)
    if isinstance(moment, CellFault):
        raise UsageError(f"--at: {moment.message}. {moment.hint}")
    if moment.time is not None and moment.utc is None:
        raise UsageError("--at: the time has no zone. Write 2025-03-14T12:15+01:00.")
    if moment.date > today:
        raise UsageError(f"--at: {moment.text} is after today.")
    return moment


def find_call(ledger: Ledger, ref: str) -> pd.Series:
    """Return the row of one call.

    Raises
    ------
    UsageError
        If there is no such call.
    """
    frame = queries.calls(ledger)
    found = frame[frame["ref"] == ref]
    if found.empty:
        raise UsageError(f"There is no call {ref!r} in this ledger.")
    return found.iloc[0]
