"""Calls under a condition: their clock starts when the condition has come true.

A condition on an instrument is settled like a call of its own, said when the call was said.
When it comes true in a session, the call counts as said at that session's close (before the
close of that day where the venue's hours are not known); the horizon is counted anew from
there. A plain fact starts the clock at the time a person decided it came true. A condition
that is not met makes the call void, one that is undecided leaves it open.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from datetime import datetime, time, timedelta
from typing import TYPE_CHECKING
from zoneinfo import ZoneInfo

import numpy as np
import pandas as pd

from foresaid.claims.claim import PhraseError
from foresaid.claims.conditions import Condition, parse_condition
from foresaid.claims.horizons import parse_horizon
from foresaid.claims.phrases import print_claim
from foresaid.market.clock import local_times
from foresaid.market.histories import minutes
from foresaid.model.days import day_number, day_of
from foresaid.pipeline.world import CodedCalls, World, coded_calls
from foresaid.settle.outcomes import settle_calls

if TYPE_CHECKING:
    from collections.abc import Mapping

    from foresaid.ledger.queries import Decision
    from foresaid.model.codebook import Codebook

NOT_MET = "its condition was not met"
UNDECIDED = "its condition is not decided yet"
TOO_LATE = "its condition came true after its deadline"


@dataclass(frozen=True)
class _Met:
    """When a condition came true: a local day, and a minute or -1 for the day alone."""

    day: int
    minute: float


def with_conditions(
    calls: CodedCalls,
    world: World,
    codebook: Codebook,
    decisions: Mapping[int, Decision],
) -> CodedCalls:
    """Return the calls with the clocks of conditional ones started or stopped.

    Parameters
    ----------
    calls : CodedCalls
        All calls; those without a condition come back as they are.
    world : World
        Prices known by the day of settlement.
    codebook : Codebook
        Conventions, for conditions and for horizons counted anew.
    decisions : mapping of int to Decision
        What persons decided about plain facts, by call id.
    """
    given = calls.frame["given"].to_numpy(dtype=object)
    rows = np.flatnonzero(given != "")
    if not len(rows):
        return calls
    said = [day_of(int(calls.times.said_day[row])) for row in rows]
    parsed = [
        parse_condition(given[row], said=day) for row, day in zip(rows, said, strict=True)
    ]
    found: dict[int, _Met | str] = {}
    for row, condition in zip(rows, parsed, strict=True):
        if condition.claim is None:
            found[int(row)] = _fact(calls, world, int(row), decisions)
    claims = [(int(row), one) for row, one in zip(rows, parsed, strict=True) if one.claim]
    found |= _settled(calls, world, codebook, claims)
    return _restarted(calls, codebook, found)


def _fact(
    calls: CodedCalls, world: World, row: int, decisions: Mapping[int, Decision]
) -> _Met | str:
    decision = decisions.get(int(calls.frame["call"].iloc[row]))
    if decision is None:
        return UNDECIDED
    if not decision.met:
        return NOT_MET
    zone = world.instruments[int(calls.times.instrument[row])].zone
    day, minute = local_times([decision.decided_at], [zone])
    return _Met(int(day[0]), float(minute[0]))


def _settled(
    calls: CodedCalls,
    world: World,
    codebook: Codebook,
    claims: list[tuple[int, Condition]],
) -> dict[int, _Met | str]:
    """Settle conditions on instruments as calls of their own."""
    if not claims:
        return {}
    rows = [row for row, _ in claims]
    frame = calls.frame.iloc[rows].copy()
    frame["instrument"] = [one.instrument for _, one in claims]
    frame["claim"] = [print_claim(one.claim) for _, one in claims if one.claim]
    frame["deadline"] = [one.deadline.isoformat() for _, one in claims]
    frame["sessions"] = None
    frame["currency"] = ""
    frame["given"] = ""
    coded = coded_calls(frame.reset_index(drop=True), world)
    outcomes = settle_calls(
        coded.times, coded.claims, world.market, coded.inverse, codebook.settlement
    )
    answers: dict[int, _Met | str] = {}
    for at, row in enumerate(rows):
        result = outcomes.result[at]
        if result == "hit":
            day = int(world.market.bars.day[outcomes.decided[at]])
            own = world.instruments[int(calls.times.instrument[row])]
            answers[row] = _close_of(world, int(coded.times.instrument[at]), day, own.zone)
        else:
            answers[row] = UNDECIDED if result == "open" else NOT_MET
    return answers


def _close_of(world: World, number: int, day: int, zone: str) -> _Met:
    """Return the close of a session in the zone of the call's venue.

    Only the day is known where the condition's venue has no zone or no hours. A close at
    midnight is a time of the day that it ends.
    """
    venue = world.instruments[number]
    if not (venue.zone and venue.closes and zone):
        return _Met(day, -1.0)
    local = datetime.combine(day_of(day), time()) + timedelta(minutes=minutes(venue.closes) - 1)
    instant = local.replace(tzinfo=ZoneInfo(venue.zone)).isoformat(timespec="seconds")
    there, minute = local_times([instant], [zone])
    return _Met(int(there[0]), float(minute[0]) + 1.0)


def _restarted(
    calls: CodedCalls, codebook: Codebook, found: Mapping[int, _Met | str]
) -> CodedCalls:
    times, claims = calls.times, calls.claims
    said_day, said_minute = times.said_day.copy(), times.said_minute.copy()
    deadline_day, blocked = times.deadline_day.copy(), claims.blocked.copy()
    is_void = np.zeros(len(blocked), dtype=bool)
    for row, answer in found.items():
        if isinstance(answer, str):
            blocked[row], is_void[row] = answer, answer == NOT_MET
            continue
        said_day[row], said_minute[row] = answer.day, answer.minute
        deadline = _deadline_from(calls.frame.iloc[row], answer.day, codebook)
        if deadline is None:
            blocked[row], is_void[row] = TOO_LATE, True
        else:
            deadline_day[row] = deadline
    return replace(
        calls,
        times=replace(
            times,
            said_day=said_day,
            said_minute=said_minute,
            deadline_day=deadline_day,
            stated_day=times.said_day,
        ),
        claims=replace(claims, blocked=blocked, is_void=is_void),
    )


def _deadline_from(row: pd.Series, day: int, codebook: Codebook) -> int | None:
    """Return the deadline counted from the day the clock started, None where it has gone."""
    start = day_of(day)
    try:
        horizon = parse_horizon(row["horizon"], said=start, codebook=codebook)
    except PhraseError:
        return None
    return 0 if horizon.deadline is None else day_number(horizon.deadline)
