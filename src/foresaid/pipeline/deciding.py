"""Deciding whether the plain fact on which a call depends has come true."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date
from typing import TYPE_CHECKING

from foresaid.claims.conditions import parse_condition
from foresaid.ledger import writes
from foresaid.model.errors import UsageError
from foresaid.pipeline.moments import find_call, read_moment

if TYPE_CHECKING:
    from foresaid.ledger.store import Ledger


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
    row = find_call(ledger, request.ref)
    if not row["given"].startswith("fact:"):
        what = row["given"] or "nothing"
        raise UsageError(f"{request.ref} depends on {what}: no fact for a person to decide.")
    if not request.evidence.strip():
        raise UsageError("A decision needs its evidence: --evidence TEXT.")
    said_on = date.fromisoformat(row["said_at"][:10])
    happened = read_moment(request.happened, today=request.today)
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
