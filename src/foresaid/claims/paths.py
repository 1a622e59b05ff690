"""Kernels that are more than comparisons with a mark: peaks, old lows, volatility, races."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Literal

import numpy as np

from foresaid.claims.bounds import (
    BoundKernel,
    Limits,
    extreme_of,
    judge_side,
    limits_of,
    moves_from,
)
from foresaid.claims.kernels import ONCE_DUE, Bound, Judged, Kernel, On, Over, Unfit

if TYPE_CHECKING:
    from foresaid.model.bars import Bars, BoolArray, FloatArray, IntArray, Windows

LOOK_BACK = 252  # sessions before the call over which peaks and old extremes are taken
SESSIONS_A_YEAR = 252
FEWEST_MOVES = 2  # with one there is no standard deviation


def _before(windows: Windows) -> IntArray:
    """Return the first session of the look-back, shape (n,)."""
    return np.maximum(windows.floor, windows.reference - LOOK_BACK)


@dataclass(frozen=True)
class DrawdownKernel(Kernel):
    """A close at or under the running peak times the mark, newly crossed in the window.

    The peak is the highest close from 252 sessions before the reference through the day that
    is judged. Where the close before the window was under its peak by as much already, the
    price has to come back before it can cross anew.
    """

    def judge(
        self, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
    ) -> Judged:
        """Judge window ``i`` against its own mark; see ``Kernel.judge``."""
        hit, decided, depth = self._walk(bars, windows, marks, tolerance, wants_depth=True)
        value, tie = bars.close[decided], np.zeros_like(hit)
        return Judged(hit, decided, value, depth, hit.copy(), tie)

    def hits(
        self, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
    ) -> BoolArray:
        """Return only whether each claim came true; see ``Kernel.hits``."""
        return self._walk(bars, windows, marks, tolerance, wants_depth=False)[0]

    def _walk(
        self,
        bars: Bars,
        windows: Windows,
        marks: FloatArray,
        tolerance: float,
        *,
        wants_depth: bool,
    ) -> tuple[BoolArray, IntArray, FloatArray]:
        """Return whether and when each window's fall was reached, and the deepest fall.

        All windows are walked session by session at once, longest first, so that the windows
        still running are always a leading slice.
        """
        order = np.argsort(windows.first - windows.last, kind="stable")
        own = windows.take(order)
        fall = _Fall(marks[order, 0], own.additive, tolerance, bool(own.additive.any()))
        length = own.last - own.first + 1
        peak, under = self._state_before(bars, own, fall)
        decided, deepest = own.last.copy(), np.zeros(len(own))
        hit = np.zeros(len(own), dtype=bool)
        at = own.first.copy()
        for step in range(int(length.max(initial=0))):
            live = slice(0, int(np.searchsorted(-length, -step, side="left")))
            close = bars.close.take(at[live])
            np.maximum(peak[live], close, out=peak[live])
            is_under = fall.reaches(close, peak[live], live)
            if wants_depth:
                depth = fall.depth(close, peak[live], live)
                np.maximum(deepest[live], depth, out=deepest[live])
            new = np.flatnonzero(is_under & ~(under[live] | hit[live]))
            decided[new] = at[new]
            hit[new] = True
            under[live] = is_under
            at[live] += 1
        back = np.empty_like(order)
        back[order] = np.arange(len(order))
        return hit[back], decided[back], deepest[back]

    def _state_before(
        self, bars: Bars, windows: Windows, fall: _Fall
    ) -> tuple[FloatArray, BoolArray]:
        """Return the peak before the first session, and whether the price was under then."""
        start, last = _before(windows), windows.first - 1
        has = last >= start
        peak = np.full(len(windows), -np.inf)
        under = np.zeros(len(windows), dtype=bool)
        rows = np.flatnonzero(has)
        peak[rows] = extreme_of(bars.close, start[rows], last[rows], largest=True)
        under[rows] = fall.reaches(bars.close[last[rows]], peak[rows], rows)
        return peak, under


@dataclass(frozen=True)
class _Fall:
    """How far under its peak a price has to be: a part of it, or points where additive."""

    mark: FloatArray
    additive: BoolArray
    tolerance: float
    any_additive: bool

    def reaches(self, close: FloatArray, peak: FloatArray, rows: slice | IntArray) -> BoolArray:
        """Return whether each close is at or under its mark below the peak."""
        limit = peak * (self.mark[rows] + self.tolerance)
        if self.any_additive:
            points = peak + self.mark[rows] + self.tolerance * np.abs(peak)
            limit = np.where(self.additive[rows], points, limit)
        reached: BoolArray = close <= limit
        return reached

    def depth(self, close: FloatArray, peak: FloatArray, rows: slice | IntArray) -> FloatArray:
        """Return how far each close is below the peak, as a part of it or in points."""
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.where(self.additive[rows], peak - close, 1.0 - close / peak)


@dataclass(frozen=True)
class OldExtremeKernel(Kernel):
    """No close beyond the lowest or highest close of the 252 sessions before the call.

    ``side`` is 1 where closes have to stay at or above the old low, -1 where they have to
    stay at or below the old high.
    """

    side: Literal[1, -1]

    def judge(
        self, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
    ) -> Judged:
        """Judge each window against its own old extreme; see ``Kernel.judge``."""
        del marks
        last = windows.reference - 1
        start = np.minimum(_before(windows), np.maximum(last, windows.floor))
        level = extreme_of(bars.close, start, np.maximum(last, start), largest=self.side < 0)
        slack = tolerance * np.abs(level)
        sides = np.full(len(level), self.side, dtype=np.int64)
        limits = Limits(sides, level, slack, level - slack * self.side)
        found = judge_side(self._bound, self.side, bars, windows, limits)
        return replace(found, measured=moves_from(level, found.value, windows.additive))

    @property
    def _bound(self) -> Bound:
        return Bound(self.side, strict=False, over=Over.ALL, on=On.CLOSE)

    def unsound(
        self, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
    ) -> list[Unfit]:
        """Return where no session before the call is known."""
        del bars, marks, tolerance
        return [Unfit(windows.reference <= windows.floor, "no price before the call")]


@dataclass(frozen=True)
class VolatilityKernel(Kernel):
    """Annualised standard deviation of the daily log moves of the window against the mark.

    The moves run from the reference close to the deadline close; ddof 1, 252 sessions a year.
    Above is strict, below as well.
    """

    side: Literal[1, -1]

    def judge(
        self, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
    ) -> Judged:
        """Judge each window's volatility against its own mark; see ``Kernel.judge``."""
        volatility = window_volatility(bars, windows)
        gap = (volatility - marks[:, 0]) * self.side
        slack = tolerance * marks[:, 0]
        hit = gap > slack
        never, value = np.zeros_like(hit), bars.close.take(windows.last)
        return Judged(hit, windows.last, value, volatility, never, np.abs(gap) <= slack)

    def unsound(
        self, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
    ) -> list[Unfit]:
        """Return where the window has too few moves, or a price has no logarithm."""
        del marks, tolerance
        few = windows.last - windows.reference < FEWEST_MOVES
        lowest = extreme_of(bars.close, windows.reference, windows.last, largest=False)
        return [
            Unfit(few, "too few sessions for a volatility", ONCE_DUE),
            Unfit(lowest <= 0, "a price at or below zero has no volatility"),
        ]


