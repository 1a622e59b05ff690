"""Imputed horizons settled again with the codebook's shorter and longer alternates."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from foresaid.claims.horizons import parse_horizon
from foresaid.model.days import day_number, day_of
from foresaid.settle.outcomes import LONGER, NONE, SHORTER, CallClaims, settle_calls
from foresaid.settle.windows import CallTimes

if TYPE_CHECKING:
    from foresaid.model.bars import IntArray
    from foresaid.model.codebook import Codebook
    from foresaid.pipeline.world import CodedCalls, World
    from foresaid.settle.outcomes import Outcomes


def with_other_horizons(
    outcomes: Outcomes, calls: CodedCalls, world: World, codebook: Codebook
) -> Outcomes:
    """Return the outcomes with the alternates of imputed horizons filled in.

    A call whose horizon was stated has no such alternate, nor has one whose alternate has not
    matured.
    """
    rows = np.flatnonzero(calls.frame["horizon_imputed"].to_numpy(dtype=bool))
    if not len(rows):
        return outcomes
    alternates = dict(outcomes.alternates)
    for name in (SHORTER, LONGER):
        result = np.full(len(calls.frame), NONE, dtype=np.int64)
        result[rows] = _settled_with(name, rows, calls, world, codebook)
        alternates[name] = result
    return replace(outcomes, alternates=alternates)


def _settled_with(
    name: str, rows: IntArray, calls: CodedCalls, world: World, codebook: Codebook
) -> IntArray:
    """Return 1 hit, 0 miss, -1 for the calls at ``rows`` under other lengths."""
    words = calls.frame["horizon"].to_numpy(dtype=object)[rows]
    said = calls.times.said_day[rows]
    deadline_day = np.zeros(len(rows), dtype=np.int64)
    sessions = np.zeros(len(rows), dtype=np.int64)
    for at, (word, day) in enumerate(zip(words, said.tolist(), strict=True)):
        lengths = codebook.horizon_words.get(word, codebook.horizon_default)
        start = day_of(day)
        horizon = parse_horizon(getattr(lengths, name), said=start, codebook=codebook)
        sessions[at] = horizon.sessions or 0
        if horizon.deadline is not None:
            deadline_day[at] = day_number(horizon.deadline)
    times = CallTimes(
        calls.times.instrument[rows],
        said,
        calls.times.said_minute[rows],
        deadline_day,
        sessions,
        None if calls.times.legs is None else calls.times.legs[rows],
        None if calls.times.stated_day is None else calls.times.stated_day[rows],
    )
    claims = calls.claims
    own = CallClaims(
        claims.kind[rows],
        claims.values[rows],
        claims.units[rows],
        claims.blocked[rows],
        None if claims.is_void is None else claims.is_void[rows],
    )
    found = settle_calls(times, own, world.market, calls.inverse[rows], codebook.settlement)
    settled = found.resolved.matured & (found.decided >= 0)
    return np.where(settled, (found.result == "hit").astype(np.int64), NONE)
