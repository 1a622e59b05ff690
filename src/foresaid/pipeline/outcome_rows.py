"""Outcomes as rows of the ledger: sessions as dates, prices in the units of the file."""

from __future__ import annotations

import json
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from foresaid.claims.registry import KINDS, NOT_A_CALL
from foresaid.claims.relative import RelativeKernel
from foresaid.settle.outcomes import HIT, NONE

if TYPE_CHECKING:
    from foresaid.chance.per_call import Chances
    from foresaid.model.bars import BoolArray, FloatArray, IntArray
    from foresaid.pipeline.losses import Losses
    from foresaid.pipeline.world import CodedCalls, World
    from foresaid.settle.outcomes import Outcomes

Column = list[Any]

FLAGS = (
    "early",
    "tie",
    "alternates disagree",
    "deadline rolled back",
    "imputed horizon",
    "date only",
    "hours assumed",
    "no highs and lows",
    "price return only",
    "trading halted",
    "instrument ended",
    "currency converted",
)


@dataclass(frozen=True)
class Judgement:
    """Everything found about the calls of one ledger on one day."""

    world: World
    calls: CodedCalls
    outcomes: Outcomes
    chances: Chances
    losses: Losses


def outcome_rows(found: Judgement) -> pd.DataFrame:
    """Return the outcomes with the columns of the ledger's table, plain Python values."""
    columns = {"call": found.calls.frame["call"].tolist()} | _result(found) | _chance(found)
    return pd.DataFrame(columns, dtype=object)


def screened_out_rows(frame: pd.DataFrame) -> pd.DataFrame:
    """Return rows for statements that are not calls."""
    n = len(frame)
    columns: dict[str, Column] = {name: [None] * n for name in outcome_columns()}
    columns |= {name: [""] * n for name in ("direction", "flags")}
    columns |= {name: [0] * n for name in ("matured", *_COUNTS)}
    columns |= {
        "call": frame["call"].tolist(),
        "result": [NOT_A_CALL] * n,
        "reason": frame["not_a_call"].tolist(),
        "alternates": ["{}"] * n,
        "chance_model": ["none"] * n,
    }
    return pd.DataFrame(columns, dtype=object)


_COUNTS = ("chance_windows", "chance_hits", "chance_disjoint")


def outcome_columns() -> tuple[str, ...]:
    """Return the columns of an outcome row, in the order of the ledger's table."""
    return (
        "call",
        "result",
        "reason",
        "matured",
        "direction",
        "reference_session",
        "reference_price",
        "first_session",
        "deadline_session",
        "decided_session",
        "decided_price",
        "move_frac",
        "move_points",
        "measured",
        "alternates",
        "flags",
        "chance",
        "chance_model",
        *_COUNTS,
        "chance_volatility",
        "chance_modelled",
        "loss",
        "loss_reference",
        "covered",
    )


def _result(found: Judgement) -> dict[str, Column]:
    outcomes, market = found.outcomes, found.world.market
    resolved, bars = outcomes.resolved, market.bars
    windows = resolved.windows
    begun, decided = resolved.matured | resolved.running, outcomes.decided >= 0
    reference = _at(bars.close, windows.reference)
    move = outcomes.value - reference
    factor = _at(bars.factor, windows.reference)
    fraction = move / np.where(reference == 0, np.nan, reference)
    reference_price = _in_file(found, reference, windows.reference)
    decided_price = _in_file(found, outcomes.value, outcomes.decided)
    return {
        "result": outcomes.result.tolist(),
        "reason": outcomes.reason.tolist(),
        "matured": (resolved.matured & decided).astype(int).tolist(),
        "direction": outcomes.direction.tolist(),
        "reference_session": _sessions(bars.day, windows.reference, begun),
        "reference_price": _numbers(reference_price, begun),
        "first_session": _sessions(bars.day, windows.first, begun),
        "deadline_session": _sessions(bars.day, windows.last, resolved.matured),
        "decided_session": _sessions(bars.day, outcomes.decided, decided),
        "decided_price": _numbers(decided_price, decided),
        "move_frac": _numbers(fraction, decided & ~windows.additive),
        "move_points": _numbers(move / factor, decided),
        "measured": _numbers(outcomes.measured, decided),
        "alternates": _alternates(outcomes),
        "flags": _flags(found),
    }


def _chance(found: Judgement) -> dict[str, Column]:
    known = found.chances
    has_window = np.isfinite(found.outcomes.marks[:, 0])
    return {
        "chance": _numbers(known.chance, has_window),
        "chance_model": known.model.tolist(),
        "chance_windows": known.windows.tolist(),
        "chance_hits": known.hits.tolist(),
        "chance_disjoint": known.disjoint.tolist(),
        "chance_volatility": _numbers(known.deviation, has_window),
        "chance_modelled": _numbers(known.modelled, has_window),
        "loss": _numbers(found.losses.loss, has_window),
        "loss_reference": _numbers(found.losses.reference, has_window),
        "covered": _numbers(found.losses.covered, has_window),
    }


def _at(values: FloatArray | IntArray, positions: IntArray) -> FloatArray:
    """Return values at positions, NaN where the position means nothing."""
    if not len(values):
        return np.full(len(positions), np.nan)
    inside = (positions >= 0) & (positions < len(values))
    return np.where(inside, values[np.clip(positions, 0, len(values) - 1)], np.nan)


def _in_file(found: Judgement, price: FloatArray, positions: IntArray) -> FloatArray:
    n_bars = len(found.world.market.bars.day)
    if not n_bars:
        return price
    return found.world.market.in_file_units(price, np.clip(positions, 0, n_bars - 1))


