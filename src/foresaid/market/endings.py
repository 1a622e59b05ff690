"""Instruments that end: the history goes on at the terms, it never just stops.

From the effective session on, a share that is cashed out or wound up is worth its amount for
good; one that is exchanged is worth ``ratio`` of what it became, plus the amount. Prices in the
file from that session on are left aside.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from foresaid.market.closures import FAR
from foresaid.model.days import day_number

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from foresaid.market.actions import FactorSteps
    from foresaid.market.lines import Line
    from foresaid.model.bars import FloatArray, IntArray
    from foresaid.model.records import Action

ENDING = ("cash-out", "merger", "wind-up")
NEVER = FAR
_PRICES = ("high", "low", "close")


@dataclass(frozen=True)
class Ending:
    """How and when one instrument ends; the amount is NaN where its currency has no rate."""

    day: int
    kind: str
    ratio: float
    amount: float
    into: str


def ending_of(actions: Sequence[Action], *, today: int) -> Ending | None:
    """Return the first ending in force by ``today`` (days since 1970-01-01)."""
    for action in sorted(actions, key=lambda one: one.effective):
        day = day_number(action.effective)
        if action.kind in ENDING and day <= today:
            ratio = float(action.ratio or 0.0) if action.kind == "merger" else 0.0
            return Ending(day, action.kind, ratio, float(action.amount or 0.0), action.into)
    return None


def with_endings(
    lines: Mapping[str, Line],
    endings: Mapping[str, Ending],
    steps: Mapping[str, FactorSteps],
) -> dict[str, Line]:
    """Return the histories of all instruments with those that end carried on.

    Parameters
    ----------
    lines : mapping of str to Line
        Each instrument up to its end, by symbol.
    endings : mapping of str to Ending
        Only instruments that end.
    steps : mapping of str to FactorSteps
        Factors of every instrument.

    Returns
    -------
    dict of str to Line
        An instrument that became another one which ends itself follows it, with its halts and
        stale rows. One that became none of these, or one that leads back to it, just stops.
    """
    done: dict[str, Line] = {}

    def carried(symbol: str, chain: tuple[str, ...]) -> Line:
        if symbol not in done:
            ending = endings.get(symbol)
            result = lines[symbol]
            if ending is not None and np.isfinite(ending.amount):
                into = ending.into
                if not ending.ratio:
                    added = _fixed(result, ending, steps[symbol])
                    result = _join(result, added, ending.day)
                elif into in lines and into not in (*chain, symbol):
                    other = carried(into, (*chain, symbol))
                    added = _exchanged(ending, steps[symbol], other, steps[into])
                    result = _join(result, added, ending.day)
            done[symbol] = result
        return done[symbol]

    return {symbol: carried(symbol, ()) for symbol in lines}


def _fixed(own: Line, ending: Ending, steps: FactorSteps) -> Line:
    """Return the one session of an amount for good."""
    day = np.array([ending.day], dtype=np.int64)
    factor = steps.at(day)
    worth, none = np.full(1, ending.amount) * factor, np.zeros(0, dtype=np.int64)
    return replace(
        own,
        day=day,
        high=worth,
        low=worth,
        close=worth,
        has_range=np.ones(1, dtype=bool),
        factor=factor,
        total=worth,
        known_day=ending.day,
        aside=none,
        halts=none.reshape(0, 2),
        over=True,
        queries=none.reshape(0, 3),
    )


def _exchanged(
    ending: Ending, steps: FactorSteps, other: Line, other_steps: FactorSteps
) -> Line:
    """Return the sessions of what an instrument became, at the terms of the exchange."""
    day = np.array([ending.day], dtype=np.int64)
    factor = float(steps.at(day)[0])
    scale = ending.ratio / float(other_steps.at(day)[0])
    rest = other.take(other.day >= ending.day)
    worth = {name: getattr(rest, name) * scale + ending.amount for name in _PRICES}
    shares = _with_dividends(other, ending.day, scale, worth["close"])
    return replace(
        rest,
        high=worth["high"] * factor,
        low=worth["low"] * factor,
        close=worth["close"] * factor,
        factor=np.full(len(rest.day), factor),
        total=worth["close"] * factor * shares,
        aside=rest.aside[rest.aside >= ending.day],
        halts=_clipped(rest.halts, ending.day, FAR),
    )


def _with_dividends(other: Line, day: int, scale: float, worth: FloatArray) -> FloatArray:
    """Return total-return worth over worth, from the day of an exchange on.

    What the successor pays after that day is a dividend of the old instrument too, reinvested
    at what that one is worth by its terms.
    """
    before, after = other.total[:-1], other.total[1:]
    with np.errstate(divide="ignore", invalid="ignore"):
        paid = np.zeros(len(other.day))
        paid[1:] = other.close[:-1] * (after / before) - other.close[1:]
        growth = 1.0 + scale * np.where(other.day > day, paid, 0.0)[other.day >= day] / worth
    grown: FloatArray = np.where(np.isfinite(growth), growth, 1.0)
    return np.multiply.accumulate(grown)


def _join(own: Line, added: Line, day: int) -> Line:
    """Return one history up to its end, and on at the terms."""
    has_close = len(own.day) and own.close[-1]
    last_total = own.total[-1] / own.close[-1] if has_close else 1.0
    return replace(
        own,
        day=np.concatenate((own.day, added.day)),
        high=np.concatenate((own.high, added.high)),
        low=np.concatenate((own.low, added.low)),
        close=np.concatenate((own.close, added.close)),
        has_range=np.concatenate((own.has_range, added.has_range)),
        factor=np.concatenate((own.factor, added.factor)),
        total=np.concatenate((own.total, added.total * last_total)),
        known_day=max(own.known_day, added.known_day),
        aside=np.concatenate((own.aside, added.aside)),
        halts=np.concatenate((_clipped(own.halts, -FAR, day), added.halts)),
        over=added.over,
        queries=np.concatenate((own.queries, added.queries)),
    )


def _clipped(spans: IntArray, begin: int, end: int) -> IntArray:
    """Return the parts of spans between two days, the later one excluded."""
    inside = np.clip(spans, begin, end)
    return inside[inside[:, 0] < inside[:, 1]]


def ended_days(symbols: Sequence[str], endings: Mapping[str, Ending]) -> IntArray:
    """Return the day each instrument ends, ``NEVER`` for those that go on; shape (n,)."""
    return np.array(
        [endings[symbol].day if symbol in endings else NEVER for symbol in symbols],
        dtype=np.int64,
    )
