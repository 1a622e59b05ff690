"""Marking a call as withdrawn by whoever made it; the call stays and still settles."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date
from typing import TYPE_CHECKING

from foresaid.ingest.dates import parse_said_at
from foresaid.ledger import queries, writes
from foresaid.model.errors import UsageError
from foresaid.model.said import CellFault

if TYPE_CHECKING:
    from foresaid.ledger.store import Ledger


@dataclass(frozen=True)
class WithdrawalRequest:
    """Which call was withdrawn, when, who keeps the record of it, and why."""

    ref: str
    when: str
    who: str
    why: str
    today: date
    at: str


def withdraw_call(ledger: Ledger, request: WithdrawalRequest) -> None:
    """Keep a withdrawal.

    Raises
    ------
    UsageError
        If there is no such call, it was withdrawn already, the reason is missing, or the time
        is none, in the future or before the statement.
    """
    frame = queries.calls(ledger)
    found = frame[frame["ref"] == request.ref]
    if found.empty:
        raise UsageError(f"There is no call {request.ref!r} in this ledger.")
    row = found.iloc[0]
    if row["withdrawn_at"]:
        raise UsageError(f"{request.ref} was withdrawn on {row['withdrawn_at']} already.")
    if not request.why.strip():
        raise UsageError("A withdrawal needs its reason: --why TEXT.")
    when = parse_said_at(request.when)
    if isinstance(when, CellFault):
        raise UsageError(f"--at: {when.message}. {when.hint}")
    if when.time is not None and when.utc is None:
        raise UsageError("--at: the time has no zone. Write 2025-03-14T12:15+01:00.")
    if not date.fromisoformat(row["said_at"][:10]) <= when.date <= request.today:
        raise UsageError(f"--at: {when.text} is not between {row['said_at']} and today.")
    withdrawal = {"withdrawn_at": when.text, "who": request.who, "why": request.why}
    with ledger.writing():
        writes.add_withdrawal(ledger, request.ref, withdrawal, at=request.at)