def _numbers(values: FloatArray, known: BoolArray) -> Column:
    """Return Python floats, None where the value is not known."""
    keep = known & np.isfinite(values)
    return [
        float(v) if k else None for v, k in zip(values.tolist(), keep.tolist(), strict=True)
    ]


def _sessions(day: IntArray, positions: IntArray, known: BoolArray) -> Column:
    """Return ISO dates, None where the position is not known."""
    if not len(day):
        return [None] * len(positions)
    dates = day[np.clip(positions, 0, len(day) - 1)].astype("datetime64[D]").astype(str)
    return [str(d) if k else None for d, k in zip(dates.tolist(), known.tolist(), strict=True)]


def _alternates(outcomes: Outcomes) -> Column:
    """Return the alternates of each call as JSON, only those that apply."""
    names = {NONE: None, HIT: "hit"}
    columns = {name: values.tolist() for name, values in outcomes.alternates.items()}
    rows: Column = []
    for i in range(len(outcomes.result)):
        kept = {name: names.get(values[i], "miss") for name, values in columns.items()}
        rows.append(json.dumps({name: text for name, text in kept.items() if text}))
    return rows


def _flags(found: Judgement) -> Column:
    """Return the flags of each call, joined by semicolons."""
    outcomes, calls = found.outcomes, found.calls
    resolved = outcomes.resolved
    timed = calls.times.said_minute >= 0
    hours_known = found.world.market.venue.hours_known[calls.times.instrument]
    masks: dict[str, BoolArray] = {
        "early": outcomes.is_early,
        "tie": outcomes.tie & (outcomes.decided >= 0),
        "alternates disagree": _disagrees(outcomes),
        "deadline rolled back": resolved.rolled_back,
        "imputed horizon": calls.frame["horizon_imputed"].to_numpy(dtype=bool),
        "date only": ~timed,
        "hours assumed": timed & ~hours_known,
        "no highs and lows": _lacks_range(found),
        "price return only": _lacks_total(found),
        "trading halted": _was_halted(found),
        "instrument ended": _has_ended(found),
        "currency converted": _is_converted(found),
    }
    texts = np.full(len(outcomes.result), "", dtype=object)
    for name in FLAGS:
        texts[masks[name]] += name + "; "
    return [str(text).removesuffix("; ") for text in texts]


def _disagrees(outcomes: Outcomes) -> BoolArray:
    hit = outcomes.result == "hit"
    result = np.zeros(len(hit), dtype=bool)
    for values in outcomes.alternates.values():
        result |= (values != NONE) & ((values == HIT) != hit)
    return result & (outcomes.decided >= 0)


def _is_converted(found: Judgement) -> BoolArray:
    """Return where prices were converted to the currency of the call."""
    result: BoolArray = found.calls.times.instrument >= found.world.n_own
    if found.calls.times.legs is not None:
        result |= (found.calls.times.legs >= found.world.n_own).any(axis=1)
    return result


def _was_halted(found: Judgement) -> BoolArray:
    """Return where a halt lies between the reference session and the deadline."""
    market, resolved = found.world.market, found.outcomes.resolved
    times, windows = found.calls.times, resolved.windows
    after, last = _at(market.bars.day, windows.reference), _at(market.bars.day, windows.last)
    until = np.where(times.sessions > 0, last, np.minimum(times.deadline_day, market.as_of_day))
    begun = (resolved.matured | resolved.running) & np.isfinite(after) & np.isfinite(until)
    halted = np.zeros(len(begun), dtype=bool)
    rows = np.flatnonzero(begun)
    halted[rows] = market.halts_between(
        times.instrument[rows], after[rows].astype(np.int64), until[rows].astype(np.int64)
    )
    return halted


def _has_ended(found: Judgement) -> BoolArray:
    """Return where the terms of an ended instrument stood in for prices."""
    market, windows = found.world.market, found.outcomes.resolved.windows
    day = _at(market.bars.day, windows.last)
    ended = market.ended_day[found.calls.times.instrument]
    return (found.outcomes.decided >= 0) & (day >= ended)


def _lacks_total(found: Judgement) -> BoolArray:
    """Return where a comparison rests on price returns for want of total returns."""
    kinds, decided = found.calls.claims.kind, found.outcomes.decided >= 0
    kernels = {kind: KINDS[kind].kernel for kind in set(kinds.tolist())}
    result = np.zeros(len(kinds), dtype=bool)
    for kind, kernel in kernels.items():
        if isinstance(kernel, RelativeKernel):
            rows = np.flatnonzero((kinds == kind) & decided)
            own = found.outcomes.resolved.windows.take(rows)
            result[rows] = ~kernel.uses_total(found.world.market.bars, own)
    return result


def _lacks_range(found: Judgement) -> BoolArray:
    """Return where a claim on highs and lows was judged on closes for want of them."""
    bars, windows = found.world.market.bars, found.outcomes.resolved.windows
    kinds = found.calls.claims.kind
    wanted = np.array([KINDS[kind].kernel.reads_range for kind in kinds], dtype=bool)
    missing = np.concatenate(([0], np.cumsum(~bars.has_range)))
    judged = wanted & (found.outcomes.decided >= 0)
    first = np.clip(windows.first, 0, len(missing) - 1)
    end = np.clip(windows.last + 1, 0, len(missing) - 1)
    return judged & (missing[end] - missing[first] > 0)
