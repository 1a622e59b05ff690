"""Ends and first passages of a driftless normal walk.

Distances are in standard deviations of the whole window: the distance of a mark from the
reference over ``sigma * sqrt(n_sessions)``, where ``sigma`` belongs to one session.
"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np
from scipy import special

if TYPE_CHECKING:
    from foresaid.model.bars import FloatArray

# -zeta(1/2) / sqrt(2 pi) with zeta(1/2) = -1.46035450880958681288949915..., the value of
# (1 - sqrt 2)^-1 (1 - 1/sqrt 2 + 1/sqrt 3 - ...), since eta(s) = (1 - 2^(1 - s)) zeta(s)
MONITORING_BETA = 1.4603545088095868 / math.sqrt(2.0 * math.pi)
_OUT_OF_REACH = 40.0  # a normal tail this far out is 0 in double precision
_NARROW = 2.0  # width of a band, in standard deviations, below which waves beat images
_CLOSED = 0.01  # a band this narrow keeps nothing in double precision
_IMAGES = np.arange(-6, 7)
_WAVES = np.array([1.0, 3.0, 5.0, 7.0])


def ends_above(distance: FloatArray) -> FloatArray:
    r"""Return the chance of ending above a mark.

    Parameters
    ----------
    distance : ndarray of float, any shape
        Of the mark from the reference, in standard deviations of the whole window: positive
        above it, negative below. Infinite values are allowed, NaN is not.

    Returns
    -------
    ndarray of float, same shape
        From 0 to 1.

    Raises
    ------
    ValueError
        If a distance is NaN.

    Notes
    -----
    :math:`1 - \Phi(d)`, without the subtraction. To end exactly at the mark has no chance.

    References
    ----------
    .. [1] L. Bachelier (1900). Théorie de la spéculation. Annales scientifiques de l'École
       Normale Supérieure 17, 21-86.

    Examples
    --------
    >>> ends_above(np.array([-1.0, 0.0, 1.0])).round(4).tolist()
    [0.8413, 0.5, 0.1587]
    """
    result: FloatArray = special.ndtr(-_checked("distance", distance))
    return result


def touches_above(distance: FloatArray) -> FloatArray:
    r"""Return the chance that the highest point of the walk reaches a mark.

    Parameters
    ----------
    distance : ndarray of float, any shape
        Of the mark from the reference, in standard deviations of the whole window: positive
        above it. Infinite values are allowed, NaN is not.

    Returns
    -------
    ndarray of float, same shape
        From 0 to 1; 1 where the mark is not above the reference.

    Raises
    ------
    ValueError
        If a distance is NaN.

    Notes
    -----
    :math:`2 (1 - \Phi(d))` by the reflection principle: each path that ends above the mark has
    a mirror image that touched it and ended below. The walk is watched all the time; for one
    watched only at closes add ``monitoring_shift`` to a positive distance.

    References
    ----------
    .. [1] D. André (1887). Solution directe du problème résolu par M. Bertrand. Comptes rendus
       de l'Académie des sciences 105, 436-437.

    Examples
    --------
    >>> touches_above(np.array([-1.0, 0.0, 1.0])).round(6).tolist()
    [1.0, 1.0, 0.317311]
    """
    return np.minimum(1.0, 2.0 * ends_above(distance))


def stays_between(low: FloatArray, high: FloatArray) -> FloatArray:
    r"""Return the chance that the walk never leaves a band around the reference.

    Parameters
    ----------
    low, high : ndarray of float, shapes that broadcast
        Distances of the marks from the reference, in standard deviations of the whole window,
        ``low < 0 < high``. Infinite values are allowed, NaN is not.

    Returns
    -------
    ndarray of float, broadcast shape
        From 0 to 1.

    Raises
    ------
    ValueError
        If a distance is NaN or the reference lies outside a band.

    Notes
    -----
    With the width :math:`w = h - l`, by the method of images,

    .. math:: \sum_k \Phi(h + 2kw) - \Phi(l + 2kw) - \Phi(2h - l + 2kw) + \Phi(h + 2kw)

    where the last two terms belong to the image of the start in the upper mark. Bands less
    than two standard deviations wide need many images that cancel; there the same chance is
    summed as waves,

    .. math:: \sum_{k = 1, 3, 5, \ldots} \frac{4}{k \pi} \sin\frac{k \pi h}{w}
              \exp\Big(-\frac{k^2 \pi^2}{2 w^2}\Big)

    The walk is watched all the time; for one watched only at closes move both marks away by
    ``monitoring_shift``.

    References
    ----------
    .. [1] W. Feller (1971). An Introduction to Probability Theory and Its Applications,
       volume II, second edition, section X.5.

    Examples
    --------
    >>> stays_between(np.array([-1.0, -0.5]), np.array([1.0, 0.5])).round(6).tolist()
    [0.370777, 0.009157]
    """
    a, b = np.broadcast_arrays(_checked("low", low), _checked("high", high))
    if not (a < 0.0).all():
        raise ValueError(f"low={float(a.max())!r} must lie below 0")
    if not (b > 0.0).all():
        raise ValueError(f"high={float(b.min())!r} must lie above 0")
    a, b = np.maximum(a, -_OUT_OF_REACH), np.minimum(b, _OUT_OF_REACH)
    result = np.where(b - a < _NARROW, _by_waves(a, b), _by_images(a, b))
    return np.clip(result, 0.0, 1.0)


def monitoring_shift(n_sessions: FloatArray) -> FloatArray:
    r"""Return how far to move a barrier away that is watched only at closes.

    Parameters
    ----------
    n_sessions : ndarray of float, any shape
        Closes in the window, at least 1, the last at its end; fractions are allowed, for
        expected counts.

    Returns
    -------
    ndarray of float, same shape
        In standard deviations of the whole window, positive.

    Raises
    ------
    ValueError
        If a count is NaN or below 1.

    Notes
    -----
    :math:`\beta / \sqrt n` with :math:`\beta = -\zeta(1/2) / \sqrt{2 \pi} = 0.5826`, that is
    :math:`\beta` standard deviations of one session. A first-order correction: what is left
    falls faster than :math:`1 / \sqrt n`.

    References
    ----------
    .. [1] M. Broadie, P. Glasserman, S. Kou (1997). A continuity correction for discrete
       barrier options. Mathematical Finance 7(4), 325-348. doi:10.1111/1467-9965.00035

    Examples
    --------
    >>> monitoring_shift(np.array([1.0, 100.0])).round(5).tolist()
    [0.5826, 0.05826]
    """
    n = _checked("n_sessions", n_sessions)
    if not (n >= 1.0).all():
        raise ValueError(f"n_sessions={float(n.min())!r} must be at least 1")
    result: FloatArray = MONITORING_BETA / np.sqrt(n)
    return result


def _by_images(low: FloatArray, high: FloatArray) -> FloatArray:
    a, b = low[..., None], high[..., None]
    shift = 2.0 * _IMAGES * (b - a)
    direct = special.ndtr(b + shift) - special.ndtr(a + shift)
    image = special.ndtr(2.0 * b - a + shift) - special.ndtr(b + shift)
    result: FloatArray = np.sum(direct - image, axis=-1)
    return result


def _by_waves(low: FloatArray, high: FloatArray) -> FloatArray:
    # the sine of the nearer mark: at the far one it would lose digits near a multiple of pi
    near = np.minimum(-low, high)[..., None]
    width = (high - low)[..., None]
    decay = np.exp(-((_WAVES * np.pi / np.maximum(width, _CLOSED)) ** 2) / 2.0)
    waves = 4.0 / (_WAVES * np.pi) * np.sin(_WAVES * np.pi * near / width) * decay
    result: FloatArray = np.sum(waves, axis=-1)
    return result


def _checked(name: str, values: FloatArray) -> FloatArray:
    array = np.asarray(values, dtype=np.float64)
    if np.isnan(array).any():
        raise ValueError(f"{name} holds nan")
    return array
