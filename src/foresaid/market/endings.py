"""Instruments that end: the history goes on at the terms, it never just stops.

From the effective session on, a share that is cashed out or wound up is worth its amount for
good; one that is exchanged is worth ``ratio`` of what it became, plus the amount. Prices in the
file from that session on are left aside.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from foresaid.model.days import day_number

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from foresaid.market.actions import FactorSteps
    from foresaid.model.bars import BoolArray, FloatArray, IntArray
    from foresaid.model.records import Action

ENDING = ("cash-out", "merger", "wind-up")
NEVER = np.iinfo(np.int64).max
_PRICES = ("high", "low", "close")

Columns = dict[str, Any]


@dataclass(frozen=True)
class Ending:
    """How and when one instrument ends."""

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
    columns: Mapping[str, Columns],
    endings: Mapping[str, Ending],
    steps: Mapping[str, FactorSteps],
) -> dict[str, Columns]:
    """Return the histories of all instruments with those that end carried on.

    Parameters
    ----------
    columns : mapping of str to dict
        Arrays of each instrument in continuous units, by symbol.
    endings : mapping of str to Ending
        Only instruments that end.
    steps : mapping of str to FactorSteps
        Factors of every instrument.

    Returns
    -------
    dict of str to dict
        An instrument that became another one which ends itself follows it; a circle is left
        where it is.
    """
    done: dict[str, Columns] = {}

    def carried(symbol: str, chain: tuple[str, ...]) -> Columns:
        if symbol not in done:
            ending = endings.get(symbol)
            result = columns[symbol]
            if ending is not None:
                into = ending.into if ending.into in columns else ""
                other = None
                if into and into not in chain:
                    other = carried(into, (*chain, symbol))
                result = _carry(result, ending, steps[symbol], other, steps.get(into))
            done[symbol] = result
        return done[symbol]

    return {symbol: carried(symbol, ()) for symbol in columns}


def _carry(
    own: Columns,
    ending: Ending,
    steps: FactorSteps,
    other: Columns | None,
    other_steps: FactorSteps | None,
) -> Columns:
    """Return one history cut at its ending and carried on at the terms."""
    keep = int(np.searchsorted(own["day"], ending.day))
    day = np.array([ending.day], dtype=np.int64)
    factor = float(steps.at(day)[0])
    worth = {name: np.full(1, ending.amount) for name in _PRICES}
    has_range, growth = np.ones(1, dtype=bool), np.ones(1)
    if other is not None and other_steps is not None and ending.ratio:
        begin = int(np.searchsorted(other["day"], ending.day))
        scale = ending.ratio / float(other_steps.at(day)[0])
        day, has_range = other["day"][begin:], other["has_range"][begin:]
        worth = {name: other[name][begin:] * scale + ending.amount for name in _PRICES}
        growth = _with_dividends(other, begin, scale, ending.amount)
    close = worth["close"] * factor
    last_total = own["total"][keep - 1] / own["close"][keep - 1] if keep else 1.0
    added = {
        "day": day,
        **{name: worth[name] * factor for name in _PRICES},
        "has_range": has_range,
        "factor": np.full(len(day), factor),
        "total": close * growth * last_total,
    }
    joined = {name: np.concatenate((own[name][:keep], added[name])) for name in added}
    return own | joined


def _with_dividends(other: Columns, begin: int, scale: float, amount: float) -> FloatArray:
    """Return total-return worth over worth: what the successor paid since stays invested."""
    close, total = other["close"][begin:], other["total"][begin:]
    if not len(close):
        return np.ones(0)
    with np.errstate(divide="ignore", invalid="ignore"):
        paid = (total / total[0]) / (close / close[0])
        worth = close * scale + amount
        grown = (close * paid * scale + amount) / worth
    return np.where(np.isfinite(grown), grown, 1.0)


def days_of_terms(symbol: str, endings: Mapping[str, Ending]) -> list[int]:
    """Return the days on which terms set the price of an instrument or of what it became."""
    days: list[int] = []
    seen: set[str] = set()
    while symbol in endings and symbol not in seen:
        seen.add(symbol)
        days.append(endings[symbol].day)
        symbol = endings[symbol].into
    return days


def are_over(symbols: Sequence[str], endings: Mapping[str, Ending]) -> BoolArray:
    """Return which instruments have come to a fixed amount, so that no price can follow.

    An instrument that became another one is over when that one is. Shape (n,).
    """

    def is_over(symbol: str) -> bool:
        seen: set[str] = set()
        while symbol in endings and symbol not in seen:
            seen.add(symbol)
            if endings[symbol].kind != "merger" or not endings[symbol].ratio:
                return True
            symbol = endings[symbol].into
        return False

    return np.array([is_over(symbol) for symbol in symbols], dtype=np.bool_)


def ended_days(symbols: Sequence[str], endings: Mapping[str, Ending]) -> IntArray:
    """Return the day each instrument ends, ``NEVER`` for those that go on; shape (n,)."""
    return np.array(
        [endings[symbol].day if symbol in endings else NEVER for symbol in symbols],
        dtype=np.int64,
    )
