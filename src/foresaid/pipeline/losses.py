"""Losses of point, interval and distribution forecasts, and those of forecasts without skill.

A point forecast is set against no change, the others against how far the price had moved over
earlier windows of the same length. Losses are parts of the reference price (points where
prices are compared by difference); the ranked probability score has no unit.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np

from foresaid.chance.past_moves import past_moves
from foresaid.claims.distribution_kernels import bin_of, levels_of, shares_of
from foresaid.claims.registry import KINDS
from foresaid.score.losses import interval_score, pinball_loss, ranked_probability_score

if TYPE_CHECKING:
    from foresaid.chance.base_rate import Starts
    from foresaid.claims.kind import Loss
    from foresaid.market.known import Market
    from foresaid.model.bars import FloatArray, IntArray
    from foresaid.model.codebook import Codebook
    from foresaid.settle.outcomes import Outcomes


@dataclass(frozen=True)
class Losses:
    """Losses of n calls; arrays (n,), NaN where there is none.

    ``loss`` is that of the call, ``reference`` that of the forecast without skill, ``covered``
    the share of the way to a target that the deadline close had gone.
    """

    loss: FloatArray
    reference: FloatArray
    covered: FloatArray


def losses_of(
    kinds: np.ndarray[Any, np.dtype[np.object_]],
    outcomes: Outcomes,
    starts: Starts,
    market: Market,
    codebook: Codebook,
) -> Losses:
    """Return the losses of matured calls of the kinds that keep one."""
    n = len(kinds)
    loss, reference, covered = (np.full(n, np.nan) for _ in range(3))
    by_kind: dict[Loss, list[str]] = {}
    for name in set(kinds.tolist()):
        by_kind.setdefault(KINDS[name].loss, []).append(name)
    done = outcomes.resolved.matured & (outcomes.decided >= 0)
    for name, members in by_kind.items():
        rows = np.flatnonzero(np.isin(kinds, members) & done & bool(name))
        if len(rows):
            one = _Forecasts(rows, outcomes, starts, market, codebook)
            loss[rows], reference[rows] = getattr(one, name)()
            covered[rows] = one.covered() if name == "error" else np.nan
    return Losses(loss, reference, covered)


class _Forecasts:
    """Calls whose forecasts are measured in one way."""

    def __init__(
        self,
        rows: IntArray,
        outcomes: Outcomes,
        starts: Starts,
        market: Market,
        codebook: Codebook,
    ) -> None:
        self.rows, self.market, self.codebook = rows, market, codebook
        self.marks = outcomes.marks[rows]
        self.windows = outcomes.resolved.windows.take(rows)
        self.here = np.where(self.windows.additive, 0.0, 1.0)
        self.came = outcomes.measured[rows] + self.here
        self.starts = starts

    def error(self) -> tuple[FloatArray, FloatArray]:
        """Return the distance of the close from a target, and from no change."""
        return np.abs(self.came - self.marks[:, 0]), np.abs(self.came - self.here)

    def covered(self) -> FloatArray:
        """Return the share of the way to a target that the close had gone."""
        return (self.came - self.here) / (self.marks[:, 0] - self.here)

    def interval(self) -> tuple[FloatArray, FloatArray]:
        """Return interval scores of the range, and of the middle of past moves."""
        stated = self.marks[:, 2]
        own = interval_score(self.marks[:, 0], self.marks[:, 1], self.came, stated)
        low, high = (
            self._past_quantiles(0.5 + side * stated[:, None] / 2.0) for side in (-1, 1)
        )
        known = np.isfinite(low[:, 0])
        past = np.full(len(self.rows), np.nan)
        past[known] = interval_score(
            low[known, 0], high[known, 0], self.came[known], stated[known]
        )
        return own, past

    def pinball(self) -> tuple[FloatArray, FloatArray]:
        """Return pinball losses of the quantiles, and of the same quantiles of past moves."""
        own_levels, stated = levels_of(self.marks), shares_of(self.marks)
        stated = stated[:, : own_levels.shape[1]]
        own = pinball_loss(stated, own_levels, self.came)
        quantiles = self._past_quantiles(stated)
        known = np.isfinite(quantiles).any(axis=1)
        past = np.full(len(self.rows), np.nan)
        past[known] = pinball_loss(stated[known], quantiles[known], self.came[known])
        return own, past

    def ranked(self) -> tuple[FloatArray, FloatArray]:
        """Return ranked probability scores of the bins, and of past moves in these bins."""
        into = bin_of(
            self.market.bars, self.windows, self.marks, self.codebook.settlement.tolerance
        )
        own = ranked_probability_score(shares_of(self.marks), into)
        shares = self._past_shares()
        known = np.isfinite(shares).any(axis=1)
        past = np.full(len(self.rows), np.nan)
        past[known] = ranked_probability_score(shares[known], into[known])
        return own, past

    @cached_property
    def _past(self) -> list[FloatArray]:
        """The ends of earlier windows of each call, sorted."""
        return past_moves(
            self.market.bars,
            self.starts.take(self.rows),
            enough=self.codebook.chance.enough_windows,
        )

    def _past_quantiles(self, levels: FloatArray) -> FloatArray:
        """Return quantiles of past moves, shape of ``levels``, NaN where there are none."""
        result = np.full(levels.shape, np.nan)
        for row, moves in enumerate(self._past):
            wanted = np.isfinite(levels[row])
            if len(moves):
                result[row, wanted] = np.quantile(moves, levels[row, wanted])
        return result

    def _past_shares(self) -> FloatArray:
        """Return how often past moves fell into each bin, NaN where there are none."""
        stated, edges = shares_of(self.marks), levels_of(self.marks)
        result = np.full(stated.shape, np.nan)
        for row, moves in enumerate(self._past):
            own = edges[row][np.isfinite(edges[row])]
            if len(moves):
                upto = np.searchsorted(moves, own, side="right")
                # the lowest edge belongs to the bin above it
                upto[0] = np.searchsorted(moves, own[0], side="left")
                counts = np.diff(np.concatenate(([0], upto, [len(moves)])))
                result[row, : len(counts)] = counts / len(moves)
        return result
