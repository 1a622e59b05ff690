"""Marking a call as withdrawn by whoever made it; the call stays and still settles."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date
from typing import TYPE_CHECKING

from foresaid.ledger import writes
from foresaid.model.errors import UsageError
from foresaid.pipeline.moments import find_call, read_moment

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
    row = find_call(ledger, request.ref)
    if row["withdrawn_at"]:
        raise UsageError(f"{request.ref} was withdrawn on {row['withdrawn_at']} already.")
    if not request.why.strip():
        raise UsageError("A withdrawal needs its reason: --why TEXT.")
    when = read_moment(request.when, today=request.today)
    if when.date < date.fromisoformat(row["said_at"][:10]):
        raise UsageError(f"--at: {when.text} is before the statement of {row['said_at']}.")
    withdrawal = {"withdrawn_at": when.text, "who": request.who, "why": request.why}
    with ledger.writing():
        writes.add_withdrawal(ledger, request.ref, withdrawal, at=request.at)
