"""Many p-values at once, and how many of a field have skill."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from foresaid.model.bars import FloatArray

FEWEST = 10  # records below which no share of a field is estimated


@dataclass(frozen=True, slots=True)
class Share:
    """A share of the field with the ends of its percentile interval, from 0 to 1."""

    value: float
    low: float
    high: float


@dataclass(frozen=True, slots=True)
class FieldShares:
    """How much of a field has no skill, some, and less than none; the three add up to 1."""

    none: Share
    some: Share
    negative: Share
    n_records: int


def holm(p_values: FloatArray) -> FloatArray:
    r"""Return p-values adjusted so that the chance of any false alarm stays at the level.

    Parameters
    ----------
    p_values : ndarray of float, shape (m,)
        From 0 to 1, no NaN; m may be 0.

    Returns
    -------
    ndarray of float, shape (m,)
        In the order of the input, at most 1.

    Raises
    ------
    ValueError
        If the array is not flat or a value is NaN or outside [0, 1].

    Notes
    -----
    :math:`\max_{j \le i} \min(1, (m - j + 1) p_{(j)})`. Holds under any dependence.

    References
    ----------
    .. [1] S. Holm (1979). A simple sequentially rejective multiple test procedure.
       Scandinavian Journal of Statistics 6(2), 65-70.

    Examples
    --------
    >>> holm(np.array([0.01, 0.04, 0.03])).round(4).tolist()
    [0.03, 0.06, 0.06]
    """
    p = _checked("p_values", p_values)
    order = np.argsort(p, kind="stable")
    factors = len(p) - np.arange(len(p))
    adjusted = np.empty_like(p)
    adjusted[order] = np.minimum(np.maximum.accumulate(factors * p[order]), 1.0)
    return adjusted


def benjamini_hochberg(p_values: FloatArray) -> FloatArray:
    r"""Return p-values adjusted so that the share of false alarms among the alarms stays low.

    Parameters
    ----------
    p_values : ndarray of float, shape (m,)
        From 0 to 1, no NaN; m may be 0.

    Returns
    -------
    ndarray of float, shape (m,)
        In the order of the input, at most 1.

    Raises
    ------
    ValueError
        If the array is not flat or a value is NaN or outside [0, 1].

    Notes
    -----
    :math:`\min_{j \ge i} m p_{(j)} / j`. For independent or positively dependent p-values.

    References
    ----------
    .. [1] Y. Benjamini, Y. Hochberg (1995). Controlling the false discovery rate: a practical
       and powerful approach to multiple testing. Journal of the Royal Statistical Society B
       57(1), 289-300.

    Examples
    --------
    >>> benjamini_hochberg(np.array([0.01, 0.04, 0.03])).round(4).tolist()
    [0.03, 0.04, 0.04]
    """
    return _false_discovery(_checked("p_values", p_values), 1.0)


def benjamini_yekutieli(p_values: FloatArray) -> FloatArray:
    r"""Return the adjustment of Benjamini and Hochberg for any dependence.

    Parameters
    ----------
    p_values : ndarray of float, shape (m,)
        From 0 to 1, no NaN; m may be 0.

    Returns
    -------
    ndarray of float, shape (m,)
        In the order of the input, at most 1.

    Raises
    ------
    ValueError
        If the array is not flat or a value is NaN or outside [0, 1].

    Notes
    -----
    The other times :math:`\sum_{j=1}^m 1/j`.

    References
    ----------
    .. [1] Y. Benjamini, D. Yekutieli (2001). The control of the false discovery rate in
       multiple testing under dependency. Annals of Statistics 29(4), 1165-1188.

    Examples
    --------
    >>> benjamini_yekutieli(np.array([0.01, 0.04, 0.03])).round(4).tolist()
    [0.055, 0.0733, 0.0733]
    """
    p = _checked("p_values", p_values)
    return _false_discovery(p, float((1.0 / np.arange(1, len(p) + 1)).sum()))


def field_shares(
    p_upper: FloatArray,
    p_lower: FloatArray,
    generator: np.random.Generator,
    *,
    beyond: float = 0.5,
    level: float = 0.2,
    draws: int = 2000,
) -> FieldShares | None:
    r"""Return how much of a field has no skill, some, and less than none.

    Parameters
    ----------
    p_upper, p_lower : ndarray of float, shape (m,)
        One-sided p-values of each record, in the direction of skill and against it.
    generator : numpy.random.Generator
        For the resampling.
    beyond : float
        Two-sided p-values above it are taken to come from records without skill alone.
    level : float
        Two-sided level at which records count as lucky or skilled.
    draws : int
        Resamples of the field, at least 100.

    Returns
    -------
    FieldShares or None
        With percentile intervals of 95 %; None for fewer than 10 records.

    Raises
    ------
    ValueError
        If arrays are not flat, differ in length or hold values outside [0, 1], or an argument
        is out of its range.

    Notes
    -----
    With two-sided p-values :math:`2 \min(p_u, p_l)`, the share without skill is
    :math:`\pi_0 = \#\{p > \lambda\} / (m (1 - \lambda))`, at most 1. Of the records that are
    significant at the level in the direction of skill, :math:`\pi_0 m \, level / 2` are luck;
    the rest have skill. Likewise on the other side. Shares below 0 are set to 0 and those with
    and against skill are scaled down where they leave less than none for the rest. p-values of
    counts are discrete, which makes the share without skill too large rather than too small.
    Records are resampled as if they were independent; herding makes the intervals too narrow.

    References
    ----------
    .. [1] J. D. Storey (2002). A direct approach to false discovery rates. Journal of the
       Royal Statistical Society B 64(3), 479-498.
    .. [2] L. Barras, O. Scaillet, R. Wermers (2010). False discoveries in mutual fund
       performance: measuring luck in estimated alphas. Journal of Finance 65(1), 179-216.

    Examples
    --------
    >>> grid = (np.arange(100) + 0.5) / 100
    >>> found = field_shares(grid, 1.0 - grid, np.random.default_rng(1))
    >>> found.none.value, found.some.value
    (1.0, 0.0)
    """
    upper, lower = _checked("p_upper", p_upper), _checked("p_lower", p_lower)
    if len(upper) != len(lower):
        raise ValueError(f"p_upper has length {len(upper)}, p_lower {len(lower)}")
    _check_arguments(beyond=beyond, level=level, draws=draws)
    m = len(upper)
    if m < FEWEST:
        return None
    own = _shares(upper[None, :], lower[None, :], beyond, level)[0]
    rows = generator.integers(0, m, size=(draws, m))
    again = _shares(upper[rows], lower[rows], beyond, level)
    ends = np.quantile(again, [0.025, 0.975], axis=0)
    none, some, negative = (
        Share(float(own[k]), float(ends[0, k]), float(ends[1, k])) for k in range(3)
    )
    return FieldShares(none, some, negative, m)


def _shares(upper: FloatArray, lower: FloatArray, beyond: float, level: float) -> FloatArray:
    """Return the shares without, with and against skill of each row, shape (n, 3)."""
    both = np.minimum(1.0, 2.0 * np.minimum(upper, lower))
    m = both.shape[1]
    none = np.minimum(1.0, (both > beyond).sum(axis=1) / (m * (1.0 - beyond)))
    lucky = none * level / 2.0
    some = np.maximum(0.0, ((both <= level) & (upper < lower)).sum(axis=1) / m - lucky)
    worse = np.maximum(0.0, ((both <= level) & (lower < upper)).sum(axis=1) / m - lucky)
    # the estimate of the rest comes first: what is not without skill is shared by the others
    scale = np.minimum(1.0, (1.0 - none) / np.maximum(some + worse, 1e-300))
    some, worse = some * scale, worse * scale
    return np.stack([1.0 - some - worse, some, worse], axis=1)


def _false_discovery(p: FloatArray, scale: float) -> FloatArray:
    order = np.argsort(p, kind="stable")
    ranks = np.arange(1, len(p) + 1)
    steps = scale * len(p) * p[order] / ranks
    adjusted = np.empty_like(p)
    adjusted[order] = np.minimum(np.minimum.accumulate(steps[::-1])[::-1], 1.0)
    return adjusted


def _checked(name: str, p_values: FloatArray) -> FloatArray:
    p = np.asarray(p_values, dtype=np.float64)
    if p.ndim != 1:
        raise ValueError(f"{name} has shape {p.shape}, must be flat")
    wrong = ~((p >= 0.0) & (p <= 1.0))
    if wrong.any():
        at = int(np.argmax(wrong))
        raise ValueError(f"{name}[{at}]={float(p[at])!r} must lie in [0, 1]")
    return p


def _check_arguments(*, beyond: float, level: float, draws: int) -> None:
    for name, share in (("beyond", beyond), ("level", level)):
        if not 0.0 < share < 1.0:
            raise ValueError(f"{name}={share!r} must lie strictly between 0 and 1")
    if draws < 100:
        raise ValueError(f"draws={draws!r} must be at least 100")
