"""Two forecasters on the same calls: whether one is more often, or more nearly, right."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy import special

from foresaid.score.proportions import binomial_tails

if TYPE_CHECKING:
    from foresaid.model.bars import BoolArray, FloatArray

FEWEST_PAIRS = 8  # fewer losses give no variance worth the name


@dataclass(frozen=True, slots=True)
class PairedTest:
    """Calls on which only one of two forecasters was right.

    Attributes
    ----------
    only_first, only_second : int
        Calls on which the first, or the second, alone was right.
    p_first, p_second : float
        One-sided: chance that the first, or the second, is alone as often or more.
    p_two_sided : float
        Twice the smaller one, at most 1.
    """

    only_first: int
    only_second: int
    p_first: float
    p_second: float
    p_two_sided: float


@dataclass(frozen=True, slots=True)
class LossTest:
    """Difference of mean losses with its test.

    Attributes
    ----------
    difference : float
        Mean loss of the first less that of the second: negative where the first is better.
    t : float
        The statistic, corrected for small samples.
    p_two_sided : float
        From Student's distribution with n - 1 degrees of freedom.
    n, horizon : int
        Pairs, and how many of them in a row may depend on each other.
    """

    difference: float
    t: float
    p_two_sided: float
    n: int
    horizon: int


def paired_test(first: BoolArray, second: BoolArray) -> PairedTest:
    """Return the exact test of McNemar for two forecasters on the same calls.

    Parameters
    ----------
    first, second : ndarray of bool, shape (n,)
        Whether each was right; n may be 0.

    Returns
    -------
    PairedTest
        Without a call on which they differ, all p-values are 1.

    Raises
    ------
    ValueError
        If the arrays are not flat, differ in length, or hold anything but true and false (or
        1 and 0).

    Notes
    -----
    Given that just one was right, either is as likely without a difference: a binomial test
    with chance 1/2. Calls are taken as independent.

    References
    ----------
    .. [1] Q. McNemar (1947). Note on the sampling error of the difference between correlated
       proportions or percentages. Psychometrika 12(2), 153-157.

    Examples
    --------
    >>> paired_test(np.array([1, 1, 1, 0], bool), np.array([0, 0, 0, 0], bool)).p_two_sided
    0.25
    """
    a, b = _flags("first", first), _flags("second", second)
    _same_length(first=a, second=b)
    only_first, only_second = int((a & ~b).sum()), int((b & ~a).sum())
    differ = only_first + only_second
    if not differ:
        return PairedTest(0, 0, 1.0, 1.0, 1.0)
    tails = binomial_tails(only_first, differ, chance=0.5)
    both = min(1.0, 2.0 * min(tails.upper, tails.lower))
    return PairedTest(only_first, only_second, tails.upper, tails.lower, both)


def diebold_mariano(
    first: FloatArray, second: FloatArray, *, horizon: int = 1
) -> LossTest | None:
    r"""Return the test of Diebold and Mariano with the small-sample correction.

    Parameters
    ----------
    first, second : ndarray of float, shape (n,)
        Losses of the two in the order of time, finite.
    horizon : int
        Losses less than this far apart in the order may depend on each other, at least 1.

    Returns
    -------
    LossTest or None
        None with fewer than 8 pairs, with a horizon of n or more, or where the estimated
        variance is not positive or mere rounding; no other kernel is tried then.

    Raises
    ------
    ValueError
        If the arrays are not flat, differ in length or hold anything but numbers, or the
        horizon is below 1.

    Notes
    -----
    With differences d, :math:`V = (\gamma_0 + 2 \sum_{k<h} \gamma_k)/n`, autocovariances with
    divisor n and the rectangular kernel, :math:`DM = \bar d / \sqrt V` times
    :math:`\sqrt{(n + 1 - 2h + h(h-1)/n)/n}`. For :math:`h = 1` this is Student's paired test.
    Rounding means :math:`nV` of at most 1e-15 of the mean square difference, as where all
    differences are the same.

    References
    ----------
    .. [1] F. X. Diebold, R. S. Mariano (1995). Comparing predictive accuracy. Journal of
       Business & Economic Statistics 13(3), 253-263.
    .. [2] D. Harvey, S. Leybourne, P. Newbold (1997). Testing the equality of prediction mean
       squared errors. International Journal of Forecasting 13(2), 281-291.

    Examples
    --------
    >>> a = np.array([1.0, 0.0, 1.0, 1.0, 0.0, 1.0, 1.0, 0.0])
    >>> round(diebold_mariano(a, np.zeros(8)).t, 4)
    3.4157
    """
    a, b = _flat("first", first), _flat("second", second)
    _same_length(first=a, second=b)
    if not (horizon >= 1 and horizon % 1 == 0):
        raise ValueError(f"horizon={horizon!r} must be a whole number of at least 1")
    for name, values in (("first", a), ("second", b)):
        if not np.isfinite(values).all():
            raise ValueError(f"{name} holds {float(values[~np.isfinite(values)][0])!r}")
    n, h = len(a), int(horizon)
    if n < FEWEST_PAIRS or h >= n:
        return None
    difference = a - b
    mean = float(difference.mean())
    rest = difference - mean
    covariances = [float(rest[k:] @ rest[: n - k]) / n for k in range(h)]
    variance = (covariances[0] + 2.0 * sum(covariances[1:])) / n
    scale = float((difference**2).mean())
    if variance <= 1e-15 * scale / n:
        return None
    correction = (n + 1 - 2 * h + h * (h - 1) / n) / n  # (n - h)(n - h + 1) / n^2, so above 0
    t = mean / math.sqrt(variance) * math.sqrt(correction)
    p = 2.0 * float(special.stdtr(n - 1, -abs(t)))
    return LossTest(mean, t, p, n, h)


def _flags(name: str, values: BoolArray) -> BoolArray:
    array = np.asarray(values)
    wrong = ~np.isin(array, (0, 1))
    if wrong.any():
        raise ValueError(f"{name} holds {array[wrong][0].item()!r}, must be true or false")
    return _flat(name, array).astype(np.bool_)


def _flat(name: str, values: FloatArray | BoolArray) -> FloatArray:
    array: FloatArray = np.asarray(values).astype(np.float64)
    if array.ndim != 1:
        raise ValueError(f"{name} has shape {array.shape}, must be flat")
    return array


def _same_length(*, first: FloatArray | BoolArray, second: FloatArray | BoolArray) -> None:
    if len(first) != len(second):
        raise ValueError(f"first has length {len(first)}, second {len(second)}")
