"""The volatility model by simulation, for claims whose chance has no closed form."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from foresaid.model.bars import Bars, Windows

if TYPE_CHECKING:
    from foresaid.claims.kernels import Kernel
    from foresaid.model.bars import BoolArray, FloatArray

LOOK_BACK = 252  # simulated sessions before the reference, for claims that look back


def draw_steps(rng: np.random.Generator, *, paths: int, sessions: int) -> FloatArray:
    """Return standard normal steps, shape (paths, LOOK_BACK + sessions).

    One draw serves all calls. It goes session by session, so that longer walks begin as
    shorter ones do and a call's chance does not depend on its company.
    """
    return np.ascontiguousarray(rng.standard_normal((LOOK_BACK + sessions, paths)).T)


def simulated_chance(
    kernel: Kernel,
    marks: FloatArray,
    *,
    additive: BoolArray,
    deviation: FloatArray,
    n_sessions: FloatArray,
    steps: FloatArray,
) -> FloatArray:
    """Return the share of driftless walks in which each claim comes true.

    Parameters
    ----------
    kernel : Kernel
        The kernel that settles the calls.
    marks : ndarray of float, shape (n, n_marks)
        Thresholds relative to the reference.
    additive : ndarray of bool, shape (n,)
        Whether steps are differences instead of differences of logarithms.
    deviation : ndarray of float, shape (n,)
        Standard deviation of one session's move.
    n_sessions : ndarray of float, shape (n,)
        Expected sessions in the window, rounded to whole ones.
    steps : ndarray of float, shape (paths, at least LOOK_BACK + n_sessions)
        Standard normal draws.

    Returns
    -------
    ndarray of float, shape (n,)
        NaN where the deviation is unknown or zero, or the claim has no meaning on most walks.
    """
    result = np.full(len(deviation), np.nan)
    for i in np.flatnonzero(np.isfinite(deviation) & (deviation > 0)):
        length = min(max(1, round(float(n_sessions[i]))), steps.shape[1] - LOOK_BACK)
        bars, windows = _walks(
            steps[:, : LOOK_BACK + length] * deviation[i], additive=bool(additive[i])
        )
        own = np.broadcast_to(marks[i], (len(windows), marks.shape[1]))
        fit = np.ones(len(windows), dtype=bool)
        for mask, *_ in kernel.unsound(bars, windows, own, 0.0):
            fit &= ~mask
        if fit.mean() > 0.5:
            result[i] = kernel.hits(bars, windows.take(fit), own[fit], 0.0).mean()
    return result


def _walks(moves: FloatArray, *, additive: bool) -> tuple[Bars, Windows]:
    """Return each walk as the history of an instrument, with the window at its end."""
    paths, length = moves.shape
    walk = np.cumsum(moves, axis=1)
    walk -= walk[:, LOOK_BACK - 1 : LOOK_BACK]
    close = (walk if additive else np.exp(walk)).ravel()
    offsets = np.arange(paths + 1, dtype=np.int64) * length
    plain = np.ones(len(close))
    bars = Bars(
        symbols=tuple(str(i) for i in range(paths)),
        offsets=offsets,
        day=np.tile(np.arange(length, dtype=np.int64), paths),
        high=close,
        low=close,
        close=close,
        has_range=plain.astype(bool),
        factor=plain,
        total=close,
        total_known=np.zeros(paths, dtype=bool),
        over=np.zeros(paths, dtype=bool),
    )
    floor = offsets[:-1]
    reference = floor + LOOK_BACK - 1
    windows = Windows(
        floor,
        reference,
        reference + 1,
        offsets[1:] - 1,
        np.full(paths, additive),
    )
    return bars, windows
