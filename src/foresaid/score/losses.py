"""Losses of forecasts of a number, one for each forecast; smaller is better."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np
from scipy import special

if TYPE_CHECKING:
    from foresaid.model.bars import BoolArray, FloatArray, IntArray

_SAME_TOTAL = 1e-6  # how far from 1 probabilities may add up


def pinball_loss(levels: FloatArray, quantiles: FloatArray, outcomes: FloatArray) -> FloatArray:
    r"""Return the pinball loss of stated quantiles, the mean over the levels of a forecast.

    Parameters
    ----------
    levels : ndarray of float, shape (k,) or (n, k)
        Probability below each quantile, strictly between 0 and 1, in any order; of no account
        where a forecast has no quantile.
    quantiles : ndarray of float, shape (n, k)
        Stated quantiles in any order, NaN where a forecast has fewer than k. At least one to a
        forecast; n may be 0.
    outcomes : ndarray of float, shape (n,)
        What came, finite.

    Returns
    -------
    ndarray of float, shape (n,)
        In the unit of the outcome; 0 best.

    Raises
    ------
    ValueError
        If shapes do not fit, an outcome is not finite, a quantile is infinite, a forecast has
        no quantile, or the level of a quantile is missing or outside ``(0, 1)``.

    Notes
    -----
    The mean over the quantiles of a forecast, not their sum, of

    .. math:: (1\{y < q\} - \alpha)(q - y)

    without the factor 2 that makes it approach the continuous ranked probability score: at the
    median it is half the absolute error. Quantiles that cross are not put in order. Losses of
    forecasts with different levels are not comparable.

    References
    ----------
    .. [1] R. Koenker, G. Bassett (1978). Regression quantiles. Econometrica 46(1), 33-50.
       doi:10.2307/1913643

    Examples
    --------
    >>> found = pinball_loss(np.array([0.5, 0.9]), np.array([[10.0, 14.0]]), np.array([12.0]))
    >>> round(float(found[0]), 3)
    0.6
    """
    q, is_used = _ragged("quantiles", quantiles)
    y = _finite("outcomes", outcomes, length=len(q))
    alpha = _levels(levels, is_used)
    loss = ((y[:, None] < q) - alpha) * (q - y[:, None])
    mean: FloatArray = _row_sums(loss, is_used) / is_used.sum(axis=1)
    return mean


def interval_score(
    low: FloatArray, high: FloatArray, outcomes: FloatArray, coverage: FloatArray
) -> FloatArray:
    r"""Return the interval score of central intervals.

    Parameters
    ----------
    low, high : ndarray of float, shape (n,)
        Stated bounds in the unit of the outcome, finite, ``low <= high``; n may be 0.
    outcomes : ndarray of float, shape (n,)
        What came, finite.
    coverage : ndarray of float, shape (n,)
        Stated probability of the interval, from 0 to less than 1.

    Returns
    -------
    ndarray of float, shape (n,)
        In the unit of the outcome; 0 best.

    Raises
    ------
    ValueError
        If an array is not flat, lengths differ, a value is not finite, an interval is upside
        down, or a coverage is outside ``[0, 1)``.

    Notes
    -----
    With :math:`\alpha = 1 - coverage`

    .. math:: (b - a) + \frac{2}{\alpha} (a - y)_+ + \frac{2}{\alpha} (y - b)_+

    This is :math:`4 / \alpha` times the pinball loss of the two bounds at the levels
    :math:`\alpha / 2` and :math:`1 - \alpha / 2`. Different coverages are not comparable.

    References
    ----------
    .. [1] T. Gneiting, A. E. Raftery (2007). Strictly proper scoring rules, prediction, and
       estimation. J. Amer. Statist. Assoc. 102(477), 359-378, section 6.2.
       doi:10.1198/016214506000001437

    Examples
    --------
    >>> bounds = np.array([90.0]), np.array([110.0])
    >>> interval_score(*bounds, np.array([112.0]), np.array([0.5])).tolist()
    [28.0]
    """
    a, b = _bounds(low, high)
    y = _finite("outcomes", outcomes, length=len(a))
    share = _finite("coverage", coverage, length=len(a))
    _refuse("coverage", share, (share < 0.0) | (share >= 1.0), "lie in [0, 1)")
    outside = np.maximum(a - y, 0.0) + np.maximum(y - b, 0.0)
    score: FloatArray = (b - a) + 2.0 / (1.0 - share) * outside
    return score


def ranked_probability_score(
    probabilities: FloatArray, category: IntArray, *, scaled: bool = True
) -> FloatArray:
    r"""Return the ranked probability score of probabilities for ordered categories.

    Parameters
    ----------
    probabilities : ndarray of float, shape (n, K)
        Stated probability of each category, lowest first, from 0 to 1, to a sum of 1 within
        1e-6; NaN behind the last category of a forecast that has fewer. n may be 0.
    category : ndarray of int, shape (n,)
        Which category came, counted from 0.
    scaled : bool
        Whether the sum is divided by the number of categories of the forecast less 1.

    Returns
    -------
    ndarray of float, shape (n,)
        0 best. The worst is 1 if scaled, otherwise the number of categories less 1. A forecast
        with one category scores 0.

    Raises
    ------
    ValueError
        If shapes do not fit, a probability is outside ``[0, 1]`` or stands behind a NaN, the
        probabilities of a forecast do not add up to 1, or a category is not among its own.

    Notes
    -----
    .. math:: \sum_{j=1}^{K-1} \Big(\sum_{i \le j} p_i - 1\{c \le j\}\Big)^2

    The last category adds nothing, so its term is left out. The sum, the sum over
    :math:`K - 1` and the sum over :math:`K` are all found in print; the last is not offered.
    Probability close to the category that came costs less than probability far from it. For
    two categories it is the Brier score in its half form.

    References
    ----------
    .. [1] E. S. Epstein (1969). A scoring system for probability forecasts of ranked
       categories. Journal of Applied Meteorology 8(6), 985-987.
    .. [2] A. H. Murphy (1971). A note on the ranked probability score. Journal of Applied
       Meteorology 10(1), 155-156.

    Examples
    --------
    >>> found = ranked_probability_score(np.array([[0.2, 0.5, 0.3]]), np.array([0]))
    >>> round(float(found[0]), 3)
    0.365
    """
    p, is_used = _shares(probabilities)
    parts = is_used.sum(axis=1)
    c = _categories(category, parts)
    column = np.arange(p.shape[1])
    reached = np.minimum(np.cumsum(np.where(is_used, p, 0.0), axis=1), 1.0)
    apart = (reached - (column >= c[:, None])) ** 2
    total = _row_sums(apart, column < parts[:, None] - 1)
    return total / np.maximum(parts - 1, 1) if scaled else total


def crps_normal(mean: FloatArray, deviation: FloatArray, outcomes: FloatArray) -> FloatArray:
    r"""Return the continuous ranked probability score of normal distributions.

    Parameters
    ----------
    mean, deviation : ndarray of float, shape (n,)
        Stated mean and standard deviation in the unit of the outcome, finite, deviation not
        negative; n may be 0.
    outcomes : ndarray of float, shape (n,)
        What came, finite.

    Returns
    -------
    ndarray of float, shape (n,)
        In the unit of the outcome; 0 best. The absolute error where the deviation is 0.

    Raises
    ------
    ValueError
        If an array is not flat, lengths differ, a value is not finite, or a deviation is
        negative.

    Notes
    -----
    With :math:`z = (y - \mu) / \sigma`

    .. math:: (y - \mu)(2 \Phi(z) - 1) + 2 \sigma \varphi(z) - \sigma / \sqrt{\pi}

    which is the integral of :math:`(F(x) - 1\{y \le x\})^2` over :math:`x`.

    References
    ----------
    .. [1] T. Gneiting, A. E. Raftery, A. H. Westveld, T. Goldman (2005). Calibrated
       probabilistic forecasting using ensemble model output statistics and minimum CRPS
       estimation. Monthly Weather Review 133(5), 1098-1118. doi:10.1175/MWR2904.1

    Examples
    --------
    >>> round(float(crps_normal(np.array([0.0]), np.array([1.0]), np.array([0.0]))[0]), 6)
    0.233695
    """
    mu = _finite("mean", mean)
    sigma = _finite("deviation", deviation, length=len(mu))
    _refuse("deviation", sigma, sigma < 0.0, "not be negative")
    error = _finite("outcomes", outcomes, length=len(mu)) - mu
    with np.errstate(divide="ignore", over="ignore"):
        z = np.divide(error, sigma, out=np.zeros_like(error), where=error != 0.0)
        height = np.exp(-(z**2) / 2.0) / math.sqrt(2.0 * math.pi)
    spread = sigma * (2.0 * height - 1.0 / math.sqrt(math.pi))
    score: FloatArray = error * special.erf(z / math.sqrt(2.0)) + spread
    return score


def crps_sample(samples: FloatArray, outcomes: FloatArray) -> FloatArray:
    r"""Return the continuous ranked probability score of samples, each value as likely.

    Parameters
    ----------
    samples : ndarray of float, shape (n, k)
        Values of each forecast in any order, NaN where it has fewer than k. At least one to a
        forecast; n may be 0.
    outcomes : ndarray of float, shape (n,)
        What came, finite.

    Returns
    -------
    ndarray of float, shape (n,)
        In the unit of the outcome; 0 best. The absolute error of a forecast with one value.

    Raises
    ------
    ValueError
        If shapes do not fit, an outcome is not finite, a value is infinite, or a forecast has
        no value.

    Notes
    -----
    With :math:`m` values of a forecast

    .. math:: \frac{1}{m} \sum_i |x_i - y| - \frac{1}{2 m^2} \sum_{i, j} |x_i - x_j|

    the score of the step distribution of the values. It is larger than that of the distribution
    they were drawn from; no correction is made for it. The double sum is taken over the sorted
    values: :math:`2 \sum_i (2i - m - 1) x_{(i)}`.

    References
    ----------
    .. [1] T. Gneiting, A. E. Raftery (2007). Strictly proper scoring rules, prediction, and
       estimation. J. Amer. Statist. Assoc. 102(477), 359-378, equation 21.
       doi:10.1198/016214506000001437

    Examples
    --------
    >>> crps_sample(np.array([[1.0, 3.0]]), np.array([4.0])).tolist()
    [1.5]
    """
    x, _ = _ragged("samples", samples)
    y = _finite("outcomes", outcomes, length=len(x))
    errors = np.sort(x - y[:, None], axis=1)  # puts NaN last
    is_used = ~np.isnan(errors)
    m = is_used.sum(axis=1)
    weights = 2.0 * np.arange(1, x.shape[1] + 1) - m[:, None] - 1.0
    spread = _row_sums(weights * errors, is_used) / m**2
    score: FloatArray = _row_sums(np.abs(errors), is_used) / m - spread
    return np.maximum(score, 0.0)


def coverage(low: FloatArray, high: FloatArray, outcomes: FloatArray) -> float | None:
    """Return the share of outcomes inside their intervals, bounds included.

    Parameters
    ----------
    low, high : ndarray of float, shape (n,)
        Stated bounds in the unit of the outcome, finite, ``low <= high``; n may be 0.
    outcomes : ndarray of float, shape (n,)
        What came, finite.

    Returns
    -------
    float or None
        From 0 to 1, to be held against the stated coverage; None without forecasts.

    Raises
    ------
    ValueError
        If an array is not flat, lengths differ, a value is not finite, or an interval is
        upside down.

    Notes
    -----
    No loss: intervals without end always cover.

    References
    ----------
    .. [1] P. F. Christoffersen (1998). Evaluating interval forecasts. International Economic
       Review 39(4), 841-862. doi:10.2307/2527341

    Examples
    --------
    >>> coverage(np.array([1.0, 1.0]), np.array([2.0, 2.0]), np.array([2.0, 2.5]))
    0.5
    """
    a, b = _bounds(low, high)
    y = _finite("outcomes", outcomes, length=len(a))
    return float(np.mean((a <= y) & (y <= b))) if len(y) else None


def _row_sums(values: FloatArray, is_used: BoolArray) -> FloatArray:
    sums: FloatArray = np.where(is_used, values, 0.0).sum(axis=1)
    return sums


def _finite(name: str, values: FloatArray, *, length: int | None = None) -> FloatArray:
    array = np.asarray(values, dtype=np.float64)
    if array.ndim != 1:
        raise ValueError(f"{name} has shape {array.shape}, must be flat")
    if length is not None and len(array) != length:
        raise ValueError(f"{name} has length {len(array)}, must have {length}")
    _refuse(name, array, ~np.isfinite(array), "be finite")
    return array


def _bounds(low: FloatArray, high: FloatArray) -> tuple[FloatArray, FloatArray]:
    a = _finite("low", low)
    b = _finite("high", high, length=len(a))
    _refuse("low", a, a > b, "not lie above its high")
    return a, b


def _ragged(name: str, values: FloatArray) -> tuple[FloatArray, BoolArray]:
    """Return rows with NaN where a forecast has no value, and where it has one."""
    array = np.asarray(values, dtype=np.float64)
    if array.ndim != 2:
        raise ValueError(f"{name} has shape {array.shape}, must have rows and columns")
    _refuse(name, array, np.isinf(array), "be finite or NaN")
    is_used = ~np.isnan(array)
    if not is_used.any(axis=1).all():
        raise ValueError(f"{name} holds a row of NaN alone")
    return array, is_used


def _levels(levels: FloatArray, is_used: BoolArray) -> FloatArray:
    alpha = np.asarray(levels, dtype=np.float64)
    if alpha.shape not in (is_used.shape, is_used.shape[1:]):
        raise ValueError(f"levels has shape {alpha.shape}, quantiles {is_used.shape}")
    alpha = np.broadcast_to(alpha, is_used.shape)
    is_level = (alpha > 0.0) & (alpha < 1.0)
    _refuse("levels", alpha, is_used & ~is_level, "lie strictly between 0 and 1")
    return alpha


def _shares(probabilities: FloatArray) -> tuple[FloatArray, BoolArray]:
    p, is_used = _ragged("probabilities", probabilities)
    is_late = is_used[:, 1:] & ~is_used[:, :-1]
    _refuse("probabilities", p[:, 1:], is_late, "not stand behind a NaN")
    _refuse("probabilities", p, (p < 0.0) | (p > 1.0), "lie in [0, 1]")
    totals = _row_sums(p, is_used)
    is_off = np.abs(totals - 1.0) > _SAME_TOTAL
    _refuse("sum of probabilities", totals, is_off, "be 1")
    return p, is_used


def _categories(category: IntArray, parts: IntArray) -> IntArray:
    c = np.asarray(category)
    if c.shape != parts.shape:
        raise ValueError(f"category has shape {c.shape}, must have {parts.shape}")
    if c.size and c.dtype.kind not in "iu":
        raise ValueError(f"category has dtype {c.dtype}, must hold whole numbers")
    _refuse("category", c, (c < 0) | (c >= parts), "be one of its forecast, counted from 0")
    return c.astype(np.int64)


def _refuse(name: str, values: FloatArray | IntArray, is_fault: BoolArray, rule: str) -> None:
    if is_fault.any():
        raise ValueError(f"{name} holds {values[is_fault][0].item()!r}, must {rule}")
