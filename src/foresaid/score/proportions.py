"""Hit rates: intervals for a proportion and the exact binomial test."""

from __future__ import annotations

import math
from dataclasses import dataclass

from scipy import special

from foresaid.score.tails import Tails


@dataclass(frozen=True, slots=True)
class Interval:
    """Bounds on the probability scale (0 to 1) with their nominal two-sided coverage.

    Attributes
    ----------
    low, high : float
        Fractions, ``0 <= low <= high <= 1``.
    level : float
        The coverage asked for, such as 0.95.
    """

    low: float
    high: float
    level: float


def wilson_interval(hits: int, trials: int, *, level: float = 0.95) -> Interval:
    r"""Return the Wilson score interval for a hit rate.

    Parameters
    ----------
    hits : int
        Calls that came right, ``0 <= hits <= trials``.
    trials : int
        Settled calls, at least 1; open and void calls are no trials.
    level : float
        Nominal two-sided coverage, strictly between 0 and 1.

    Returns
    -------
    Interval
        Bounds as fractions.

    Raises
    ------
    ValueError
        If ``trials < 1``, ``hits`` is outside ``[0, trials]``, either is not whole, or
        ``level`` is outside ``(0, 1)``.

    Notes
    -----
    The bounds are the roots in :math:`p` of :math:`(\hat p - p)^2 = z^2 p (1 - p) / n`.
    Without hits the lower bound is 0, without misses the upper one is 1. Assumes independent
    calls. No continuity correction.

    References
    ----------
    .. [1] E. B. Wilson (1927). Probable inference, the law of succession, and statistical
       inference. J. Amer. Statist. Assoc. 22(158), 209-212.
       doi:10.1080/01621459.1927.10502953

    Examples
    --------
    >>> found = wilson_interval(7, 10)
    >>> round(found.low, 4), round(found.high, 4)
    (0.3968, 0.8922)
    """
    _check_counts(hits, trials)
    _check_level(level)
    z = -float(special.ndtri((1.0 - level) / 2.0))
    low = _wilson_low(hits, trials, z)
    return Interval(low, 1.0 - _wilson_low(trials - hits, trials, z), level)


def clopper_pearson_interval(hits: int, trials: int, *, level: float = 0.95) -> Interval:
    r"""Return the exact (Clopper-Pearson) interval for a hit rate.

    Parameters
    ----------
    hits : int
        Calls that came right, ``0 <= hits <= trials``.
    trials : int
        Settled calls, at least 1; open and void calls are no trials.
    level : float
        Two-sided coverage, strictly between 0 and 1, reached or exceeded at every true rate.

    Returns
    -------
    Interval
        Bounds as fractions.

    Raises
    ------
    ValueError
        If ``trials < 1``, ``hits`` is outside ``[0, trials]``, either is not whole, or
        ``level`` is outside ``(0, 1)``.

    Notes
    -----
    At the lower bound :math:`P(X \ge hits)`, at the upper bound :math:`P(X \le hits)` is
    :math:`(1 - level) / 2`: both are quantiles of a beta distribution. Without hits the lower
    bound is 0, without misses the upper one is 1. Assumes independent calls.

    References
    ----------
    .. [1] C. J. Clopper, E. S. Pearson (1934). The use of confidence or fiducial limits
       illustrated in the case of the binomial. Biometrika 26(4), 404-413.
       doi:10.1093/biomet/26.4.404

    Examples
    --------
    >>> found = clopper_pearson_interval(4, 20, level=0.90)
    >>> round(found.low, 5), round(found.high, 5)
    (0.07135, 0.40103)
    """
    _check_counts(hits, trials)
    _check_level(level)
    misses, tail = trials - hits, (1.0 - level) / 2.0
    low = _beta_quantile(hits, misses + 1, tail) if hits else 0.0
    high = 1.0 - _beta_quantile(misses, hits + 1, tail) if misses else 1.0
    return Interval(low, high, level)