def window_volatility(bars: Bars, windows: Windows) -> FloatArray:
    """Return the annualised standard deviation of the daily log moves of each window.

    Shape (n,), as fractions; NaN where there are fewer than two moves or a price at or below
    zero. Each window is summed
    by itself, so that nothing outside it counts.
    """
    n = windows.last - windows.reference
    first = np.minimum(windows.reference + 1, windows.last)
    with np.errstate(divide="ignore", invalid="ignore"):
        moves = np.diff(np.log(np.maximum(bars.close, 0.0)), prepend=0.0)
    # stretches between the windows are summed as well: no sum may meet an infinity
    has_none = ~np.isfinite(moves)
    moves[has_none] = 0.0
    lacking = np.concatenate(([0], np.cumsum(has_none)))
    odd = lacking[windows.last + 1] > lacking[first]
    mean = _sum_of(moves, first, windows.last) / np.maximum(n, 1)
    spread = _sum_of(moves * moves, first, windows.last) - n * mean * mean
    variance = np.maximum(spread, 0.0) / np.maximum(n - 1, 1)
    return np.where(odd | (n < FEWEST_MOVES), np.nan, np.sqrt(variance * SESSIONS_A_YEAR))


def _sum_of(values: FloatArray, first: IntArray, last: IntArray) -> FloatArray:
    """Return the sum of each stretch, both ends included."""
    if not len(first):
        return np.zeros(0)
    edges = np.empty(2 * len(first), dtype=np.intp)
    edges[0::2], edges[1::2] = first, last
    inner = np.add.reduceat(values[: int(last.max()) + 1], edges)[::2]
    return np.where(last > first, inner, 0.0) + values[last]


@dataclass(frozen=True)
class RaceKernel(Kernel):
    """The first mark is touched before the second.

    Neither by the deadline is a miss. Where both are touched in the first session that
    touches either, daily prices cannot tell which came first.
    """

    reads_range = True

    def judge(
        self, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
    ) -> Judged:
        """Judge each window's race; see ``Kernel.judge``."""
        wanted, other = (self._first_touch(bars, windows, marks, tolerance, i) for i in (0, 1))
        hit = wanted.hit & (~other.hit | (wanted.decided < other.decided))
        lost = other.hit & ~hit
        decided = np.where(hit, wanted.decided, np.where(lost, other.decided, windows.last))
        value = np.where(hit, wanted.value, np.where(lost, other.value, bars.close[decided]))
        reference = bars.close.take(windows.reference)
        measured = moves_from(reference, value, windows.additive)
        return Judged(hit, decided, value, measured, hit | lost, np.zeros_like(hit))

    def _first_touch(
        self, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float, mark: int
    ) -> Judged:
        bound = Bound(0, strict=False, over=Over.ANY, on=On.RANGE, mark=mark)
        return BoundKernel((bound,)).judge(bars, windows, marks, tolerance)

    def unsound(
        self, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
    ) -> list[Unfit]:
        """Return where a level is the reference, or both are touched in one session."""
        reference = bars.close.take(windows.reference)
        at_level = np.zeros(len(windows), dtype=bool)
        for mark in (0, 1):
            bound = Bound(0, strict=False, over=Over.ANY, on=On.RANGE, mark=mark)
            limits = limits_of(bound, reference, windows, marks, tolerance)
            at_level |= np.abs(limits.price - reference) <= limits.slack
        wanted, other = (self._first_touch(bars, windows, marks, tolerance, i) for i in (0, 1))
        together = wanted.hit & other.hit & (wanted.decided == other.decided)
        return [
            Unfit(at_level, "the level is the reference price"),
            Unfit(together, "both levels were touched in one session"),
        ]
