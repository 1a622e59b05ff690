"""Scores of stated probabilities."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy import special

if TYPE_CHECKING:
    from foresaid.model.bars import BoolArray, FloatArray


@dataclass(frozen=True, slots=True)
class ZTest:
    """A standard normal statistic with its two-sided p-value."""

    z: float
    p_two_sided: float


def brier_score(probabilities: FloatArray, outcomes: BoolArray) -> float:
    """Return the Brier score of probabilities for an event.

    Parameters
    ----------
    probabilities : ndarray of float, shape (n,)
        Stated probability that the event happens, from 0 to 1, n at least 1.
    outcomes : ndarray of bool, shape (n,)
        Whether it happened.

    Returns
    -------
    float
        Mean of the squared distances, 0 best, 1 worst.

    Raises
    ------
    ValueError
        If the arrays are empty, differ in length, or a probability is not one.

    Notes
    -----
    The half form: one class counts. The original sums over both classes, twice this value.

    References
    ----------
    .. [1] G. W. Brier (1950). Verification of forecasts expressed in terms of probability.
       Monthly Weather Review 78(1), 1-3.

    Examples
    --------
    >>> brier_score(np.array([0.25, 0.75]), np.array([False, True]))
    0.0625
    """
    return brier_score_band(probabilities, probabilities, outcomes)


def brier_score_band(low: FloatArray, high: FloatArray, outcomes: BoolArray) -> float:
    """Return the Brier score of bands, averaged over probabilities spread evenly in each.

    Parameters
    ----------
    low, high : ndarray of float, shape (n,)
        Bounds of the stated probability, ``0 <= low <= high <= 1``, n at least 1.
    outcomes : ndarray of bool, shape (n,)
        Whether the event happened.

    Returns
    -------
    float
        Mean of ``(middle - outcome)^2 + (high - low)^2 / 12``; the Brier score where the
        bounds are equal.

    Raises
    ------
    ValueError
        If the arrays are empty, differ in length, or a band is not one.

    Notes
    -----
    The integral of ``(p - y)^2`` over the band, divided by its width.

    References
    ----------
    .. [1] G. W. Brier (1950), as in ``brier_score``; the average is elementary.

    Examples
    --------
    >>> round(brier_score_band(np.array([0.0]), np.array([1.0]), np.array([True])), 6)
    0.333333
    """
    a, b = np.asarray(low, dtype=np.float64), np.asarray(high, dtype=np.float64)
    y = np.asarray(outcomes, dtype=np.float64)
    if not len(y) or not len(a) == len(b) == len(y):
        raise ValueError(f"low, high, outcomes have lengths {len(a)}, {len(b)}, {len(y)}")
    if not ((a >= 0.0) & (a <= b) & (b <= 1.0)).all():
        raise ValueError("low and high must satisfy 0 <= low <= high <= 1")
    return float(np.mean(((a + b) / 2.0 - y) ** 2 + (b - a) ** 2 / 12.0))


def log_score(probabilities: FloatArray, outcomes: BoolArray) -> float:
    """Return the mean negative natural logarithm of the probability given to what happened.

    Parameters
    ----------
    probabilities, outcomes
        As in ``brier_score``.

    Returns
    -------
    float
        0 best; infinite where something given no probability happened.

    Raises
    ------
    ValueError
        As in ``brier_score``.

    References
    ----------
    .. [1] I. J. Good (1952). Rational decisions. J. Roy. Statist. Soc. B 14(1), 107-114.

    Examples
    --------
    >>> log_score(np.array([1.0]), np.array([True]))
    0.0
    """
    p, y = _checked(probabilities, outcomes)
    given = np.where(y, p, 1.0 - p)
    with np.errstate(divide="ignore"):
        return float(np.mean(-np.log(given))) + 0.0


def brier_skill(score: float, reference: float) -> float | None:
    """Return how much of a reference's Brier score is saved.

    Parameters
    ----------
    score, reference : float
        Brier scores on the same events, not negative.

    Returns
    -------
    float or None
        ``1 - score / reference``: 1 best, 0 as good as the reference, negative if worse;
        None where the reference is perfect.

    Raises
    ------
    ValueError
        If a score is negative.

    References
    ----------
    .. [1] A. H. Murphy (1973). Hedging and skill scores for probability forecasts. Journal
       of Applied Meteorology 12, 215-223.

    Examples
    --------
    >>> brier_skill(0.1, 0.25)
    0.6
    """
    if score < 0 or reference < 0:
        raise ValueError(f"score={score!r}, reference={reference!r} must not be negative")
    return None if reference == 0 else 1.0 - score / reference


def spiegelhalter_z(probabilities: FloatArray, outcomes: BoolArray) -> ZTest | None:
    r"""Return Spiegelhalter's test of calibration.

    Parameters
    ----------
    probabilities, outcomes
        As in ``brier_score``.

    Returns
    -------
    ZTest or None
        None where the statistic has no variance (all probabilities 0, 1/2 or 1).

    Raises
    ------
    ValueError
        As in ``brier_score``.

    Notes
    -----
    .. math:: z = \frac{\sum (y - p)(1 - 2p)}{\sqrt{\sum (1 - 2p)^2 p (1 - p)}}

    Standard normal for calibrated, independent forecasts; positive where they are too sure.

    References
    ----------
    .. [1] D. J. Spiegelhalter (1986). Probabilistic prediction in patient management and
       clinical trials. Statistics in Medicine 5(5), 421-433.

    Examples
    --------
    >>> round(spiegelhalter_z(np.array([0.9, 0.9]), np.array([False, False])).z, 3)
    4.243
    """
    p, y = _checked(probabilities, outcomes)
    tilt = 1.0 - 2.0 * p
    variance = float(np.sum(tilt**2 * p * (1.0 - p)))
    if variance == 0.0:
        return None
    z = float(np.sum((y - p) * tilt) / np.sqrt(variance))
    return ZTest(z, float(2.0 * special.ndtr(-abs(z))))


def _checked(probabilities: FloatArray, outcomes: BoolArray) -> tuple[FloatArray, BoolArray]:
    p, y = np.asarray(probabilities, dtype=np.float64), np.asarray(outcomes, dtype=bool)
    if not len(p) or len(p) != len(y):
        raise ValueError(f"probabilities, outcomes have lengths {len(p)}, {len(y)}")
    if not ((p >= 0.0) & (p <= 1.0)).all():
        raise ValueError("probabilities must lie in [0, 1]")
    return p, y
