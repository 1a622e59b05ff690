"""Kernels of claims that state a distribution of the deadline close.

Their marks are a percentage and a level in turn, NaN beyond the last number of a claim.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from foresaid.claims.bounds import BoundKernel, limits_of
from foresaid.claims.kernels import Bound, Judged, Kernel, Over

if TYPE_CHECKING:
    from foresaid.model.bars import Bars, FloatArray, IntArray, Windows

SAME_SHARE = 1e-9  # percentages nearer than this are equal


def shares_of(marks: FloatArray) -> FloatArray:
    """Return the percentages as fractions, shape (n, parts), NaN where there are fewer."""
    return marks[:, 0::2]


def levels_of(marks: FloatArray) -> FloatArray:
    """Return the levels as marks, shape (n, levels), NaN where there are fewer."""
    return marks[:, 1::2]


@dataclass(frozen=True)
class QuantilesKernel(Kernel):
    """The deadline close lies between the lowest and the highest quantile, ends included."""

    fits_anywhere = True

    def judge(
        self, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
    ) -> Judged:
        """Judge each window against its own quantiles; see ``Kernel.judge``."""
        levels = levels_of(marks)
        # levels rise, so the highest is the last that is there
        ends = np.stack([levels[:, 0], np.fmax.reduce(levels, axis=1)], axis=1)
        return _INSIDE.judge(bars, windows, ends, tolerance)


_INSIDE = BoundKernel(
    (
        Bound(1, strict=False, over=Over.END, mark=0),
        Bound(-1, strict=False, over=Over.END, mark=1),
    )
)


@dataclass(frozen=True)
class BinsKernel(Kernel):
    """The deadline close falls into the bin given the most, or one of those given as much."""

    fits_anywhere = True

    def judge(
        self, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
    ) -> Judged:
        """Judge each window against its own bins; see ``Kernel.judge``."""
        shares = shares_of(marks)
        most = np.fmax.reduce(shares, axis=1)
        into = bin_of(bars, windows, marks, tolerance)
        hit = shares[np.arange(len(into)), into] >= most - SAME_SHARE
        reference, value = bars.close.take(windows.reference), bars.close.take(windows.last)
        with np.errstate(divide="ignore", invalid="ignore"):
            move = np.where(windows.additive, value - reference, value / reference - 1.0)
        never = np.zeros_like(hit)
        return Judged(hit, windows.last, value, move, never, never.copy())


def bin_of(bars: Bars, windows: Windows, marks: FloatArray, tolerance: float) -> IntArray:
    """Return the number of the bin that each deadline close falls into, shape (n,).

    An edge belongs to the lower bin, but the lowest edge to the bin above it.
    """
    reference, value = bars.close.take(windows.reference), bars.close.take(windows.last)
    into = np.zeros(len(windows), dtype=np.int64)
    for edge in range(levels_of(marks).shape[1]):
        bound = Bound(1, strict=edge > 0, over=Over.END, mark=2 * edge + 1)
        limit = limits_of(bound, reference, windows, marks, tolerance).edge
        # comparing with the NaN of an edge that is not there is false
        into += value > limit if bound.strict else value >= limit
    return into
