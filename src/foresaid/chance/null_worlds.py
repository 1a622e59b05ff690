"""Every call settled again from every start of a calendar, and counted under every shift.

The calendar is that of all sessions of the instruments in the field, so several instruments
move together; a day on which one of them was shut stands for its next session.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Literal

import numpy as np

from foresaid.chance.base_rate import CELLS, distinct_rows, signatures
from foresaid.chance.shifts import ShiftedHits
from foresaid.model.bars import Windows

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    from foresaid.chance.base_rate import Starts
    from foresaid.claims.kind import Kind
    from foresaid.model.bars import Bars, BoolArray, FloatArray, IntArray

    CountArray = np.ndarray[Any, np.dtype[np.int32]]

SCALED = ("level", "gain", "loss", "gain of thing", "loss of thing")


@dataclass(frozen=True)
class NullWorlds:
    """Hits of records under every shift of the calendar.

    Attributes
    ----------
    counts : ndarray of int32, shape (n_records, n_shifts)
        Hits; column 0 is the record itself. One column of zeros where there is no call.
    n_calls : ndarray of int, shape (n_records,)
        Calls of each record that take part.
    takes_part : ndarray of bool, shape (n,)
        Which calls do.
    first_day, last_day : int
        The calendar's ends, in days since 1970-01-01; 0 and -1 where there is no call.
    """

    counts: CountArray
    n_calls: IntArray
    takes_part: BoolArray
    first_day: int
    last_day: int

    @property
    def n_shifts(self) -> int:
        """How many shifts there are, the record itself among them."""
        return int(self.counts.shape[1])


@dataclass(frozen=True)
class ShiftRules:
    """How records are moved.

    Attributes
    ----------
    tolerance : float
        Two prices this near each other, as a part of their size, are equal.
    span : {"record", "history"}
        Whether calls move over the span of the field's own calls, or over all sessions.
    volatility : ndarray of float, shape (n_bars,), or None
        Standard deviation of moves known before each session, NaN where unknown. Where it is
        given, distances to the reference are scaled by it from start to start.
    """

    tolerance: float
    span: Literal["record", "history"] = "record"
    volatility: FloatArray | None = None


@dataclass(frozen=True)
class Field:
    """The calls of a field; arrays (n,).

    Attributes
    ----------
    starts : Starts
        What carries the calls to other starts.
    right : ndarray of bool
        Whether each call came right.
    turned : ndarray of bool
        Whether a call is right when its claim fails.
    record : ndarray of int
        Number of the record that each call belongs to; numbers run from 0.
    """

    starts: Starts
    right: BoolArray
    turned: BoolArray
    record: IntArray


def null_worlds(
    groups: Sequence[tuple[Kind, IntArray]], bars: Bars, field: Field, rules: ShiftRules
) -> NullWorlds:
    """Return the hits of every record under every shift.

    Parameters
    ----------
    groups : sequence of (Kind, ndarray of int)
        The kinds, each with its rows of the field; rows in no group take no part.
    bars : Bars
        Prices known by the day of settlement.
    field : Field
        The n calls, matured and with a result.
    rules : ShiftRules
        How records are moved.

    Returns
    -------
    NullWorlds
        Counts of the calls that take part.

    Notes
    -----
    A start has an outcome where its window does not run past the last price. Shifts are exact
    only where all claims go round one and the same calendar, so it ends on the day that leaves
    most calls in: a call made later takes no part, nor does one whose windows from that day
    would run past the prices. It begins likewise where an instrument's prices begin late. The
    choice looks at days and lengths only, never at an outcome. A start in between at which a
    claim has no meaning stands for the next one at which it has.

    A call that the calendar does not settle as it was settled takes no part either; that can
    only happen where its instrument ended or its deadline had no price of its own.

    References
    ----------
    .. [1] E. S. Edgington, P. Onghena (2007). Randomization Tests, fourth edition. Chapman and
       Hall/CRC.
    """
    n_records = int(field.record.max(initial=-1)) + 1
    rows = np.concatenate([np.zeros(0, np.int64), *(own for _, own in groups)])
    takes_part = np.zeros(len(field.right), dtype=bool)
    days = _calendar(bars, field.starts.take(rows), rules)
    span = _common_span(groups, bars, field, days)
    if span is None:
        nothing = np.zeros((n_records, 1), np.int32)
        return NullWorlds(nothing, np.zeros(n_records, np.int64), takes_part, 0, -1)
    begin, end = span
    hits = ShiftedHits(n_records, end - begin)
    when = np.searchsorted(days, bars.day[field.starts.reference])
    for block in _blocks(groups, bars, field, days, rules):
        whole = (block.low <= begin) & (block.low + block.cycle >= end)
        at = when[block.rows]
        inside = whole[block.signature] & (at >= begin) & (at < end)
        same = block.right[block.signature, np.clip(at, 0, len(days) - 1)]
        kept = np.flatnonzero(inside & (same == field.right[block.rows]))
        takes_part[block.rows[kept]] = True
        hits.add(
            block.right[:, begin:end],
            low=np.zeros(len(whole), dtype=np.int64),
            cycle=np.full(len(whole), end - begin),
            record=field.record[block.rows[kept]],
            signature=block.signature[kept],
            start=at[kept] - begin,
        )
    n_calls = np.bincount(field.record[takes_part], minlength=n_records).astype(np.int64)
    return NullWorlds(hits.counts, n_calls, takes_part, int(days[begin]), int(days[end - 1]))


def _common_span(
    groups: Sequence[tuple[Kind, IntArray]], bars: Bars, field: Field, days: IntArray
) -> tuple[int, int] | None:
    """Return the ends of the calendar that leave most calls in, the second one excluded.

    A call allows every end from its own position to the last start of its claim, and every
    beginning from the first start of its claim to its own position.
    """
    n = len(field.right)
    low, high = np.zeros(n, dtype=np.int64), np.full(n, -1, dtype=np.int64)
    for _, members in groups:
        own = field.starts.take(members)
        for part in signatures(own):
            valid = np.flatnonzero(_windows_at(bars, own, part, days).valid)
            if len(valid):
                low[members[part]], high[members[part]] = valid[0], valid[-1]
    at = np.searchsorted(days, bars.day[field.starts.reference])
    can = (low <= at) & (at <= high)
    if not can.any():
        return None
    end = _most_covered(at[can], high[can], latest=True)
    can &= (at <= end) & (high >= end)
    begin = _most_covered(low[can], at[can], latest=False)
    return begin, end + 1


def _most_covered(first: IntArray, last: IntArray, *, latest: bool) -> int:
    """Return the position in most of the stretches, the earliest or latest of several."""
    steps = np.zeros(int(last.max()) + 2, dtype=np.int64)
    np.add.at(steps, first, 1)
    np.add.at(steps, last + 1, -1)
    covered = np.cumsum(steps[:-1])
    found = np.flatnonzero(covered == covered.max())
    return int(found[-1] if latest else found[0])


def _calendar(bars: Bars, starts: Starts, rules: ShiftRules) -> IntArray:
    """Return the days of the calendar: all sessions of the instruments within the span."""
    ends = bars.offsets.tolist()
    used = [bars.day[ends[i] : ends[i + 1]] for i in np.unique(starts.instrument)]
    days: IntArray = np.unique(np.concatenate([bars.day[:0], *used]))
    if rules.span == "history" or not len(days):
        return days
    made = bars.day[starts.reference]
    inside: IntArray = days[(days >= made.min()) & (days <= made.max())]
    return inside


@dataclass(frozen=True)
class _Block:
    """Signatures at every start of the calendar, with the calls that have them.

    ``right`` has shape (m, n_days); ``low`` and ``cycle`` (m,) tell which of it is valid.
    ``rows`` are calls, ``signature`` their rows of ``right``.
    """

    right: BoolArray
    low: IntArray
    cycle: IntArray
    rows: IntArray
    signature: IntArray


def _blocks(
    groups: Sequence[tuple[Kind, IntArray]],
    bars: Bars,
    field: Field,
    days: IntArray,
    rules: ShiftRules,
) -> Iterator[_Block]:
    for kind, members in groups:
        own = field.starts.take(members)
        for part in signatures(own):
            windows = _windows_at(bars, own, part, days)
            if not windows.valid.any():
                continue
            keys = np.column_stack([own.marks[part], field.turned[members[part]]])
            if rules.volatility is not None:  # the same distance means something else then
                keys = np.column_stack([keys, rules.volatility[own.reference[part] - 1]])
            _, order = distinct_rows(keys)
            size = max(1, CELLS // len(days))
            for begin in range(0, int(order.max()) + 1, size):
                here = np.flatnonzero((order >= begin) & (order < begin + size))
                _, first, signature = np.unique(
                    order[here], return_index=True, return_inverse=True
                )
                calls = own.take(part[here[first]])
                right, low, cycle = _outcomes(kind, bars, windows, calls, rules)
                right ^= field.turned[members[part[here[first]]], None]
                yield _Block(right, low, cycle, members[part[here]], signature)


@dataclass(frozen=True)
class _WindowsAt:
    """The window of one length from each day of a calendar, and which of them are known."""

    all: Windows
    valid: BoolArray


def _windows_at(bars: Bars, starts: Starts, rows: IntArray, days: IntArray) -> _WindowsAt:
    one = int(rows[0])
    number, span = int(starts.instrument[one]), int(starts.span[one])
    begin, end = int(bars.offsets[number]), int(bars.offsets[number + 1])
    own = bars.day[begin:end]
    at = np.searchsorted(own, days)  # a day without a session stands for the next one
    valid = (at < len(own)) & (days >= own[0])
    at = np.minimum(at, len(own) - 1)
    if starts.in_sessions[one]:
        last = at + span
        valid &= last < len(own)
        last = np.minimum(last, len(own) - 1)
    else:
        due = own[at] + span
        # a deadline that some call here has reached is a day up to which prices are known
        known = max(int(own[-1]), int((bars.day[starts.reference[rows]] + span).max()))
        valid &= (due <= known) | bool(bars.over[number])
        last = np.searchsorted(own, due, side="right") - 1
    valid &= last > at
    n = len(days)
    legs = None
    if starts.legs is not None:
        legs = np.broadcast_to(starts.legs[one], (n, starts.legs.shape[1]))
    reference = begin + at
    windows = Windows(
        np.full(n, begin),
        reference,
        np.minimum(reference + int(starts.lag[one]), begin + np.maximum(last, at)),
        begin + np.maximum(last, at),
        np.full(n, bool(starts.additive[one])),
        legs,
    )
    return _WindowsAt(windows, valid)


def _outcomes(
    kind: Kind, bars: Bars, windows: _WindowsAt, calls: Starts, rules: ShiftRules
) -> tuple[BoolArray, IntArray, IntArray]:
    """Return whether each claim came true from each day, and its cycle of valid starts."""
    marks, shape = calls.marks[:, : len(kind.marks)], (len(calls.marks), len(windows.valid))
    usable = np.flatnonzero(windows.valid)
    own = windows.all.take(usable)
    right, valid = np.zeros(shape, dtype=bool), np.zeros(shape, dtype=bool)
    valid[:, usable] = True
    if rules.volatility is None:
        right[:, usable] = kind.kernel.outcomes(bars, own, marks, rules.tolerance)
    else:
        scale = _scale(rules.volatility, own, calls)
        for row, mark in enumerate(marks):
            there = _scaled(kind, mark, scale[row], own)
            right[row, usable] = kind.kernel.hits(bars, own, there, rules.tolerance)
    if not kind.kernel.fits_anywhere:
        for row, mark in enumerate(marks):
            there = np.broadcast_to(mark, (len(own), len(mark)))
            for unfit in kind.kernel.unsound(bars, own, there, rules.tolerance):
                valid[row, usable[unfit.rows]] = False
    return _filled(right, valid)


def _filled(right: BoolArray, valid: BoolArray) -> tuple[BoolArray, IntArray, IntArray]:
    """Let invalid starts within each cycle stand for the next valid one."""
    n = valid.shape[1]
    some = valid.any(axis=1)
    low = np.where(some, valid.argmax(axis=1), 0)
    cycle = np.where(some, n - valid[:, ::-1].argmax(axis=1) - low, 0)
    for row in np.flatnonzero(valid.sum(axis=1) < cycle):
        following = np.where(valid[row], np.arange(n), n - 1)
        following = np.minimum.accumulate(following[::-1])[::-1]
        right[row] = right[row, following]
    return right, low.astype(np.int64), cycle.astype(np.int64)


def _scale(volatility: FloatArray, windows: Windows, calls: Starts) -> FloatArray:
    """Return volatility at each start over that at each call, 1 where one is not known."""
    there = volatility[np.maximum(windows.reference - 1, windows.floor)]
    here = volatility[np.maximum(calls.reference - 1, 0)]
    with np.errstate(divide="ignore", invalid="ignore"):
        ratio = there[None, :] / here[:, None]
    return np.where(np.isfinite(ratio) & (ratio > 0), ratio, 1.0)


def _scaled(kind: Kind, mark: FloatArray, scale: FloatArray, windows: Windows) -> FloatArray:
    """Return the marks of one claim at each start, distances scaled by volatility."""
    columns = []
    for value, role in zip(mark, (one.role for one in kind.marks), strict=False):
        if role not in SCALED:
            columns.append(np.full(len(scale), value))
        elif windows.additive[0]:
            columns.append(value * scale)
        else:
            columns.append(np.power(value, scale) if value > 0 else np.full(len(scale), value))
    return np.column_stack(columns)
