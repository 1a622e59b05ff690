"""Deciding whether the plain fact on which a call depends has come true."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date
from typing import TYPE_CHECKING

from foresaid.claims.conditions import parse_condition
from foresaid.ingest.dates import parse_said_at
from foresaid.ledger import queries, writes
from foresaid.model.errors import UsageError
from foresaid.model.said import CellFault

if TYPE_CHECKING:
    from foresaid.ledger.store import Ledger
    from foresaid.model.said import SaidAt


@dataclass(frozen=True)
class DecisionRequest:
    """What is decided about which call, by whom, on what evidence."""

    ref: str
    met: bool
    happened: str
    who: str
    evidence: str
    today: date
    at: str


def decide_condition(ledger: Ledger, request: DecisionRequest) -> str:
    """Keep a decision and return the condition it is about.

    Raises
    ------
    UsageError
        If there is no such call, it has no plain fact as condition, or the time is missing,
        in the future, before the statement or after the last day allowed.
    """
    frame = queries.calls(ledger)
    found = frame[frame["ref"] == request.ref]
    if found.empty:
        raise UsageError(f"There is no call {request.ref!r} in this ledger.")
    row = found.iloc[0]
    if not row["given"].startswith("fact:"):
        what = row["given"] or "nothing"
        raise UsageError(f"{request.ref} depends on {what}: no fact for a person to decide.")
    if not request.evidence.strip():
        raise UsageError("A decision needs its evidence: --evidence TEXT.")
    said_on = date.fromisoformat(row["said_at"][:10])
    happened = _time(request)
    condition = parse_condition(row["given"], said=said_on)
    if happened.date < said_on:
        raise UsageError(f"{happened.text} is before the statement of {row['said_at']}.")
    if request.met and happened.date > condition.deadline:
        raise UsageError(f"{happened.text} is after {condition.deadline}: it was not met.")
    decision = {
        "call": int(row["call"]),
        "met": int(request.met),
        "decided_at": happened.text,
        "who": request.who,
        "evidence": request.evidence,
    }
    with ledger.writing():
        writes.add_decision(ledger, decision, at=request.at)
    return condition.text


def _time(request: DecisionRequest) -> SaidAt:
    happened = parse_said_at(request.happened)
    if isinstance(happened, CellFault):
        raise UsageError(f"--at: {happened.message}. {happened.hint}")
    if happened.time is not None and happened.utc is None:
        raise UsageError("--at: the time has no zone. Write 2025-03-14T12:15+01:00.")
    if happened.date > request.today:
        raise UsageError(f"--at: {happened.text} is after today.")
    return happened
