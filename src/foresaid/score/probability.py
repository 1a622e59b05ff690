"""Scores of stated probabilities."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy import special

if TYPE_CHECKING:
    from foresaid.model.bars import BoolArray, FloatArray


@dataclass(frozen=True, slots=True)
class ZTest:
    """A statistic that is standard normal under its null, with its two-sided p-value.

    Attributes
    ----------
    z : float
        In standard deviations.
    p_two_sided : float
        Chance of a value at least as far from 0.
    """

    z: float
    p_two_sided: float


def brier_score(probabilities: FloatArray, outcomes: BoolArray) -> float:
    r"""Return the Brier score of probabilities for an event.

    Parameters
    ----------
    probabilities : ndarray of float, shape (n,)
        Stated probability that the event happens, from 0 to 1, no NaN; n at least 1.
    outcomes : ndarray of bool, shape (n,)
        Whether it happened (0 and 1 will do).

    Returns
    -------
    float
        0 best, 1 worst.

    Raises
    ------
    ValueError
        If the arrays are empty, not flat or differ in length, a probability is outside
        ``[0, 1]``, or an outcome is neither 0 nor 1.

    Notes
    -----
    :math:`\frac{1}{n} \sum (p - y)^2`, the half form: only the event counts. The original sums
    over both classes, the event and its absence, which is twice this value.

    References
    ----------
    .. [1] G. W. Brier (1950). Verification of forecasts expressed in terms of probability.
       Monthly Weather Review 78(1), 1-3.

    Examples
    --------
    >>> brier_score(np.array([0.25, 0.75]), np.array([False, True]))
    0.0625
    """
    p, y = _checked("probabilities", probabilities), _outcomes(outcomes)
    _check_lengths(probabilities=p, outcomes=y)
    return float(np.mean((p - y) ** 2))


def brier_score_band(low: FloatArray, high: FloatArray, outcomes: BoolArray) -> float:
    r"""Return the Brier score of bands, averaged over probabilities spread evenly in each.

    Parameters
    ----------
    low, high : ndarray of float, shape (n,)
        Bounds of the stated probability, ``0 <= low <= high <= 1``, no NaN; n at least 1.
    outcomes : ndarray of bool, shape (n,)
        Whether the event happened (0 and 1 will do).

    Returns
    -------
    float
        0 best, 1 worst; the Brier score where the bounds are equal.

    Raises
    ------
    ValueError
        If the arrays are empty, not flat or differ in length, a bound is outside ``[0, 1]``,
        a band is upside down, or an outcome is neither 0 nor 1.

    Notes
    -----
    The mean over calls of

    .. math:: \frac{1}{b - a} \int_a^b (p - y)^2 dp
              = \Big(\frac{a + b}{2} - y\Big)^2 + \frac{(b - a)^2}{12}

    The half form, as in ``brier_score``. A wide band pays for its width even where its middle
    is right.

    References
    ----------
    .. [1] G. W. Brier (1950). Verification of forecasts expressed in terms of probability.
       Monthly Weather Review 78(1), 1-3. The average over a band is elementary.

    Examples
    --------
    >>> round(brier_score_band(np.array([0.0]), np.array([1.0]), np.array([True])), 6)
    0.333333
    """
    a, b, y = _checked("low", low), _checked("high", high), _outcomes(outcomes)
    _check_lengths(low=a, high=b, outcomes=y)
    if (b < a).any():
        row = int(np.argmax(b < a))
        raise ValueError(
            f"high[{row}]={float(b[row])!r} lies below low[{row}]={float(a[row])!r}"
        )
    return float(np.mean(((a + b) / 2.0 - y) ** 2 + (b - a) ** 2 / 12.0))


def log_score(probabilities: FloatArray, outcomes: BoolArray) -> float:
    r"""Return the logarithmic score of probabilities for an event.

    Parameters
    ----------
    probabilities : ndarray of float, shape (n,)
        Stated probability that the event happens, from 0 to 1, no NaN; n at least 1.
    outcomes : ndarray of bool, shape (n,)
        Whether it happened (0 and 1 will do).

    Returns
    -------
    float
        In nats, 0 best; infinite where something given no probability happened.

    Raises
    ------
    ValueError
        If the arrays are empty, not flat or differ in length, a probability is outside
        ``[0, 1]``, or an outcome is neither 0 nor 1.

    Notes
    -----
    :math:`-\frac{1}{n} \sum \ln q`, where :math:`q` is the probability given to what happened:
    :math:`p` for an event, :math:`1 - p` for its absence. Nothing is clipped.

    References
    ----------
    .. [1] I. J. Good (1952). Rational decisions. J. Roy. Statist. Soc. B 14(1), 107-114.
       doi:10.1111/j.2517-6161.1952.tb00104.x

    Examples
    --------
    >>> round(log_score(np.array([0.5, 0.75]), np.array([True, False])), 6)
    1.039721
    >>> log_score(np.array([0.0]), np.array([True]))
    inf
    """
    p, y = _checked("probabilities", probabilities), _outcomes(outcomes)
    _check_lengths(probabilities=p, outcomes=y)
    with np.errstate(divide="ignore"):
        logs = np.where(y == 1.0, np.log(p), np.log1p(-p))
    return abs(float(np.mean(logs)))


def brier_skill(score: float, reference_score: float) -> float | None:
    r"""Return the part of a reference's Brier score that a forecaster saves.

    Parameters
    ----------
    score, reference_score : float
        Brier scores on the same events, not negative, finite, both in the same form.

    Returns
    -------
    float or None
        1 best, 0 as good as the reference, negative if worse; None where the reference is
        perfect and nothing can be saved.

    Raises
    ------
    ValueError
        If a score is negative, NaN or infinite.

    Notes
    -----
    :math:`1 - score / reference\_score`.

    References
    ----------
    .. [1] A. H. Murphy (1973). Hedging and skill scores for probability forecasts. Journal
       of Applied Meteorology 12(1), 215-223.

    Examples
    --------
    >>> brier_skill(0.1, 0.25)
    0.6
    """
    for name, value in (("score", score), ("reference_score", reference_score)):
        if not (value >= 0.0 and math.isfinite(value)):
            raise ValueError(f"{name}={value!r} must be finite and not negative")
    return None if reference_score == 0.0 else 1.0 - score / reference_score


def spiegelhalter_z(probabilities: FloatArray, outcomes: BoolArray) -> ZTest | None:
    r"""Return Spiegelhalter's test of calibration.

    Parameters
    ----------
    probabilities : ndarray of float, shape (n,)
        Stated probability that the event happens, from 0 to 1, no NaN; n at least 1.
    outcomes : ndarray of bool, shape (n,)
        Whether it happened (0 and 1 will do).

    Returns
    -------
    ZTest or None
        None where the statistic has no variance: all probabilities are 0, 1/2 or 1.

    Raises
    ------
    ValueError
        If the arrays are empty, not flat or differ in length, a probability is outside
        ``[0, 1]``, or an outcome is neither 0 nor 1.

    Notes
    -----
    .. math:: z = \frac{\sum (y - p)(1 - 2p)}{\sqrt{\sum (1 - 2p)^2 p (1 - p)}}

    The Brier score less its expectation were the probabilities true, in its own standard
    deviations: positive where forecasts are too sure, negative where they are not sure
    enough. Assumes independent events; the p-value rests on the normal limit.

    References
    ----------
    .. [1] D. J. Spiegelhalter (1986). Probabilistic prediction in patient management and
       clinical trials. Statistics in Medicine 5(5), 421-433. doi:10.1002/sim.4780050506

    Examples
    --------
    >>> found = spiegelhalter_z(np.array([0.9, 0.9]), np.array([False, True]))
    >>> round(found.z, 4), round(found.p_two_sided, 4)
    (1.8856, 0.0593)
    """
    p, y = _checked("probabilities", probabilities), _outcomes(outcomes)
    _check_lengths(probabilities=p, outcomes=y)
    tilt = 1.0 - 2.0 * p
    variance = float(np.sum(tilt**2 * p * (1.0 - p)))
    if variance == 0.0:
        return None
    z = float(np.sum((y - p) * tilt)) / math.sqrt(variance)
    return ZTest(z, 2.0 * float(special.ndtr(-abs(z))))


def _checked(name: str, probabilities: FloatArray) -> FloatArray:
    p = np.asarray(probabilities, dtype=np.float64)
    if p.ndim != 1 or not len(p):
        raise ValueError(f"{name} has shape {p.shape}, must be flat and not empty")
    is_probability = (p >= 0.0) & (p <= 1.0)
    if not is_probability.all():
        raise ValueError(f"{name} holds {float(p[~is_probability][0])!r}, must lie in [0, 1]")
    return p


def _outcomes(outcomes: BoolArray) -> FloatArray:
    y = _checked("outcomes", np.asarray(outcomes, dtype=np.float64))
    between = (y > 0.0) & (y < 1.0)
    if between.any():
        raise ValueError(f"outcomes holds {float(y[between][0])!r}, must be 0 or 1")
    return y


def _check_lengths(**arrays: FloatArray) -> None:
    if len({len(array) for array in arrays.values()}) > 1:
        lengths = ", ".join(f"{name} has {len(array)}" for name, array in arrays.items())
        raise ValueError(f"lengths differ: {lengths}")
