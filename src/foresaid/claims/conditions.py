"""Conditions: what has to come true before a call counts (`given`)."""

from __future__ import annotations

import re
from dataclasses import dataclass
from datetime import date

from foresaid.claims.claim import Claim, PhraseError
from foresaid.claims.phrases import parse_claim, print_claim

BY_DATE = re.compile(r"(?P<what>.+) by (?P<date>\d{4}-\d{2}-\d{2})", re.IGNORECASE | re.DOTALL)
HINT = (
    "Write `INSTRUMENT ends above 100 by 2025-06-30` or `fact: the law passes by 2025-06-30`."
)


@dataclass(frozen=True, slots=True)
class Condition:
    """A claim on an instrument, or a plain fact that a person decides.

    Attributes
    ----------
    text : str
        Canonical form.
    deadline : date
        Last day on which it may come true.
    instrument : str
        Symbol; empty for a fact.
    claim : Claim or None
        None for a fact.
    fact : str
        Empty for a claim.
    """

    text: str
    deadline: date
    instrument: str = ""
    claim: Claim | None = None
    fact: str = ""


def parse_condition(text: str, *, said: date) -> Condition:
    """Return the condition that ``text`` states.

    Raises
    ------
    PhraseError
        If it is neither a claim on an instrument nor a fact, has no date, or its date lies
        before the statement.

    Examples
    --------
    >>> parse_condition("fact: the bridge opens by 2025-06-30", said=date(2025, 1, 2)).fact
    'the bridge opens'
    """
    match = BY_DATE.fullmatch(" ".join(text.split()))
    if match is None:
        raise PhraseError(f"the condition `{text}` has no `by` with a date", HINT)
    try:
        deadline = date.fromisoformat(match["date"])
    except ValueError:
        raise PhraseError(f"there is no day {match['date']}", HINT) from None
    if deadline < said:
        raise PhraseError(f"the condition ends on {deadline}, before the statement", HINT)
    what = match["what"].strip()
    if what.lower().startswith("fact:"):
        return _fact(what, deadline)
    symbol, _, phrase = what.partition(" ")
    claim = parse_claim(phrase)
    if not claim.is_call:
        raise PhraseError("`not a call` cannot be a condition", HINT)
    return Condition(f"{symbol} {print_claim(claim)} by {deadline}", deadline, symbol, claim)


def _fact(what: str, deadline: date) -> Condition:
    fact = what.partition(":")[2].strip()
    if not fact:
        raise PhraseError("the fact is empty", HINT)
    return Condition(f"fact: {fact} by {deadline}", deadline, fact=fact)
