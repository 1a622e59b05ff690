"""Kernels made of comparisons: prices against marks at the end, ever, or throughout."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from foresaid.claims.kernels import Bound, Judged, Kernel, On, Over, Unfit

if TYPE_CHECKING:
    from foresaid.model.bars import Bars, BoolArray, FloatArray, IntArray, Windows


@dataclass(frozen=True)
class BoundKernel(Kernel):
    """A claim that holds when all its bounds hold."""

    bounds: tuple[Bound, ...]
    fits_anywhere = True

    @property
    def reads_range(self) -> bool:  # type: ignore[override]
        """Whether any bound looks at highs and lows."""
        return any(bound.on is On.RANGE for bound in self.bounds)

    def judge(
        self, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
    ) -> Judged:
        """Judge window ``i`` against its own marks; see ``Kernel.judge``."""
        reference = bars.close.take(windows.reference)
        judged = [
            _judge_bound(
                bound, bars, windows, limits_of(bound, reference, windows, marks, tolerance)
            )
            for bound in self.bounds
        ]
        return judged[0] if len(judged) == 1 else _both(judged)

    def hits(
        self, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
    ) -> BoolArray:
        """Return only whether each claim came true; see ``Kernel.hits``."""
        reference = bars.close.take(windows.reference, mode="clip")
        result: BoolArray | None = None
        for bound in self.bounds:
            limits = limits_of(bound, reference, windows, marks, tolerance)
            hit = _hits_of_bound(bound, bars, windows, limits)
            result = hit if result is None else result & hit
        return np.ones(len(windows), dtype=bool) if result is None else result

    def unsound(
        self, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
    ) -> list[Unfit]:
        """Return where the level of a claim without a side is the reference itself."""
        reference = bars.close.take(windows.reference)
        found = []
        for bound in self.bounds:
            if bound.side == 0:
                limits = limits_of(bound, reference, windows, marks, tolerance)
                at_level = np.abs(limits.price - reference) <= limits.slack
                found.append(Unfit(at_level, "the level is the reference price"))
        return found

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
class Limits:
    """A mark as a price, with the slack within which a price equals it.

    ``edge`` is the price moved by the slack, so that one comparison meets the bound.
    """

    side: IntArray
    price: FloatArray
    slack: FloatArray
    edge: FloatArray

    def take(self, rows: slice | IntArray) -> Limits:
        """Return the limits at ``rows``."""
        return Limits(self.side[rows], self.price[rows], self.slack[rows], self.edge[rows])


def limits_of(
    bound: Bound, reference: FloatArray, windows: Windows, marks: FloatArray, tolerance: float
) -> Limits:
    """Return the mark of a bound as prices, one for each window."""
    mark = marks[:, bound.mark]
    price = reference * mark
    slack = np.abs(price)
    if windows.additive.any():
        price = np.where(windows.additive, reference + mark, price)
        # a level near zero may be a difference of two large numbers
        slack = np.maximum(np.abs(price), np.abs(reference))
    slack *= tolerance
    side = _sides(bound, mark, windows.additive)
    outward = (bound.side or side) * (1 if bound.strict else -1)
    edge = price + slack * outward
    return Limits(side, price, slack, edge)


def _meets(bound: Bound, side: int, value: FloatArray, limits: Limits) -> BoolArray:
    if side > 0:
        return value > limits.edge if bound.strict else value >= limits.edge
    return value < limits.edge if bound.strict else value <= limits.edge


def _field(bars: Bars, bound: Bound, side: int) -> FloatArray:
    """Return the price that a bound looks at."""
    if bound.on is On.CLOSE or bound.over is Over.END:
        return bars.close
    wants_high = (side > 0) == (bound.over is Over.ANY)
    return bars.high if wants_high else bars.low


def blank_judged(n: int) -> Judged:
    """Return arrays to be filled in."""
    return Judged(
        *(np.zeros(n, dtype=kind) for kind in (bool, np.int64, float, float, bool, bool))
    )


def _hits_of_bound(bound: Bound, bars: Bars, windows: Windows, limits: Limits) -> BoolArray:
    hit = np.zeros(len(windows), dtype=bool)
    for side in (bound.side,) if bound.side else (1, -1):
        rows = slice(None) if bound.side else np.flatnonzero(limits.side == side)
        own, prices = windows.take(rows), _field(bars, bound, side)
        hit[rows] = _meets(bound, side, _measure(bound, side, prices, own), limits.take(rows))
    return hit


def _judge_bound(bound: Bound, bars: Bars, windows: Windows, limits: Limits) -> Judged:
    """Judge one bound, each side of it apart."""
    if bound.side:
        return judge_side(bound, bound.side, bars, windows, limits)
    merged = blank_judged(len(windows))
    for side in (1, -1):
        rows = np.flatnonzero(limits.side == side)
        part = judge_side(bound, side, bars, windows.take(rows), limits.take(rows))
        for name, column in vars(part).items():
            getattr(merged, name)[rows] = column
    return merged


def judge_side(bound: Bound, side: int, bars: Bars, windows: Windows, limits: Limits) -> Judged:
    """Judge windows against limits that all lie on one side."""
    prices = _field(bars, bound, side)
    extreme = _measure(bound, side, prices, windows)
    hit = _meets(bound, side, extreme, limits)
    tie = np.abs(extreme - limits.price) <= limits.slack if bound.strict else np.zeros_like(hit)
    if bound.over is Over.END:
        never = np.zeros_like(hit)
        return Judged(hit, windows.last, extreme, _moves(bars, windows, extreme), never, tie)
    decided = windows.last.copy()
    final = hit if bound.over is Over.ANY else ~hit
    rows = np.flatnonzero(final)
    if len(rows):
        decided[rows] = first_that_decides(
            bound, side, prices, windows.take(rows), limits.take(rows)
        )
    value = prices[decided]
    return Judged(hit, decided, value, _moves(bars, windows, value), final, tie)


def _moves(bars: Bars, windows: Windows, value: FloatArray) -> FloatArray:
    """Return the move from the reference, as a part of it or in points."""
    return moves_from(bars.close.take(windows.reference), value, windows.additive)


def moves_from(start: FloatArray, value: FloatArray, additive: BoolArray) -> FloatArray:
    """Return moves from one price to another, as a part of it or in points; shape (n,)."""
    move = value - start
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where(additive, move, move / start)


def _measure(bound: Bound, side: int, prices: FloatArray, windows: Windows) -> FloatArray:
    """Return the price that decides a bound: the last, the best or the worst of the window."""
    if bound.over is Over.END:
        return prices.take(windows.last, mode="clip")
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


def first_that_decides(
    bound: Bound, side: int, prices: FloatArray, windows: Windows, limits: Limits
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
    last = np.array([one.decided for one in judged])
    failed = np.array(
        [np.where(one.hit, np.iinfo(np.int64).max, one.decided) for one in judged]
    )
    choice = np.where(hit, np.argmax(last, axis=0), np.argmin(failed, axis=0))
    columns = np.arange(len(hit))

    def chosen(name: str) -> Any:  # noqa: ANN401 - the type of the column
        return np.array([getattr(one, name) for one in judged])[choice, columns]

    return Judged(
        hit,
        chosen("decided"),
        chosen("value"),
        chosen("measured"),
        chosen("final") & ~hit,
        chosen("tie"),
    )


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
