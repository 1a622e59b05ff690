"""The number of hits among calls with chances of their own, exact far into the tails."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from foresaid.score.tails import Tails

if TYPE_CHECKING:
    from foresaid.model.bars import FloatArray

_PLAIN = 64  # below this many calls the plain recursion is as fast
_NEGLIGIBLE = 1e-290


def poisson_binomial_pmf(chances: FloatArray) -> FloatArray:
    """Return the distribution of the number of hits among independent calls.

    Parameters
    ----------
    chances : ndarray of float, shape (n,)
        Chance of each call, from 0 to 1, no NaN; n may be 0.

    Returns
    -------
    ndarray of float, shape (n + 1,)
        Probability of 0, 1, ..., n hits.

    Raises
    ------
    ValueError
        If a chance is NaN or outside ``[0, 1]``, or the array is not flat.

    Notes
    -----
    Halves are convolved directly, so every term is a sum of positive products and keeps its
    relative accuracy, which a Fourier transform loses below about 1e-15. Terms below 1e-290
    are dropped from the ends of the factors.

    References
    ----------
    .. [1] Y. Hong (2013). On computing the distribution function for the Poisson binomial
       distribution. Computational Statistics and Data Analysis 59, 41-51.

    Examples
    --------
    >>> poisson_binomial_pmf(np.array([0.5, 0.5])).tolist()
    [0.25, 0.5, 0.25]
    """
    p = np.asarray(chances, dtype=np.float64)
    if p.ndim != 1:
        raise ValueError(f"chances has {p.ndim} dimensions, must have 1")
    if not ((p >= 0.0) & (p <= 1.0)).all():
        bad = p[~((p >= 0.0) & (p <= 1.0))][0]
        raise ValueError(f"chances holds {bad!r}, must lie in [0, 1]")
    offset, inner = _distribution(np.sort(p))
    result = np.zeros(len(p) + 1)
    result[offset : offset + len(inner)] = inner
    return result


def poisson_binomial_tails(hits: int, chances: FloatArray) -> Tails:
    """Return both exact tails of a count of hits among calls with chances of their own.

    Parameters
    ----------
    hits : int
        Observed hits, ``0 <= hits <= n``.
    chances : ndarray of float, shape (n,)
        Chance of each call.

    Returns
    -------
    Tails
        One-sided; both include the observed count. Each is summed from its far end.

    Raises
    ------
    ValueError
        If ``hits`` is impossible or a chance is not one.

    Notes
    -----
    Assumes independent calls: where calls overlap or follow each other the tails are too
    small.

    References
    ----------
    .. [1] Y. Hong (2013), as in ``poisson_binomial_pmf``.

    Examples
    --------
    >>> round(poisson_binomial_tails(4, np.array([0.1, 0.2, 0.3, 0.4, 0.5])).upper, 4)
    0.0226
    """
    pmf = poisson_binomial_pmf(chances)
    if not 0 <= hits < len(pmf):
        raise ValueError(f"hits={hits!r} must lie in [0, {len(pmf) - 1}]")
    upper = float(np.cumsum(pmf[::-1])[len(pmf) - 1 - hits])
    lower = float(np.cumsum(pmf)[hits])
    return Tails(min(upper, 1.0), min(lower, 1.0))


def poisson_binomial_moments(chances: FloatArray) -> tuple[float, float]:
    """Return mean and variance of the number of hits.

    Parameters
    ----------
    chances : ndarray of float, shape (n,)
        Chance of each call.

    Returns
    -------
    mean, variance : float
        In hits and hits squared.

    Raises
    ------
    ValueError
        If a chance is not one.

    References
    ----------
    .. [1] Y. Hong (2013), as in ``poisson_binomial_pmf``.

    Examples
    --------
    >>> poisson_binomial_moments(np.array([0.5, 0.5]))
    (1.0, 0.5)
    """
    p = np.asarray(chances, dtype=np.float64)
    if not ((p >= 0.0) & (p <= 1.0)).all():
        raise ValueError("chances must lie in [0, 1]")
    return float(p.sum()), float((p * (1.0 - p)).sum())


def _distribution(p: FloatArray) -> tuple[int, FloatArray]:
    """Return the first count with a term worth keeping, and the terms from it on."""
    if len(p) <= _PLAIN:
        return _trimmed(0, _plain(p))
    half = len(p) // 2
    low_offset, low = _distribution(p[:half])
    high_offset, high = _distribution(p[half:])
    return _trimmed(low_offset + high_offset, np.convolve(low, high))


def _plain(p: FloatArray) -> FloatArray:
    terms = np.zeros(len(p) + 1)
    terms[0] = 1.0
    for count, chance in enumerate(p.tolist(), start=1):
        moved = terms[:count] * chance
        terms[:count] *= 1.0 - chance
        terms[1 : count + 1] += moved
    return terms


def _trimmed(offset: int, terms: FloatArray) -> tuple[int, FloatArray]:
    kept = np.flatnonzero(terms > _NEGLIGIBLE)
    return offset + int(kept[0]), terms[kept[0] : kept[-1] + 1]
