"""Prices in query: so far from what was known before that a person has to look at them.

Nothing after a session is looked at to query its prices, so that a later price changes nothing
about a call that has been settled.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from foresaid.model.bars import Bars, BoolArray, FloatArray, IntArray
    from foresaid.model.codebook import SettlementRules

FIRST_QUERIED = 2  # a close is compared with the two closes before it
BLOCK = 8_192  # sessions whose moves before are held at once


@dataclass(frozen=True)
class Doubts:
    """Prices in query, and the market without them.

    Attributes
    ----------
    close, high, low : ndarray of bool, shape (n_bars,)
        Which prices are in query, at the sessions at which they stand in a file.
    bars : Bars
        The same sessions with those prices replaced, and what rests on them.
    session, origin : ndarray of int, shape (k,)
        Positions of sessions whose prices rest on one in query, rising, and where that one
        stands: the session itself, or one of the pair that converts its price, or of what the
        instrument became.
    """

    close: BoolArray
    high: BoolArray
    low: BoolArray
    bars: Bars
    session: IntArray
    origin: IntArray

    @cached_property
    def any(self) -> BoolArray:
        """Which sessions rest on a price in query, shape (n_bars,)."""
        result = np.zeros(len(self.close), dtype=bool)
        result[self.session] = True
        return result


def find_doubts(
    bars: Bars, additive: BoolArray, confirmed: IntArray, rules: SettlementRules
) -> Doubts | None:
    """Return the prices in query, None where there are none.

    Parameters
    ----------
    bars : Bars
        Prices in continuous units.
    additive : ndarray of bool, shape (n_instruments,)
        Whether prices are compared by difference.
    confirmed : ndarray of int
        Positions of sessions whose prices a person has found right.
    rules : SettlementRules
        The limits.

    Notes
    -----
    A close is in query where it lies further than the limit from both closes before it, a
    high or low where it lies further beyond the close before it and its own close (the close
    before alone where the own close is in query). The limit is a multiple of the median
    absolute daily move before the session, and at least a floor. Own rule, no source.
    """
    number = np.repeat(np.arange(len(bars.symbols)), np.diff(bars.offsets))
    by_points = additive[number]
    scale = _scale(bars.close, by_points)
    can_be = np.arange(len(number)) - bars.offsets[number] >= FIRST_QUERIED
    can_be[confirmed] = False
    before, older = np.roll(scale, 1), np.roll(scale, 2)
    limits = _Limits(bars, scale, number, by_points, rules)
    with np.errstate(invalid="ignore"):
        far = np.minimum(np.abs(scale - before), np.abs(scale - older))
        close = limits.exceeded(far, can_be)
        own = np.where(close, before, scale)
        over = _scale(bars.high, by_points) - np.maximum(before, own)
        under = np.minimum(before, own) - _scale(bars.low, by_points)
        high, low = limits.exceeded(over, can_be), limits.exceeded(under, can_be)
    if not (close | high | low).any():
        return None
    own = np.flatnonzero(close | high | low)
    return Doubts(close, high, low, _without(bars, close, high, low), own, own)


def _scale(price: FloatArray, by_points: BoolArray) -> FloatArray:
    """Return prices on the scale on which distances are taken."""
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where(by_points, price, np.log(price))


@dataclass(frozen=True)
class _Limits:
    """How far a price may lie from those before it."""

    bars: Bars
    scale: FloatArray
    number: IntArray
    by_points: BoolArray
    rules: SettlementRules

    def exceeded(self, distance: FloatArray, can_be: BoolArray) -> BoolArray:
        """Return where a distance exceeds the limit of its session, shape (n_bars,)."""
        rules = self.rules
        floor = np.where(self.by_points, rules.query_points, np.log1p(rules.query_part))
        # almost all sessions are within the floor, which needs no history
        rows = np.flatnonzero(can_be & (distance > floor))
        result = np.zeros(len(distance), dtype=bool)
        wide = np.where(
            self.by_points[rows], rules.query_points_short, np.log1p(rules.query_part_short)
        )
        median, known = self._typical(rows)
        limit = np.maximum(rules.query_moves * median, floor[rows])
        limit = np.where(known >= rules.query_minimum, limit, wide)
        result[rows] = distance[rows] > limit
        return result

    def _typical(self, rows: IntArray) -> tuple[FloatArray, IntArray]:
        """Return the median absolute move before each session, and of how many moves."""
        known = np.minimum(
            self.rules.query_sessions, rows - 1 - self.bars.offsets[self.number[rows]]
        )
        moves = np.abs(np.diff(self.scale, prepend=np.nan))
        back = np.arange(1, self.rules.query_sessions + 1)
        median = np.zeros(len(rows))
        for begin in range(0, len(rows), BLOCK):
            part = slice(begin, begin + BLOCK)
            found = moves[np.maximum(rows[part, None] - back, 0)]
            median[part] = _median(np.where(back <= known[part, None], found, np.inf))
        return median, known


def _median(moves: FloatArray) -> FloatArray:
    """Return the median of each row, leaving infinities aside, 0 where there is nothing."""
    ordered = np.sort(np.where(np.isnan(moves), np.inf, moves), axis=1)
    count = np.isfinite(ordered).sum(axis=1)
    rows = np.arange(len(ordered))
    low = ordered[rows, np.maximum((count - 1) // 2, 0)]
    high = ordered[rows, np.maximum(count // 2, 0).clip(max=ordered.shape[1] - 1)]
    return np.where(count > 0, 0.5 * (low + high), 0.0)


def _without(bars: Bars, close: BoolArray, high: BoolArray, low: BoolArray) -> Bars:
    """Return the bars with the prices in query replaced by what was known before."""
    before = np.roll(bars.close, 1)
    own = np.where(close, before, bars.close)
    top = np.where(
        high, np.maximum(before, own), np.where(close, np.maximum(before, bars.high), bars.high)
    )
    bottom = np.where(
        low, np.minimum(before, own), np.where(close, np.minimum(before, bars.low), bars.low)
    )
    with np.errstate(divide="ignore", invalid="ignore"):
        total = np.where(close, bars.total * own / bars.close, bars.total)
    return replace(
        bars,
        close=own,
        high=top,
        low=bottom,
        total=total,
    )
