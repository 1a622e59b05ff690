"""The number of hits among calls with chances of their own, exact far into the tails."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from foresaid.score.tails import Tails

if TYPE_CHECKING:
    from foresaid.model.bars import FloatArray

_BLOCK = 64  # calls that the plain recursion takes at a time
_NEGLIGIBLE = 1e-290


def poisson_binomial_pmf(chances: FloatArray) -> FloatArray:
    r"""Return the distribution of the number of hits among independent calls.

    Parameters
    ----------
    chances : ndarray of float, shape (n,)
        Chance of each call, from 0 to 1 (both allowed), no NaN; n may be 0.

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
    One call turns :math:`f` into :math:`f(k) (1 - p) + f(k - 1) p`. Blocks of 64 calls are
    worked through in this way side by side, then convolved in pairs, directly: every term is a
    sum of positive products and keeps its relative accuracy, which a Fourier transform loses
    below about 1e-15. Terms of 1e-290 and less at the ends of a factor are dropped, so
    probabilities near that size are too small or 0.

    References
    ----------
    .. [1] Y. Hong (2013). On computing the distribution function for the Poisson binomial
       distribution. Computational Statistics and Data Analysis 59, 41-51.
       doi:10.1016/j.csda.2012.10.006
    .. [2] W. Biscarri, S. D. Zhao, R. J. Brunner (2018). A simple and fast method for
       computing the Poisson binomial distribution function. Computational Statistics and
       Data Analysis 122, 92-100. doi:10.1016/j.csda.2018.01.007

    Examples
    --------
    >>> poisson_binomial_pmf(np.array([0.5, 0.5])).tolist()
    [0.25, 0.5, 0.25]
    >>> poisson_binomial_pmf(np.array([])).tolist()
    [1.0]
    """
    p = _checked(chances)
    first, terms = _convolved([_trimmed(0, block) for block in _blocks(np.sort(p))])
    result = np.zeros(len(p) + 1)
    result[first : first + len(terms)] = terms
    return result


def poisson_binomial_tails(hits: int, chances: FloatArray) -> Tails:
    r"""Return both exact tails of a count of hits among calls with chances of their own.

    Parameters
    ----------
    hits : int
        Observed hits, ``0 <= hits <= n``.
    chances : ndarray of float, shape (n,)
        Chance of each call, from 0 to 1 (both allowed), no NaN; n may be 0.

    Returns
    -------
    Tails
        :math:`P(X \ge hits)` and :math:`P(X \le hits)`, each one-sided.

    Raises
    ------
    ValueError
        If ``hits`` is not a whole number in ``[0, n]``, a chance is NaN or outside
        ``[0, 1]``, or the array is not flat.

    Notes
    -----
    Each tail is the sum of its own terms from its far end, never 1 less the other one: the
    relative error stays below 1e-12 for tails down to 1e-100 and thousands of calls. Assumes
    independent calls: where calls overlap or follow each other the tails are too small.

    References
    ----------
    .. [1] Y. Hong (2013). On computing the distribution function for the Poisson binomial
       distribution. Computational Statistics and Data Analysis 59, 41-51.
       doi:10.1016/j.csda.2012.10.006

    Examples
    --------
    >>> tails = poisson_binomial_tails(4, np.array([0.1, 0.2, 0.3, 0.4, 0.5]))
    >>> round(tails.upper, 4), round(tails.lower, 4)
    (0.0226, 0.9988)
    """
    pmf = poisson_binomial_pmf(chances)
    if not (0 <= hits < len(pmf) and hits % 1 == 0):
        raise ValueError(f"hits={hits!r} must be a whole number in [0, {len(pmf) - 1}]")
    at = int(hits)
    upper, lower = float(pmf[at:][::-1].sum()), float(pmf[: at + 1].sum())
    return Tails(min(upper, 1.0), min(lower, 1.0))


def poisson_binomial_moments(chances: FloatArray) -> tuple[float, float]:
    r"""Return mean and variance of the number of hits among independent calls.

    Parameters
    ----------
    chances : ndarray of float, shape (n,)
        Chance of each call, from 0 to 1 (both allowed), no NaN; n may be 0.

    Returns
    -------
    mean, variance : float
        In hits and hits squared; both 0 for no call.

    Raises
    ------
    ValueError
        If a chance is NaN or outside ``[0, 1]``, or the array is not flat.

    Notes
    -----
    :math:`\sum p` and :math:`\sum p (1 - p)`.

    References
    ----------
    .. [1] Y. Hong (2013). On computing the distribution function for the Poisson binomial
       distribution. Computational Statistics and Data Analysis 59, 41-51.
       doi:10.1016/j.csda.2012.10.006

    Examples
    --------
    >>> poisson_binomial_moments(np.array([0.5, 0.5]))
    (1.0, 0.5)
    """
    p = _checked(chances)
    return float(p.sum()), float((p * (1.0 - p)).sum())


def _blocks(p: FloatArray) -> FloatArray:
    """Return the distribution of each block of calls, one to a row.

    The last block is filled up with calls that never come true, which change nothing.
    """
    width = min(len(p), _BLOCK)
    rows = -(-len(p) // _BLOCK) or 1
    padded = np.zeros(rows * width)
    padded[: len(p)] = p
    chances = padded.reshape(rows, width)
    terms = np.zeros((width + 1, rows))
    terms[0] = 1.0
    for count in range(1, width + 1):
        chance = chances[:, count - 1]
        moved = terms[:count] * chance
        terms[:count] *= 1.0 - chance
        terms[1 : count + 1] += moved
    return terms.T


def _convolved(factors: list[tuple[int, FloatArray]]) -> tuple[int, FloatArray]:
    """Return the distribution of the sum: its first count worth keeping, and the terms."""
    if len(factors) == 1:
        return factors[0]
    half = len(factors) // 2
    first, low = _convolved(factors[:half])
    second, high = _convolved(factors[half:])
    return _trimmed(first + second, np.convolve(low, high))


def _trimmed(first: int, terms: FloatArray) -> tuple[int, FloatArray]:
    kept = np.flatnonzero(terms > _NEGLIGIBLE)
    return first + int(kept[0]), terms[kept[0] : kept[-1] + 1]


def _checked(chances: FloatArray) -> FloatArray:
    p = np.asarray(chances, dtype=np.float64)
    if p.ndim != 1:
        raise ValueError(f"chances has shape {p.shape}, must be flat")
    is_chance = (p >= 0.0) & (p <= 1.0)
    if not is_chance.all():
        raise ValueError(f"chances holds {float(p[~is_chance][0])!r}, must lie in [0, 1]")
    return p
