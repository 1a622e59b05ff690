"""Kernels: whether a claim came true in a window, for many windows at once.

A kernel sees prices, windows and *marks*, nothing else. A mark is a threshold relative to the
reference price: a ratio, or a difference for instruments whose price may be negative. The
same kernel therefore judges a claim at its own start, at every earlier start (base rate) and
at shifted starts (null worlds).
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass, replace
from enum import Enum
from typing import TYPE_CHECKING, Literal

import numpy as np

if TYPE_CHECKING:
    from foresaid.model.bars import Bars, BoolArray, FloatArray, IntArray, Windows


class Over(Enum):
    """Which sessions of a window have to meet a bound."""

    END = "the deadline session"
    ANY = "any session"
    ALL = "every session"


class On(Enum):
    """Which price of a session is looked at."""

    CLOSE = "close"
    RANGE = "high or low"


@dataclass(frozen=True, slots=True)
class Bound:
    """One comparison of prices with a mark.

    Attributes
    ----------
    side : {1, -1, 0}
        Prices must be above (1) or below (-1) the mark; 0 means beyond it as seen from the
        reference: above where the mark is higher, below where it is lower.
    strict : bool
        Whether equality fails.
    over, on : Over, On
        The sessions and the price compared. Above a mark on ``RANGE`` means the high for
        ``ANY`` and the low for ``ALL``; below, the other way round.
    mark : int
        Which of the claim's marks is meant.
    """

    side: Literal[1, -1, 0]
    strict: bool
    over: Over
    on: On = On.CLOSE
    mark: int = 0


@dataclass(frozen=True)
class Judged:
    """What a kernel found; arrays of shape (n,).

    Attributes
    ----------
    hit : ndarray of bool
        Whether the claim came true.
    decided : ndarray of int
        Position of the session that decided it: the first that settled the matter, the
        deadline session where nothing did before.
    value : ndarray of float
        The price looked at in that session, in continuous units.
    tie : ndarray of bool
        Whether the price that decided a strict comparison equals its mark.
    """

    hit: BoolArray
    decided: IntArray
    value: FloatArray
    tie: BoolArray


class Kernel(ABC):
    """One way of judging windows."""

    bounds: tuple[Bound, ...] = ()
    early: Literal["hit", "miss"] | None = None

    @abstractmethod
    def judge(
        self, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
    ) -> Judged:
        """Judge window ``i`` against its own marks, ``marks`` of shape (n, n_marks)."""

    def hits(
        self, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
    ) -> BoolArray:
        """Return only whether each claim came true, which may cost less than ``judge``."""
        return self.judge(bars, windows, marks, tolerance).hit

    def outcomes(
        self, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
    ) -> BoolArray:
        """Judge every window against every set of marks.

        Parameters
        ----------
        bars, windows : Bars, Windows
            Prices, and n windows of one instrument.
        marks : ndarray of float, shape (m, n_marks)
            Sets of marks.
        tolerance : float
            Two prices this near each other, as a part of their size, are equal.

        Returns
        -------
        ndarray of bool, shape (m, n)
            Row ``j`` is the outcome of claim ``j`` at each window.
        """
        shape = (len(windows), marks.shape[1])
        rows = [
            self.hits(bars, windows, np.broadcast_to(row, shape), tolerance) for row in marks
        ]
        return np.array(rows, dtype=bool).reshape(len(marks), len(windows))


@dataclass(frozen=True)
class BoundKernel(Kernel):
    """A claim that holds when all its bounds hold."""

    bounds: tuple[Bound, ...]

    @property
    def early(self) -> Literal["hit", "miss"] | None:  # type: ignore[override]
        """What can be known before the deadline."""
        over = self.bounds[0].over
        return {Over.ANY: "hit", Over.ALL: "miss", Over.END: None}[over]

    def judge(
        self, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
    ) -> Judged:
        """Judge window ``i`` against its own marks; see ``Kernel.judge``."""
        reference = bars.close.take(windows.reference)
        judged = [
            _judge_bound(
                bound, bars, windows, _limits(bound, reference, windows, marks, tolerance)
            )
            for bound in self.bounds
        ]
        return judged[0] if len(judged) == 1 else _both(judged)

    def hits(
        self, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
    ) -> BoolArray:
        """Return only whether each claim came true; see ``Kernel.hits``."""
        reference = bars.close.take(windows.reference)
        result: BoolArray | None = None
        for bound in self.bounds:
            limits = _limits(bound, reference, windows, marks, tolerance)
            hit = _hits_of_bound(bound, bars, windows, limits)
            result = hit if result is None else result & hit
        return np.ones(len(windows), dtype=bool) if result is None else result

    def outcomes(
        self, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
    ) -> BoolArray:
        """Judge every window against every set of marks; see ``Kernel.outcomes``."""
        result = np.ones((len(marks), len(windows)), dtype=bool)
        for bound in self.bounds:
            sides = _sides(bound, marks[:, bound.mark], bool(windows.additive[:1].any()))
            for side in (1, -1):
                rows = np.flatnonzero(sides == side)
                if len(rows):
                    one = replace(bound, side=side)
                    result[rows] &= _outcomes(one, bars, windows, marks[rows], tolerance)
        return result


def _sides(bound: Bound, marks: FloatArray, additive: BoolArray | bool) -> IntArray:
    """Return 1 or -1 for each mark; a mark at the reference counts as above it."""
    if bound.side:
        return np.broadcast_to(np.int64(bound.side), len(marks))
    here = np.where(additive, 0.0, 1.0)
    return np.where(marks >= here, 1, -1).astype(np.int64)


@dataclass(frozen=True)
class _Limits:
    """A mark as a price, with the slack within which a price equals it.

    ``edge`` is the price moved by the slack, so that one comparison meets the bound.
    """

    side: IntArray
    price: FloatArray
    slack: FloatArray
    edge: FloatArray

    def take(self, rows: slice | IntArray) -> _Limits:
        return _Limits(self.side[rows], self.price[rows], self.slack[rows], self.edge[rows])


def _limits(
    bound: Bound, reference: FloatArray, windows: Windows, marks: FloatArray, tolerance: float
) -> _Limits:
    mark = marks[:, bound.mark]
    price = reference * mark
    if windows.additive.any():
        price = np.where(windows.additive, reference + mark, price)
    slack = np.maximum(np.abs(price), np.abs(reference))
    slack *= tolerance
    side = _sides(bound, mark, windows.additive)
    outward = (bound.side or side) * (1 if bound.strict else -1)
    edge = price + slack * outward
    return _Limits(side, price, slack, edge)


def _meets(bound: Bound, side: int, value: FloatArray, limits: _Limits) -> BoolArray:
    if side > 0:
        return value > limits.edge if bound.strict else value >= limits.edge
    return value < limits.edge if bound.strict else value <= limits.edge


def _field(bars: Bars, bound: Bound, side: int) -> FloatArray:
    """Return the price that a bound looks at."""
    if bound.on is On.CLOSE or bound.over is Over.END:
        return bars.close
    wants_high = (side > 0) == (bound.over is Over.ANY)
    return bars.high if wants_high else bars.low


def _hits_of_bound(bound: Bound, bars: Bars, windows: Windows, limits: _Limits) -> BoolArray:
    hit = np.zeros(len(windows), dtype=bool)
    for side in (bound.side,) if bound.side else (1, -1):
        rows = slice(None) if bound.side else np.flatnonzero(limits.side == side)
        own, prices = windows.take(rows), _field(bars, bound, side)
        hit[rows] = _meets(bound, side, _measure(bound, side, prices, own), limits.take(rows))
    return hit


def _judge_bound(bound: Bound, bars: Bars, windows: Windows, limits: _Limits) -> Judged:
    """Judge one bound, each side of it apart."""
    if bound.side:
        return _judge_side(bound, bound.side, bars, windows, limits)
    n = len(windows)
    merged = Judged(np.zeros(n, bool), np.zeros(n, np.int64), np.zeros(n), np.zeros(n, bool))
    for side in (1, -1):
        rows = np.flatnonzero(limits.side == side)
        part = _judge_side(bound, side, bars, windows.take(rows), limits.take(rows))
        for name in ("hit", "decided", "value", "tie"):
            getattr(merged, name)[rows] = getattr(part, name)
    return merged


def _judge_side(
    bound: Bound, side: int, bars: Bars, windows: Windows, limits: _Limits
) -> Judged:
    prices = _field(bars, bound, side)
    extreme = _measure(bound, side, prices, windows)
    hit = _meets(bound, side, extreme, limits)
    tie = np.abs(extreme - limits.price) <= limits.slack if bound.strict else np.zeros_like(hit)
    if bound.over is Over.END:
        return Judged(hit, windows.last, extreme, tie)
    decided = windows.last.copy()
    rows = np.flatnonzero(hit if bound.over is Over.ANY else ~hit)
    if len(rows):
        decided[rows] = _first_that_decides(
            bound, side, prices, windows.take(rows), limits.take(rows)
        )
    return Judged(hit, decided, prices[decided], tie)


def _measure(bound: Bound, side: int, prices: FloatArray, windows: Windows) -> FloatArray:
    """Return the price that decides a bound: the last, the best or the worst of the window."""
    if bound.over is Over.END:
        return prices.take(windows.last)
    return extreme_of(
        prices, windows.first, windows.last, largest=(side > 0) == (bound.over is Over.ANY)
    )


def extreme_of(
    prices: FloatArray, first: IntArray, last: IntArray, *, largest: bool
) -> FloatArray:
    """Return the largest or smallest price of each window, both ends included.

    Parameters
    ----------
    prices : ndarray of float, shape (n_bars,)
        No NaN.
    first, last : ndarray of int, shape (n,)
        Positions, ``first <= last``.
    largest : bool
        Largest if true, smallest otherwise.

    Returns
    -------
    ndarray of float, shape (n,)
    """
    if not len(first):
        return np.zeros(0)
    better = np.maximum if largest else np.minimum
    edges = np.empty(2 * len(first), dtype=np.intp)
    edges[0::2], edges[1::2] = first, last
    # the last segment of reduceat runs to the end of the array: cut it off
    inner = better.reduceat(prices[: int(last.max()) + 1], edges)[::2]
    return better(inner, prices[last])


def _first_that_decides(
    bound: Bound, side: int, prices: FloatArray, windows: Windows, limits: _Limits
) -> IntArray:
    """Return the first position that meets an ANY bound or breaks an ALL bound.

    Halves the window until one session is left: whether the left half holds the session is
    one more extreme, so the whole costs about as much as judging did.
    """
    seeks_meeting = bound.over is Over.ANY
    largest = (side > 0) == seeks_meeting
    low, high = windows.first.copy(), windows.last.copy()
    # a window that is down to one session stays as it is: the session it holds decides
    while (low < high).any():
        middle = (low + high) >> 1
        extreme = extreme_of(prices, low, middle, largest=largest)
        inside = _meets(bound, side, extreme, limits) == seeks_meeting
        high = np.where(inside, middle, high)
        low = np.where(inside, low, middle + 1)
    return low


def _both(judged: list[Judged]) -> Judged:
    """Join bounds that all have to hold; the first to fail decides."""
    hit = np.logical_and.reduce([one.hit for one in judged])
    decided = np.array(
        [np.where(one.hit, np.iinfo(np.int64).max, one.decided) for one in judged]
    )
    latest = np.array([one.decided for one in judged])
    choice = np.where(hit, np.argmax(latest, axis=0), np.argmin(decided, axis=0))
    columns = np.arange(len(hit))
    value = np.array([one.value for one in judged])[choice, columns]
    tie = np.array([one.tie for one in judged])[choice, columns]
    return Judged(hit, latest[choice, columns], value, tie)


def _outcomes(
    bound: Bound, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
) -> BoolArray:
    """Judge every window against every mark of a one-sided bound, in relative prices."""
    side = int(bound.side)
    reference = bars.close.take(windows.reference)
    extreme = _measure(bound, side, _field(bars, bound, side), windows)
    if bool(windows.additive[:1].any()):
        relative, size = extreme - reference, np.abs(reference)
    else:
        relative, size = extreme / reference, np.ones_like(reference)
    mark = marks[:, bound.mark, None]
    slack = tolerance * np.maximum(size, np.abs(mark))
    gap = (relative - mark) * side
    return gap > slack if bound.strict else gap >= -slack


def at_deadline(kernel: BoundKernel) -> BoundKernel:
    """Return the kernel that looks at the deadline close alone."""
    return _with(kernel, over=Over.END, on=On.CLOSE)


def at_any_time(kernel: BoundKernel) -> BoundKernel:
    """Return the kernel that is content with any high or low of the window."""
    return _with(kernel, over=Over.ANY, on=On.RANGE)


def on_closes(kernel: BoundKernel) -> BoundKernel:
    """Return the kernel that looks at closes in place of highs and lows."""
    return _with(kernel, on=On.CLOSE)


def _with(kernel: BoundKernel, **changes: Over | On) -> BoundKernel:
    return BoundKernel(tuple(replace(bound, **changes) for bound in kernel.bounds))  # type: ignore[arg-type]
