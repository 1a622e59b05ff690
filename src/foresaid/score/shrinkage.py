"""Ranks that know how little some records say: empirical Bayes with unequal records."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from foresaid.model.bars import FloatArray

_STEPS = 200  # halvings of the bracket; far more than a float needs


@dataclass(frozen=True, slots=True)
class Shrunken:
    """Records pulled towards the field's mean; arrays (m,).

    Attributes
    ----------
    mean : float
        Of the field's true values, weighted.
    spread : float
        Standard deviation of the field's true values; 0 where noise explains all of it.
    value, deviation : ndarray of float
        Mean and standard deviation of each record's true value, given its own.
    p_best : ndarray of float
        Chance of being the best of the field.
    rank : ndarray of float
        Expected rank, 1 the best.
    rank_low, rank_high : ndarray of float
        Ends of the central interval of the rank.
    """

    mean: float
    spread: float
    value: FloatArray
    deviation: FloatArray
    p_best: FloatArray
    rank: FloatArray
    rank_low: FloatArray
    rank_high: FloatArray


def shrunken_ranks(
    values: FloatArray,
    errors: FloatArray,
    generator: np.random.Generator,
    *,
    draws: int = 4000,
    coverage: float = 0.9,
) -> Shrunken | None:
    r"""Return shrunken values with rank intervals and the chance of being best.

    Parameters
    ----------
    values : ndarray of float, shape (m,)
        What was measured of each record, such as the excess over chance a call.
    errors : ndarray of float, shape (m,)
        Its standard error, above 0.
    generator : numpy.random.Generator
        For draws from the records' distributions.
    draws : int
        How many, at least 100.
    coverage : float
        Of the rank intervals.

    Returns
    -------
    Shrunken or None
        None for no record. Where the spread is 0 all records are alike: each has the chance
        1/m of being best, the middle rank, and an interval over all ranks.

    Raises
    ------
    ValueError
        If arrays are not flat, differ in length or are not finite, an error is not above 0, or
        an argument is out of its range.

    Notes
    -----
    True values are normal with the field's mean and spread, measured ones normal about them.
    The spread solves :math:`\sum (x_i - \mu)^2 / (s_i^2 + \tau^2) = m - 1` with :math:`\mu`
    the mean weighted by :math:`1/(s_i^2 + \tau^2)`, and is 0 where the sum is smaller at once
    (Paule and Mandel). A record's value is then
    :math:`\mu + (x_i - \mu) \tau^2 / (\tau^2 + s_i^2)`. The uncertainty of mean and spread
    themselves is left out, so intervals are somewhat too narrow in small fields.

    References
    ----------
    .. [1] R. C. Paule, J. Mandel (1982). Consensus values and weighting factors. Journal of
       Research of the National Bureau of Standards 87(5), 377-385.
    .. [2] B. Efron, C. Morris (1975). Data analysis using Stein's estimator and its
       generalizations. Journal of the American Statistical Association 70(350), 311-319.
    .. [3] N. M. Laird, T. A. Louis (1989). Empirical Bayes ranking methods. Journal of
       Educational Statistics 14(1), 29-46.

    Examples
    --------
    >>> rng = np.random.default_rng(1)
    >>> found = shrunken_ranks(np.array([0.3, 0.0, -0.1]), np.array([0.1, 0.1, 0.1]), rng)
    >>> found.value.round(3).tolist(), int(found.p_best.argmax())
    ([0.246, 0.015, -0.062], 0)
    """
    x, s = _checked("values", values), _checked("errors", errors)
    if len(x) != len(s):
        raise ValueError(f"values has length {len(x)}, errors {len(s)}")
    if (s <= 0.0).any():
        raise ValueError(f"errors[{int(np.argmax(s <= 0.0))}] must be above 0")
    if draws < 100:
        raise ValueError(f"draws={draws!r} must be at least 100")
    if not 0.0 < coverage < 1.0:
        raise ValueError(f"coverage={coverage!r} must lie strictly between 0 and 1")
    m = len(x)
    if not m:
        return None
    between = _between(x, s**2)
    mean = _weighted_mean(x, s**2 + between)
    kept = between / (between + s**2)
    value, deviation = mean + kept * (x - mean), np.sqrt(kept) * s
    if between == 0.0:
        same, all_ranks = np.full(m, (m + 1) / 2.0), np.ones(m)
        even = np.full(m, 1.0 / m)
        return Shrunken(mean, 0.0, value, deviation, even, same, all_ranks, all_ranks * m)
    best, ranks = _drawn_ranks(value, deviation, generator, draws)
    ends = np.quantile(
        ranks, [(1 - coverage) / 2, (1 + coverage) / 2], axis=0, method="inverted_cdf"
    )
    middle = ranks.mean(axis=0)
    return Shrunken(
        mean, float(np.sqrt(between)), value, deviation, best, middle, ends[0], ends[1]
    )


def _drawn_ranks(
    value: FloatArray, deviation: FloatArray, generator: np.random.Generator, draws: int
) -> tuple[FloatArray, FloatArray]:
    """Return how often each record is the best, and its rank in each draw, (draws, m)."""
    m = len(value)
    drawn = value + deviation * generator.standard_normal((draws, m))
    ranks = np.empty((draws, m))
    rows = np.arange(draws)[:, None]
    ranks[rows, np.argsort(-drawn, axis=1)] = np.arange(1, m + 1)
    return (ranks == 1).mean(axis=0), ranks


def _between(x: FloatArray, variance: FloatArray) -> float:
    """Return the variance of the true values: the root of a sum that falls as it grows."""

    def excess(between: float) -> float:
        weight = 1.0 / (variance + between)
        mean = _weighted_mean(x, variance + between)
        return float((weight * (x - mean) ** 2).sum()) - (len(x) - 1)

    if len(x) < 2 or excess(0.0) <= 0.0:
        return 0.0
    low, high = 0.0, float(np.ptp(x)) ** 2
    while excess(high) > 0.0:
        high *= 2.0
    for _ in range(_STEPS):
        middle = 0.5 * (low + high)
        if middle in (low, high):
            break
        low, high = (middle, high) if excess(middle) > 0.0 else (low, middle)
    return 0.5 * (low + high)


def _weighted_mean(x: FloatArray, variance: FloatArray) -> float:
    return float((x / variance).sum() / (1.0 / variance).sum())


def _checked(name: str, values: FloatArray) -> FloatArray:
    array = np.asarray(values, dtype=np.float64)
    if array.ndim != 1:
        raise ValueError(f"{name} has shape {array.shape}, must be flat")
    if not np.isfinite(array).all():
        raise ValueError(f"{name} holds {float(array[~np.isfinite(array)][0])!r}")
    return array