def jeffreys_interval(hits: int, trials: int, *, level: float = 0.95) -> Interval:
    r"""Return the equal-tailed interval for a hit rate under the Jeffreys prior.

    Parameters
    ----------
    hits : int
        Calls that came right, ``0 <= hits <= trials``.
    trials : int
        Settled calls, at least 1; open and void calls are no trials.
    level : float
        Nominal two-sided coverage, strictly between 0 and 1.

    Returns
    -------
    Interval
        Bounds as fractions.

    Raises
    ------
    ValueError
        If ``trials < 1``, ``hits`` is outside ``[0, trials]``, either is not whole, or
        ``level`` is outside ``(0, 1)``.

    Notes
    -----
    The quantiles at :math:`(1 \mp level) / 2` of Beta(hits + 1/2, misses + 1/2). Without hits
    the lower bound is moved to 0, without misses the upper one to 1, as the source does;
    statsmodels leaves them at the quantile. Assumes independent calls.

    References
    ----------
    .. [1] L. D. Brown, T. T. Cai, A. DasGupta (2001). Interval estimation for a binomial
       proportion. Statistical Science 16(2), 101-133. doi:10.1214/ss/1009213286

    Examples
    --------
    >>> found = jeffreys_interval(7, 10)
    >>> round(found.low, 4), round(found.high, 4)
    (0.3942, 0.9073)
    >>> jeffreys_interval(0, 10).low
    0.0
    """
    _check_counts(hits, trials)
    _check_level(level)
    misses, tail = trials - hits, (1.0 - level) / 2.0
    low = _beta_quantile(hits + 0.5, misses + 0.5, tail) if hits else 0.0
    high = 1.0 - _beta_quantile(misses + 0.5, hits + 0.5, tail) if misses else 1.0
    return Interval(low, high, level)


def binomial_tails(hits: int, trials: int, *, chance: float = 0.5) -> Tails:
    r"""Return both exact binomial tails of a count of hits.

    Parameters
    ----------
    hits : int
        Calls that came right, ``0 <= hits <= trials``.
    trials : int
        Settled calls, at least 1; open and void calls are no trials.
    chance : float
        Chance of each call, from 0 to 1.

    Returns
    -------
    Tails
        :math:`P(X \ge hits)` and :math:`P(X \le hits)`, each one-sided.

    Raises
    ------
    ValueError
        If ``trials < 1``, ``hits`` is outside ``[0, trials]``, either is not whole, or
        ``chance`` is outside ``[0, 1]``.

    Notes
    -----
    The upper tail is the regularised incomplete beta function
    :math:`I_{chance}(hits, trials - hits + 1)`, the lower one
    :math:`1 - I_{chance}(hits + 1, trials - hits)`, evaluated without the subtraction. Both
    hold about twelve digits far into the tails. Assumes independent calls.

    References
    ----------
    .. [1] M. Abramowitz, I. A. Stegun (1964). Handbook of Mathematical Functions, 26.5.24.

    Examples
    --------
    >>> tails = binomial_tails(8, 10)
    >>> round(tails.upper, 6), round(tails.lower, 6)
    (0.054688, 0.989258)
    """
    _check_counts(hits, trials)
    if not 0.0 <= chance <= 1.0:
        raise ValueError(f"chance={chance!r} must lie in [0, 1]")
    misses = trials - hits
    upper = float(special.betainc(hits, misses + 1, chance)) if hits else 1.0
    lower = float(special.betaincc(hits + 1, misses, chance)) if misses else 1.0
    return Tails(upper, lower)


def _wilson_low(hits: int, trials: int, z: float) -> float:
    """Return the lower root, written as a quotient so that small shares lose no digits."""
    if hits == 0:
        return 0.0
    share, spread = hits / trials, z * z / trials
    root = math.sqrt(spread * spread + 4.0 * spread * share * (1.0 - share))
    return 2.0 * share * share / (2.0 * share + spread + root)


def _beta_quantile(a: float, b: float, tail: float) -> float:
    return float(special.betaincinv(a, b, tail))


def _check_counts(hits: int, trials: int) -> None:
    if not (trials >= 1 and trials % 1 == 0):
        raise ValueError(f"trials={trials!r} must be a whole number of at least 1")
    if not (0 <= hits <= trials and hits % 1 == 0):
        raise ValueError(f"hits={hits!r} must be a whole number in [0, trials={trials!r}]")


def _check_level(level: float) -> None:
    if not 0.0 < level < 1.0:
        raise ValueError(f"level={level!r} must lie strictly between 0 and 1")
