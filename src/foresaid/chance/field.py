"""The timing hurdle for each record and the field hurdle for the best of many.

Both read one table: the hits of each record under every shift (``shifts.ShiftedHits``). Column
0 is what happened; every column is as likely as it if nobody has timing skill.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, cast

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    from foresaid.model.bars import BoolArray, FloatArray, IntArray

    Counts = np.ndarray[Any, np.dtype[np.int32]] | IntArray

BLOCK = 64  # records whose standardised hits are held at once
TIE = 1e-9  # standardised hits of two records this near each other are equal


@dataclass(frozen=True, slots=True)
class TimingTest:
    """Each record against its own shifts; arrays (n_records,).

    Attributes
    ----------
    hits : ndarray of int
        Observed hits.
    mean, deviation : ndarray of float
        Mean and standard deviation of the hits over all shifts, ddof 0, in hits.
    z : ndarray of float
        ``(hits - mean) / deviation``; 0 where the deviation is 0.
    p_upper, p_lower : ndarray of float
        Share of shifts with at least (at most) as many hits, the observed one included. They
        sum to more than 1.
    best_upper, best_lower : ndarray of float
        The smallest p-value that any outcome could have had: the share of shifts with the most
        (fewest) hits. Where it exceeds the level, the test could not have been passed.
    is_constant : ndarray of bool
        Every shift gives the same hits: timing cannot be judged, and the record has no part in
        the field. Both p-values are 1.
    resolution : float
        One over the number of shifts; no p-value can be smaller.
    """

    hits: IntArray
    mean: FloatArray
    deviation: FloatArray
    z: FloatArray
    p_upper: FloatArray
    p_lower: FloatArray
    best_upper: FloatArray
    best_lower: FloatArray
    is_constant: BoolArray
    resolution: float


@dataclass(frozen=True, slots=True)
class FieldTest:
    """Each record against the best and the worst of the field.

    Attributes
    ----------
    p_upper, p_lower : ndarray of float, shape (n_records,)
        Step-down adjusted p-values, each at least the record's own; 1 for constant records.
    maximum, minimum : ndarray of float, shape (n_shifts,)
        The largest and the smallest z of the field under each shift, constant records left
        out; all 0 where no record is left.
    n_records : int
        Records that have a part in it.
    """

    p_upper: FloatArray
    p_lower: FloatArray
    maximum: FloatArray
    minimum: FloatArray
    n_records: int


@dataclass(frozen=True, slots=True)
class LuckBand:
    """What luck alone gives the best and the worst of the field.

    Attributes
    ----------
    levels : tuple of float
        Shares of shifts, one for each row below.
    z_upper, z_lower : ndarray of float, shape (n_levels,)
        The best z is at most ``z_upper`` in at least that share of the shifts, the worst at
        least ``z_lower``.
    hits_upper, hits_lower : ndarray of float, shape (n_levels, n_records)
        The same for each record in hits, ``mean + z deviation``. Not cut off at 0 or at the
        number of calls.
    excess_upper, excess_lower : ndarray of float, shape (n_levels, n_records)
        The same in hits above the mean, ``z deviation``.
    """

    levels: tuple[float, ...]
    z_upper: FloatArray
    z_lower: FloatArray
    hits_upper: FloatArray
    hits_lower: FloatArray
    excess_upper: FloatArray
    excess_lower: FloatArray


def timing_test(counts: Counts) -> TimingTest:
    r"""Return where each record stands among its own shifts.

    Parameters
    ----------
    counts : ndarray of int, shape (n_records, n_shifts)
        Hits under each shift, column 0 observed; at least one shift, no record is fine.

    Returns
    -------
    TimingTest
        Moments, z and exact p-values of each record.

    Raises
    ------
    ValueError
        If ``counts`` has not two dimensions, has no column or is neither int32 nor int64, or
        one record spreads so widely that its squares leave 63 bits (tens of millions of calls).

    Notes
    -----
    With hits :math:`x_0, \dots, x_{K-1}` the p-value is
    :math:`\#\{k : x_k \ge x_0\} / K`. All shifts are counted, so it is exact and repeats to the
    last digit: if every cycle has K starts and outcomes are stationary round the cycle, then
    :math:`P(p \le a) \le a` for every level a, whatever the overlap. Sums are of whole numbers,
    and the variance is :math:`(K \sum d^2 - (\sum d)^2) / K^2` with :math:`d = x - x_0`, in
    whole numbers up to the root.

    References
    ----------
    .. [1] E. L. Lehmann, J. P. Romano (2005). Testing Statistical Hypotheses, third edition.
       Springer, section 15.2 (randomization tests).
    .. [2] B. Phipson, G. K. Smyth (2010). Permutation p-values should never be zero.
       Statistical Applications in Genetics and Molecular Biology 9(1), 39.
       doi:10.2202/1544-6115.1585

    Examples
    --------
    >>> test = timing_test(np.array([[2, 1, 0, 1]], dtype=np.int32))
    >>> test.p_upper.tolist(), test.p_lower.tolist(), test.best_upper.tolist()
    ([0.25], [1.0], [0.25])
    """
    table = _checked(counts)
    n, shifts = table.shape
    found = [_block_counts(table[at : at + BLOCK]) for at in range(0, n, BLOCK)]
    columns = [np.concatenate(parts) for parts in zip(*found, strict=True)]
    at_least, at_most, most, fewest, sums, squares = columns or [np.zeros(0, np.int64)] * 6
    hits = table[:, 0].astype(np.int64)
    mean = (hits * shifts + sums) / shifts
    deviation = _deviations(sums, squares, shifts)
    is_constant = deviation == 0.0
    return TimingTest(
        hits=hits,
        mean=mean,
        deviation=deviation,
        z=np.where(is_constant, 0.0, (hits - mean) / np.where(is_constant, 1.0, deviation)),
        p_upper=at_least / shifts,
        p_lower=at_most / shifts,
        best_upper=most / shifts,
        best_lower=fewest / shifts,
        is_constant=is_constant,
        resolution=1.0 / shifts,
    )


def field_test(counts: Counts, timing: TimingTest) -> FieldTest:
    r"""Return the p-value of each record, adjusted for how many were looked at.

    Parameters
    ----------
    counts : ndarray of int, shape (n_records, n_shifts)
        Hits under each shift, column 0 observed, the shifts the same for all records.
    timing : TimingTest
        What ``timing_test`` gives for the same counts.

    Returns
    -------
    FieldTest
        Adjusted p-values of both tails, and the extremes of the field under each shift.

    Raises
    ------
    ValueError
        If ``counts`` is not as for ``timing_test``, or does not have the observed hits of
        ``timing``.

    Notes
    -----
    With :math:`z_{ik}` for record i under shift k, record j has
    :math:`\#\{k : \max_{i : z_{i0} \le z_{j0}} z_{ik} \ge z_{j0}\} / K`, and then at least what
    any record with a larger :math:`z_{i0}` has: the step-down procedure. The lower tail is the
    same with all signs turned, and each tail is one-sided. The chance that any record without
    skill is called ahead is at most the level, whoever else has skill and however they copy
    one another.

    Within one record the order of z is the order of its hits. Between records z is a rounded
    number, so two within 1e-9 count as equal: the larger p-value is taken, and the
    observed shift always counts itself. Records with equal z are stepped over together and
    get equal p-values, in any order of the rows.

    References
    ----------
    .. [1] P. H. Westfall, S. S. Young (1993). Resampling-Based Multiple Testing. Wiley.
    .. [2] J. P. Romano, M. Wolf (2005). Exact and approximate stepdown methods for multiple
       hypothesis testing. Journal of the American Statistical Association 100(469), 94-108.
       doi:10.1198/016214504000000539

    Examples
    --------
    >>> counts = np.array([[2, 1, 0, 1], [1, 0, 1, 2]], dtype=np.int32)
    >>> field_test(counts, timing_test(counts)).p_upper.tolist()
    [0.5, 0.75]
    """
    table = _checked(counts)
    if not np.array_equal(table[:, 0], timing.hits):
        raise ValueError("timing does not belong to counts: the observed hits differ")
    p_upper, maximum = _step_down(table, timing, 1.0)
    p_lower, turned = _step_down(table, timing, -1.0)
    return FieldTest(
        p_upper, p_lower, maximum, 0.0 - turned, int(np.count_nonzero(~timing.is_constant))
    )


def luck_band(
    timing: TimingTest, field: FieldTest, levels: Sequence[float] = (0.5, 0.95)
) -> LuckBand:
    """Return how far the best and the worst of the field get without skill.

    Parameters
    ----------
    timing : TimingTest
        Moments of each record.
    field : FieldTest
        Extremes of the same field.
    levels : sequence of float, optional
        Shares of shifts, each above 0 and at most 1.

    Returns
    -------
    LuckBand
        Bounds in z, in hits and in excess hits; 0 in z and in excess for an empty field.

    Raises
    ------
    ValueError
        If a level is not above 0 and at most 1.

    Notes
    -----
    A bound is one of the values that occur, never a value between two: the smallest that at
    least that share of the shifts does not exceed. A record beyond the 0.95 bound has done
    better than the best of the field does in 95 % of the shifts; the adjusted p-value says
    the same thing more sharply for all but the first.

    References
    ----------
    .. [1] R. J. Hyndman, Y. Fan (1996). Sample quantiles in statistical packages. The American
       Statistician 50(4), 361-365, definition 1. doi:10.1080/00031305.1996.10473566

    Examples
    --------
    >>> counts = np.array([[2, 1, 0, 1]], dtype=np.int32)
    >>> test = timing_test(counts)
    >>> luck_band(test, field_test(counts, test), levels=[0.75]).hits_upper.tolist()
    [[1.0]]
    """
    shares = tuple(float(level) for level in levels)
    for share in shares:
        if not 0.0 < share <= 1.0:
            raise ValueError(f"levels holds {share!r}, must lie in (0, 1]")
    upper = _quantiles(field.maximum, shares)
    lower = 0.0 - _quantiles(-field.minimum, shares)
    excess_upper = upper[:, None] * timing.deviation
    excess_lower = lower[:, None] * timing.deviation
    return LuckBand(
        levels=shares,
        z_upper=upper,
        z_lower=lower,
        hits_upper=timing.mean + excess_upper,
        hits_lower=timing.mean + excess_lower,
        excess_upper=excess_upper,
        excess_lower=excess_lower,
    )


def _block_counts(block: Counts) -> tuple[IntArray, ...]:
    """Return shifts at least and at most observed, most and fewest, sums of differences.

    The differences are from the observed hits; their sums and the sums of their squares are
    whole numbers.
    """
    observed, most, fewest = block[:, :1], block.max(axis=1), block.min(axis=1)
    spread = int((most.astype(np.int64) - fewest).max())
    if spread * spread * block.shape[1] >= 2**63:
        raise ValueError(f"counts spreads over {spread} hits, too widely to be squared exactly")
    difference = (block - observed).astype(np.int64)
    return (
        _row_counts(block >= observed),
        _row_counts(block <= observed),
        _row_counts(block == most[:, None]),
        _row_counts(block == fewest[:, None]),
        difference.sum(axis=1),
        np.einsum("ij,ij->i", difference, difference),
    )


def _row_counts(mask: BoolArray) -> IntArray:
    return np.array([np.count_nonzero(row) for row in mask], dtype=np.int64)


def _deviations(sums: IntArray, squares: IntArray, shifts: int) -> FloatArray:
    """Return standard deviations from whole sums, as large as they may be."""
    pairs = zip(sums.tolist(), squares.tolist(), strict=True)
    scaled = [math.sqrt(shifts * square - total * total) for total, square in pairs]
    return np.array(scaled, dtype=np.float64) / shifts


def _step_down(
    counts: Counts, timing: TimingTest, sign: float
) -> tuple[FloatArray, FloatArray]:
    """Return adjusted p-values of one tail, and the extreme of the whole field per shift.

    Records join from the least striking on, so that the running maximum over those that have
    joined is the statistic of the next p-value.
    """
    shifts = counts.shape[1]
    varying = np.flatnonzero(~timing.is_constant)
    order = varying[np.argsort(sign * timing.z[varying], kind="stable")]
    height = sign * timing.z[order]
    last_equal = np.searchsorted(height, height + TIE, side="right") - 1
    reached = np.full(shifts, -np.inf if len(order) else 0.0)
    shares, judged = np.ones(len(order)), 0
    for joined, row in enumerate(_standardised(counts, timing, order, sign)):
        np.maximum(reached, row, out=reached)
        while judged < len(order) and last_equal[judged] <= joined:
            shares[judged] = np.count_nonzero(reached >= height[judged] - TIE) / shifts
            judged += 1
    result = np.ones(len(counts))
    result[order] = np.maximum.accumulate(shares[::-1])[::-1]
    return result, reached


def _standardised(
    counts: Counts, timing: TimingTest, order: IntArray, sign: float
) -> Iterator[FloatArray]:
    """Yield z under every shift, record by record, computed for a block at a time."""
    for at in range(0, len(order), BLOCK):
        rows = order[at : at + BLOCK]
        block = counts[rows].astype(np.float64)
        block -= timing.mean[rows, None]
        block *= sign / timing.deviation[rows, None]
        yield from block


def _quantiles(values: FloatArray, shares: tuple[float, ...]) -> FloatArray:
    ordered = np.sort(values)
    # a product such as 0.07 * 100 may come out just above the whole number it is
    ranks = [math.ceil(share * len(ordered) - 1e-9) for share in shares]
    return np.array([ordered[max(rank, 1) - 1] for rank in ranks], dtype=np.float64)


def _checked(counts: Counts) -> Counts:
    table = np.asarray(counts)
    if table.ndim != 2 or not table.shape[1]:
        raise ValueError(f"counts has shape {table.shape}, must be (n_records, n_shifts)")
    if table.dtype not in (np.int32, np.int64):
        raise ValueError(f"counts has dtype {table.dtype}, must be int32 or int64")
    return cast("Counts", table)
