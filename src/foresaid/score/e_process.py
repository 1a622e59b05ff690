"""Evidence in a record that may be looked at on any day, with calls that overlap."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal, TypeAlias

import numpy as np

from foresaid.score.streams import log_sum_after_each, split_into_streams

if TYPE_CHECKING:
    from collections.abc import Sequence

    from foresaid.model.bars import BoolArray, FloatArray, IntArray

Side: TypeAlias = Literal["upper", "lower"]

ODDS = (1.25, 1.5, 2.0, 3.0, 5.0)  # how much better the odds of a call than by chance
_SAME = 1e-12  # relative; an e-value this near 1 / level reaches it
_LARGEST = math.log(1e300)  # larger e-values are given as 1e300


@dataclass(frozen=True, slots=True)
class TimedCalls:
    """The calls of one record on one clock, in an order fixed before any outcome.

    Days are whole numbers; any finer unit does as well.

    Attributes
    ----------
    starts : ndarray of int, shape (n,)
        Last day on which nothing of the outcome is known, mostly that of the reference close.
    ends : ndarray of int, shape (n,)
        Day on which the outcome is known for sure, after ``starts``; the deadline session. For
        a call whose end is not known yet any later day than the one looked from.
    chances : ndarray of float, shape (n,)
        Chance of each call to be right without skill, strictly between 0 and 1, given all that
        is known on the day of its start.
    right : ndarray of bool, shape (n,)
        Whether the call was right; not looked at where it is not settled.
    settled : ndarray of bool, shape (n,)
        False for calls that are open or whose outcome is missing.
    """

    starts: IntArray
    ends: IntArray
    chances: FloatArray
    right: BoolArray
    settled: BoolArray


@dataclass(frozen=True, slots=True)
class EProcess:
    """The e-value of a record on each day, with open bets counted as lost.

    Attributes
    ----------
    days : ndarray of int, shape (m,)
        Days on which a call starts or ends, rising, none after the day looked from.
    log_values : ndarray of float, shape (m,)
        Natural logarithm of the e-value at the end of each day.
    log_peaks : ndarray of float, shape (m,)
        Running maximum of ``log_values``, never below 0: the e-value is 1 before any call.
    passed : int or None
        First day on which the e-value reached ``1 / level``; None where it has not.
    level : float
        Chance of a false alarm, at any time, that was asked for.
    n_streams : int
        Streams opened so far.
    """

    days: IntArray
    log_values: FloatArray
    log_peaks: FloatArray
    passed: int | None
    level: float
    n_streams: int

    @property
    def value(self) -> float:
        """The e-value now, at most 1e300; 1 for an empty record."""
        return _unlogged(self.log_values)

    @property
    def peak(self) -> float:
        """The largest e-value so far, from 1 to 1e300; its inverse is a p-value."""
        return _unlogged(self.log_peaks)


def e_process(
    calls: TimedCalls,
    *,
    as_of: int,
    level: float = 0.05,
    side: Side = "upper",
    odds: Sequence[float] = ODDS,
) -> EProcess:
    r"""Return the e-value of a record day by day, safe to look at on every day.

    Parameters
    ----------
    calls : TimedCalls
        The record. Calls that start after ``as_of`` are left out, and outcomes of calls that
        end after it are not looked at.
    as_of : int
        Day from which the record is looked at, its own close included.
    level : float
        Chance of ever passing without skill, strictly between 0 and 1.
    side : {"upper", "lower"}
        Whether the bets are on more right calls than by chance or on fewer.
    odds : sequence of float
        Factors by which the bets move the odds of a call, each above 1 and finite; at least
        one. The lower side divides by them.

    Returns
    -------
    EProcess
        The path, its running maximum and the day on which the record passed. For no call the
        path is empty and the e-value 1.

    Raises
    ------
    ValueError
        If arrays are not flat or differ in length, days are not whole, a call does not end
        after it starts, a chance is NaN or not strictly between 0 and 1, or an argument is
        outside its range.

    Notes
    -----
    A call with chance :math:`p` is bet on at the odds factor :math:`\theta`, below 1 on the
    lower side, as if its chance were :math:`q = \theta p / (1 - p + \theta p)`. The bet is
    multiplied by :math:`q / p` if right, :math:`(1 - q) / (1 - p)` if wrong. From its start to
    the day before its end, and as long as it is not settled, it counts as lost: as wrong on
    the upper side, as right on the lower.

    Calls are split into streams without overlap (``split_into_streams``; among calls with the
    same start the smaller chance comes first, then the earlier position). Stream :math:`j` from
    1 on has the weight :math:`1 / (j (j + 1))` and holds the mean over the odds factors of the
    product of its bets, 1 before it opens. The e-value is the weighted sum.

    If each call is right with at most (lower side: at least) its chance, given all that was
    known on the day of its start, the expected e-value is at most 1 whenever one stops, and
    the chance that it ever reaches :math:`1 / level` is at most the level. Calls that overlap
    may depend on each other in any way.

    Values hold about eleven digits. A value within a part in 10^12 of :math:`1 / level`
    reaches it.

    References
    ----------
    .. [1] J. Ville (1939). Étude critique de la notion de collectif. Gauthier-Villars.
    .. [2] G. Shafer, A. Shen, N. Vereshchagin, V. Vovk (2011). Test martingales, Bayes factors
       and p-values. Statistical Science 26(1), 84-101. doi:10.1214/10-STS347
    .. [3] V. Vovk, R. Wang (2021). E-values: calibration, combination and applications. Annals
       of Statistics 49(3), 1736-1754. doi:10.1214/20-AOS2020
    .. [4] A. Henzi, J. F. Ziegel (2022). Valid sequential inference on probability forecast
       performance. Biometrika 109(3), 647-663, and the correction in 109(4), 1181.
       doi:10.1093/biomet/asab047
    .. [5] A. Ramdas, P. Grünwald, V. Vovk, G. Shafer (2023). Game-theoretic statistics and
       safe anytime-valid inference. Statistical Science 38(4), 576-601. doi:10.1214/23-STS894

    Examples
    --------
    >>> calls = TimedCalls(
    ...     starts=np.array([0, 5, 7]),
    ...     ends=np.array([5, 10, 12]),
    ...     chances=np.array([0.5, 0.5, 0.5]),
    ...     right=np.array([True, True, False]),
    ...     settled=np.array([True, True, False]),
    ... )
    >>> found = e_process(calls, as_of=10, odds=[3.0])
    >>> found.days.tolist(), np.exp(found.log_values).round(4).tolist()
    ([0, 5, 7, 10], [0.75, 0.875, 0.7917, 1.5417])
    >>> round(found.value, 4), found.passed
    (1.5417, None)
    """
    multipliers = _multipliers(odds, side)
    if not 0.0 < level < 1.0:
        raise ValueError(f"level={level!r} must lie strictly between 0 and 1")
    begun = _begun(_checked(calls), as_of)
    stream = split_into_streams(begun.starts, begun.ends)
    days = np.union1d(begun.starts, begun.ends[begun.ends <= as_of]).astype(np.int64)
    log_values = _path(begun, stream, days, multipliers)
    log_peaks = np.maximum.accumulate(np.maximum(log_values, 0.0))
    reached = np.flatnonzero(log_values >= -math.log(level) - _SAME)
    passed = int(days[reached[0]]) if len(reached) else None
    return EProcess(days, log_values, log_peaks, passed, level, int(stream.max(initial=-1)) + 1)


def _path(
    begun: TimedCalls, stream: IntArray, days: IntArray, multipliers: FloatArray
) -> FloatArray:
    """Return the logarithm of the e-value at the end of each day.

    Each call is lost on the day of its start; a bet that was won is made good at its end.
    """
    is_won = begun.settled & (begun.right == (multipliers[0] > 1.0))
    day = np.concatenate([begun.starts, begun.ends[is_won]])
    where = np.concatenate([stream, stream[is_won]])
    made_good = np.broadcast_to(np.abs(np.log(multipliers)), (is_won.sum(), len(multipliers)))
    steps = np.concatenate([_log_lost(begun.chances, multipliers), made_good])
    order = np.lexsort((day, where))
    wealth = np.empty(len(day))
    wealth[order] = _log_wealth(where[order], steps[order])
    number = np.arange(1, stream.max(initial=-1) + 2)
    log_weights = -np.log(number * (number + 1.0))
    in_time = np.argsort(day, kind="stable")
    total = log_sum_after_each(
        where[in_time],
        (wealth + log_weights[where])[in_time],
        np.append(log_weights, -math.log(len(number) + 1.0)),  # all streams not opened yet
    )
    return total[np.searchsorted(day[in_time], days, side="right") - 1]


def _log_lost(chances: FloatArray, multipliers: FloatArray) -> FloatArray:
    """Return the logarithm of the factor of a lost bet, one row to a call."""
    log_wrong = -np.log1p((multipliers - 1.0) * chances[:, None])
    return log_wrong + np.minimum(np.log(multipliers), 0.0)


def _log_wealth(stream: IntArray, steps: FloatArray) -> FloatArray:
    """Return the logarithm of the mean over odds of the products so far, stream by stream.

    The rows are sorted by stream.
    """
    sums = np.concatenate([np.zeros((1, steps.shape[1])), np.cumsum(steps, axis=0)])
    products = sums[1:] - sums[np.searchsorted(stream, stream)]
    largest: FloatArray = products.max(axis=1)
    means: FloatArray = np.exp(products - largest[:, None]).mean(axis=1)
    return largest + np.log(means)


def _begun(calls: TimedCalls, as_of: int) -> TimedCalls:
    """Return the calls that have started, sorted, none settled that ends after the day."""
    order = np.lexsort((calls.chances, calls.starts))
    kept = order[calls.starts[order] <= as_of]
    return TimedCalls(
        calls.starts[kept],
        calls.ends[kept],
        calls.chances[kept],
        calls.right[kept],
        calls.settled[kept] & (calls.ends[kept] <= as_of),
    )


def _multipliers(odds: Sequence[float], side: Side) -> FloatArray:
    factors = np.asarray(odds, dtype=np.float64)
    if factors.ndim != 1 or not len(factors):
        raise ValueError(f"odds={odds!r} must be a list of one factor or more")
    if not ((factors > 1.0) & (factors < np.inf)).all():
        raise ValueError(f"odds={odds!r} must lie above 1 and be finite")
    if side not in {"upper", "lower"}:
        raise ValueError(f"side={side!r} must be 'upper' or 'lower'")
    return factors if side == "upper" else 1.0 / factors


def _checked(calls: TimedCalls) -> TimedCalls:
    chances = np.asarray(calls.chances, dtype=np.float64)
    columns = {
        "starts": np.asarray(calls.starts),
        "ends": np.asarray(calls.ends),
        "chances": chances,
        "right": np.asarray(calls.right, dtype=bool),
        "settled": np.asarray(calls.settled, dtype=bool),
    }
    for name, column in columns.items():
        if column.shape != (len(columns["starts"]),):
            raise ValueError(f"{name} has shape {column.shape}, must be flat like starts")
    is_chance = (chances > 0.0) & (chances < 1.0)
    if not is_chance.all():
        raise ValueError(
            f"chances holds {float(chances[~is_chance][0])!r}, must lie strictly in (0, 1)"
        )
    return TimedCalls(**columns)


def _unlogged(logs: FloatArray) -> float:
    return math.exp(min(float(logs[-1]), _LARGEST)) if len(logs) else 1.0
