"""A driftless random walk with the instrument's own volatility, where history is short.

Log prices (prices themselves where differences are compared) move by independent normal steps
with mean zero and the standard deviation of the daily moves before publication. Ends have a
closed form, first passages follow from the reflection principle; a path watched only at closes
crosses later, which moves its barrier away (``passage.monitoring_shift``). Highs and lows are
taken to see the whole path.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from foresaid.chance.passage import ends_above, monitoring_shift, stays_between, touches_above
from foresaid.claims.kernels import On, Over

if TYPE_CHECKING:
    from foresaid.claims.kernels import Bound
    from foresaid.model.bars import Bars, BoolArray, FloatArray


def rolling_volatility(
    bars: Bars, additive: BoolArray, *, sessions: int, minimum: int
) -> FloatArray:
    """Return the standard deviation of the daily moves up to each session.

    Parameters
    ----------
    bars : Bars
        Prices of all instruments.
    additive : ndarray of bool, shape (n_instruments,)
        Whether moves are differences instead of differences of logarithms.
    sessions, minimum : int
        How many moves count, and the fewest that give an answer.

    Returns
    -------
    ndarray of float, shape (n_bars,)
        Per session, ddof 1; NaN where there are too few moves.
    """
    result = np.full(len(bars.day), np.nan)
    for number, differs in enumerate(additive):
        own = slice(int(bars.offsets[number]), int(bars.offsets[number + 1]))
        close = bars.close[own]
        if len(close) > minimum:
            with np.errstate(divide="ignore", invalid="ignore"):
                scale = close if differs else np.log(np.where(close > 0, close, np.nan))
            moves = pd.Series(scale).diff()
            result[own] = moves.rolling(sessions, min_periods=minimum).std().to_numpy()
    return result


def modelled_chance(
    bounds: tuple[Bound, ...],
    marks: FloatArray,
    *,
    additive: BoolArray,
    deviation: FloatArray,
    n_sessions: FloatArray,
    has_range: BoolArray,
) -> FloatArray:
    """Return the chance that the walk meets the bounds of a claim.

    Parameters
    ----------
    bounds : tuple of Bound
        One bound, or an upper and a lower one over the same sessions.
    marks : ndarray of float, shape (n, n_marks)
        Thresholds relative to the reference.
    additive, has_range : ndarray of bool, shape (n,)
        Whether marks are differences, and whether highs and lows are known.
    deviation : ndarray of float, shape (n,)
        Standard deviation of one session's move.
    n_sessions : ndarray of float, shape (n,)
        Expected sessions in the window.

    Returns
    -------
    ndarray of float, shape (n,)
        NaN where the deviation is unknown or zero, or the bounds have no closed form.
    """
    result = np.full(len(deviation), np.nan)
    known = np.isfinite(deviation) & (deviation > 0) & (n_sessions > 0)
    if not bounds or not known.any():
        return result
    scale = deviation * np.sqrt(n_sessions)
    with np.errstate(divide="ignore", invalid="ignore"):
        plain = np.where(additive[:, None], marks, np.log(np.maximum(marks, 0.0)))
        distance = plain / np.where(known, scale, np.nan)[:, None]
    shift = monitoring_shift(np.maximum(n_sessions, 1.0))
    rows = np.flatnonzero(known)
    away = np.where(_sees_path(bounds[0], has_range), 0.0, shift)
    if len(bounds) == 1:
        at = distance[rows, bounds[0].mark]
        result[rows] = _one_bound(bounds[0], at, away[rows])
    else:
        result[rows] = _two_bounds(bounds, distance[rows], away[rows])
    return result


def has_closed_form(
    bounds: tuple[Bound, ...],
    marks: FloatArray,
    *,
    additive: BoolArray,
    has_range: BoolArray,
) -> BoolArray:
    """Return where ``modelled_chance`` has a formula, shape (n,).

    A path watched only at closes has none where its mark is not ahead of the reference: the
    first closes decide there, and the shifted barrier says nothing about them.
    """
    if not bounds:
        return np.zeros(len(marks), dtype=bool)
    bound = bounds[0]
    if len(bounds) > 1 or bound.over is Over.END or bound.side == 0:
        return np.ones(len(marks), dtype=bool)
    ahead = (marks[:, bound.mark] - np.where(additive, 0.0, 1.0)) * bound.side
    is_ahead = ahead > 0 if bound.over is Over.ANY else ahead < 0
    return is_ahead | _sees_path(bound, has_range)


def _sees_path(bound: Bound, has_range: BoolArray) -> BoolArray:
    return has_range & (bound.on is On.RANGE)


def _one_bound(bound: Bound, distance: FloatArray, away: FloatArray) -> FloatArray:
    side = (
        np.where(distance >= 0, 1, -1)
        if bound.side == 0
        else np.full(len(distance), bound.side)
    )
    ahead = distance * side
    if bound.over is Over.END:
        return ends_above(ahead)
    if bound.over is Over.ANY:
        return touches_above(np.where(ahead > 0, ahead + away, ahead))
    # to stay beyond a mark is never to touch it from the other side
    behind = -ahead
    return 1.0 - touches_above(np.where(behind > 0, behind + away, behind))


def _two_bounds(
    bounds: tuple[Bound, ...], distance: FloatArray, away: FloatArray
) -> FloatArray:
    lower = distance[:, next(bound.mark for bound in bounds if bound.side > 0)]
    upper = distance[:, next(bound.mark for bound in bounds if bound.side < 0)]
    if bounds[0].over is Over.END:
        return ends_above(lower) - ends_above(upper)
    inside = (lower < 0) & (upper > 0)
    result = np.zeros(len(lower))
    result[inside] = stays_between((lower - away)[inside], (upper + away)[inside])
    return result
