"""Hit rates: intervals for a proportion and the exact binomial test."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import special, stats

from foresaid.score.tails import Tails


@dataclass(frozen=True, slots=True)
class Interval:
    """Bounds on the probability scale (0 to 1) with their nominal two-sided coverage."""

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
        If ``trials < 1``, ``hits`` is outside ``[0, trials]`` or ``level`` outside ``(0, 1)``.

    Notes
    -----
    The bounds are the roots in :math:`p` of :math:`(\hat p - p)^2 = z^2 p (1 - p) / n`.
    Assumes independent calls. No continuity correction.

    References
    ----------
    .. [1] E. B. Wilson (1927). Probable inference, the law of succession, and statistical
       inference. J. Amer. Statist. Assoc. 22(158), 209-212.

    Examples
    --------
    >>> found = wilson_interval(7, 10)
    >>> round(found.low, 4), round(found.high, 4)
    (0.3968, 0.8922)
    """
    _check(hits, trials, level)
    z = float(special.ndtri(0.5 + level / 2.0))
    share, spread = hits / trials, z * z / trials
    centre = (share + spread / 2.0) / (1.0 + spread)
    half = np.sqrt(share * (1.0 - share) * spread + spread * spread / 4.0) / (1.0 + spread)
    low = 0.0 if hits == 0 else max(0.0, float(centre - half))
    high = 1.0 if hits == trials else min(1.0, float(centre + half))
    return Interval(low, high, level)


def clopper_pearson_interval(hits: int, trials: int, *, level: float = 0.95) -> Interval:
    """Return the exact (Clopper-Pearson) interval for a hit rate.

    Parameters
    ----------
    hits, trials, level
        As in ``wilson_interval``.

    Returns
    -------
    Interval
        Bounds as fractions; the coverage is at least ``level`` for every true rate.

    Raises
    ------
    ValueError
        As in ``wilson_interval``.

    Notes
    -----
    Each bound is the rate at which the observed count is just at one tail of
    ``(1 - level) / 2``: a quantile of a beta distribution.

    References
    ----------
    .. [1] C. J. Clopper, E. S. Pearson (1934). The use of confidence or fiducial limits
       illustrated in the case of the binomial. Biometrika 26(4), 404-413.

    Examples
    --------
    >>> found = clopper_pearson_interval(4, 20, level=0.90)
    >>> round(found.low, 6), round(found.high, 6)
    (0.071354, 0.401028)
    """
    _check(hits, trials, level)
    tail = (1.0 - level) / 2.0
    low = 0.0 if hits == 0 else float(special.betaincinv(hits, trials - hits + 1, tail))
    high = 1.0
    if hits < trials:
        high = float(special.betaincinv(hits + 1, trials - hits, 1.0 - tail))
    return Interval(low, high, level)


def jeffreys_interval(hits: int, trials: int, *, level: float = 0.95) -> Interval:
    """Return the equal-tailed interval under the Jeffreys prior.

    Parameters
    ----------
    hits, trials, level
        As in ``wilson_interval``.

    Returns
    -------
    Interval
        Bounds as fractions; 0 where there is no hit, 1 where there is no miss.

    Raises
    ------
    ValueError
        As in ``wilson_interval``.

    Notes
    -----
    Quantiles of Beta(hits + 1/2, misses + 1/2), the bound at an empty side moved to its end.

    References
    ----------
    .. [1] L. D. Brown, T. T. Cai, A. DasGupta (2001). Interval estimation for a binomial
       proportion. Statistical Science 16(2), 101-133.

    Examples
    --------
    >>> jeffreys_interval(0, 10).low
    0.0
    """
    _check(hits, trials, level)
    tail = (1.0 - level) / 2.0
    a, b = hits + 0.5, trials - hits + 0.5
    low = 0.0 if hits == 0 else float(special.betaincinv(a, b, tail))
    high = 1.0 if hits == trials else float(special.betaincinv(a, b, 1.0 - tail))
    return Interval(low, high, level)


def binomial_tails(hits: int, trials: int, *, chance: float = 0.5) -> Tails:
    """Return both exact binomial tails of a count of hits.

    Parameters
    ----------
    hits, trials : int
        As in ``wilson_interval``.
    chance : float
        Chance of each call, from 0 to 1.

    Returns
    -------
    Tails
        One-sided; both include the observed count.

    Raises
    ------
    ValueError
        If a count is impossible or ``chance`` is outside ``[0, 1]``.

    References
    ----------
    .. [1] The binomial distribution; scipy.stats.binom evaluates it through the incomplete
       beta function.

    Examples
    --------
    >>> binomial_tails(10, 10).upper == 0.5**10
    True
    """
    _check(hits, trials, 0.5)
    if not 0.0 <= chance <= 1.0:
        raise ValueError(f"chance={chance!r} must lie in [0, 1]")
    upper = float(stats.binom.sf(hits - 1, trials, chance))
    return Tails(upper, float(stats.binom.cdf(hits, trials, chance)))


def _check(hits: int, trials: int, level: float) -> None:
    if trials < 1:
        raise ValueError(f"trials={trials!r} must be at least 1")
    if not 0 <= hits <= trials:
        raise ValueError(f"hits={hits!r} must lie in [0, trials={trials}]")
    if not 0.0 < level < 1.0:
        raise ValueError(f"level={level!r} must lie strictly between 0 and 1")
