"""Ends and first passages of a driftless normal walk.

Distances are in standard deviations of the whole window: the distance of a mark from the
reference over ``sigma * sqrt(n_sessions)``.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from scipy import special

if TYPE_CHECKING:
    from foresaid.model.bars import FloatArray

# -zeta(1/2) / sqrt(2 pi), with zeta(1/2) = -1.4603545088095868...
MONITORING_BETA = 1.4603545088095868 / np.sqrt(2.0 * np.pi)
_IMAGES = 40
_FAR = 12.0


def ends_above(distance: FloatArray) -> FloatArray:
    """Return the chance of ending above a mark.

    Parameters
    ----------
    distance : ndarray of float, shape (n,)
        Positive above the reference, negative below.

    Returns
    -------
    ndarray of float, shape (n,)
        ``1 - Phi(distance)``.

    References
    ----------
    .. [1] L. Bachelier (1900). Théorie de la spéculation. Ann. Sci. Éc. Norm. Sup. 17, 21-86.

    Examples
    --------
    >>> float(ends_above(np.array([0.0]))[0])
    0.5
    """
    result: FloatArray = special.ndtr(-np.asarray(distance, dtype=np.float64))
    return result


def touches_above(distance: FloatArray) -> FloatArray:
    """Return the chance of touching a mark at or above the reference on the way.

    Parameters
    ----------
    distance : ndarray of float, shape (n,)
        A mark below the reference (negative) is touched for certain.

    Returns
    -------
    ndarray of float, shape (n,)
        ``2 (1 - Phi(distance))``, at most 1.

    References
    ----------
    .. [1] The reflection principle: D. André (1887). C. R. Acad. Sci. 105, 436-437.

    Examples
    --------
    >>> round(float(touches_above(np.array([1.0]))[0]), 6)
    0.317311
    """
    return np.minimum(1.0, 2.0 * ends_above(distance))


def stays_between(low: FloatArray, high: FloatArray) -> FloatArray:
    r"""Return the chance of never leaving a band around the reference.

    Parameters
    ----------
    low, high : ndarray of float, shape (n,)
        The marks, ``low < 0 < high``.

    Returns
    -------
    ndarray of float, shape (n,)

    Raises
    ------
    ValueError
        If the reference lies outside a band.

    Notes
    -----
    Method of images, with :math:`w = high - low`:

    .. math:: \sum_k \Phi(h - 2kw) - \Phi(l - 2kw) - \Phi(2h - l - 2kw) + \Phi(h - 2kw)

    where the last two terms belong to the image of the start in the upper mark. For bands so
    narrow that the series would lose all digits the chance is 0.

    References
    ----------
    .. [1] W. Feller (1971). An Introduction to Probability Theory and Its Applications II,
       section X.5.

    Examples
    --------
    >>> round(float(stays_between(np.array([-1.0]), np.array([1.0]))[0]), 6)
    0.370777
    """
    a, b = np.asarray(low, dtype=np.float64), np.asarray(high, dtype=np.float64)
    if not ((a < 0) & (b > 0)).all():
        raise ValueError("low and high must lie on either side of 0")
    width = (b - a)[:, None]
    shift = 2.0 * np.arange(-_IMAGES, _IMAGES + 1) * width
    a, b = a[:, None], b[:, None]
    direct = special.ndtr(b - shift) - special.ndtr(a - shift)
    image = special.ndtr(2.0 * b - a - shift) - special.ndtr(b - shift)
    total = np.sum(direct - image, axis=1)
    return np.where(width[:, 0] * _IMAGES < _FAR, 0.0, np.clip(total, 0.0, 1.0))


def monitoring_shift(n_sessions: FloatArray) -> FloatArray:
    r"""Return how far a barrier moves away when it is watched only at closes.

    Parameters
    ----------
    n_sessions : ndarray of float, shape (n,)
        Closes in the window, at least 1.

    Returns
    -------
    ndarray of float, shape (n,)
        In standard deviations of the whole window: :math:`\beta / \sqrt n` with
        :math:`\beta = -\zeta(1/2) / \sqrt{2 \pi} = 0.5826`.

    Raises
    ------
    ValueError
        If a count is below 1.

    References
    ----------
    .. [1] M. Broadie, P. Glasserman, S. Kou (1997). A continuity correction for discrete
       barrier options. Mathematical Finance 7(4), 325-348.

    Examples
    --------
    >>> round(float(monitoring_shift(np.array([1.0]))[0]), 4)
    0.5826
    """
    n = np.asarray(n_sessions, dtype=np.float64)
    if (n < 1).any():
        raise ValueError(f"n_sessions={float(n.min())!r} must be at least 1")
    result: FloatArray = MONITORING_BETA / np.sqrt(n)
    return result
