"""Where each call is judged: reference, path and deadline sessions, no look-ahead.

The conventions are those of docs/settlement.md: the reference is the close of the first
session whose close is at or after publication; a path runs from the first session that opens
after publication through the deadline session; a deadline that is no session rolls back.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

import numpy as np

from foresaid.model.bars import Windows

if TYPE_CHECKING:
    from foresaid.market.known import Market
    from foresaid.model.bars import BoolArray, Calendar, FloatArray, IntArray
    from foresaid.model.codebook import SettlementRules


@dataclass(frozen=True)
class CallTimes:
    """When calls were said and when they fall due; arrays (n,).

    Attributes
    ----------
    instrument : ndarray of int
        Instrument number in the market.
    said_day : ndarray of int
        Local date of publication in days since 1970-01-01.
    said_minute : ndarray of float
        Minutes after local midnight, negative where only the date is known.
    deadline_day : ndarray of int
        Calendar deadline; ignored where ``sessions`` is above zero.
    sessions : ndarray of int
        Deadline in sessions after the reference, 0 where it is a date.
    legs : ndarray of int, shape (n, n_legs), or None
        Numbers of the other instruments that claims name, -1 for none.
    stated_day : ndarray of int, or None
        Day in whose units levels are stated, where a clock started later; None where it is
        the day of publication.
    """

    instrument: IntArray
    said_day: IntArray
    said_minute: FloatArray
    deadline_day: IntArray
    sessions: IntArray
    legs: IntArray | None = None
    stated_day: IntArray | None = None


@dataclass(frozen=True)
class Deadlines:
    """What is known of deadlines; arrays (n,).

    Attributes
    ----------
    last : ndarray of int
        Position of the last session by the deadline.
    reached : ndarray of bool
        Whether no later price can bring another one.
    rolled : ndarray of bool
        Whether the day is no session of an instrument that still traded.
    halted : ndarray of bool
        Whether trading was halted on it.
    fixed : ndarray of bool
        Whether the instrument had come to an amount for good by then.
    """

    last: IntArray
    reached: BoolArray
    rolled: BoolArray
    halted: BoolArray
    fixed: BoolArray


@dataclass(frozen=True)
class Resolved:
    """Windows with what is known of them; arrays (n,).

    Attributes
    ----------
    windows : Windows
        Positions; for a window whose deadline session is not known, ``last`` is the last
        session there is by the deadline. Positions mean nothing where neither ``matured`` nor
        ``running``.
    matured : ndarray of bool
        Whether the deadline session is known and the window is sound.
    running : ndarray of bool
        Whether the window has begun and its deadline session is not known.
    reason : ndarray of int
        Index into ``REASONS`` where the call has not matured.
    rolled_back : ndarray of bool
        Whether the deadline was no session.
    """

    windows: Windows
    matured: BoolArray
    running: BoolArray
    reason: IntArray
    rolled_back: BoolArray


FINE, NO_REFERENCE, RUNS, NO_DEADLINE_PRICE, EMPTY, SAME_CLOSE, HALTED, LACKS = range(8)
REASONS = (
    "",
    "no price yet on or after the statement",
    "the window still runs",
    "no price at the deadline",
    "the deadline is before the reference session",
    "the deadline close is the reference close",
    "trading was halted through the whole window",
    "a price is missing: its market traded on a day that the call needs",
)
VOID_REASONS = (EMPTY, SAME_CLOSE, HALTED)


def resolve_windows(times: CallTimes, market: Market, rules: SettlementRules) -> Resolved:
    """Return where each call is judged, as of the market's day.

    Parameters
    ----------
    times : CallTimes
        When calls were said and fall due, n of them.
    market : Market
        Prices known by the day of settlement.
    rules : SettlementRules
        The codebook's conventions.

    Returns
    -------
    Resolved
        Shape (n,).
    """
    bars, number = market.bars, times.instrument
    reference_day, path_waits = publication_days(times, market, rules)
    # the first session on or after the day, and the first after it
    calendar, floor = bars.calendar(number), bars.offsets.take(number, mode="clip")
    first, is_session, is_beyond = calendar.look_up(reference_day)
    first += 1
    reference = first - is_session
    if path_waits is not True:
        first -= is_session * ~path_waits
    begun = ~is_beyond
    due = _deadlines(times, market, calendar, reference)
    sound = (due.last > reference) & due.reached & begun
    reason, running = np.zeros(len(number), dtype=np.int64), np.zeros(len(number), dtype=bool)
    if market.longest_gap > rules.roll_back_days:
        far = _rolled_too_far(due, sound, times, market, rules)
        sound[far], reason[far] = False, NO_DEADLINE_PRICE
    has_reference = begun
    if market.lacks_sessions:
        begins, ends = _missing_sessions(times, due, reference_day, begun, reference, market)
        sound[begins | ends], reason[begins | ends] = False, LACKS
        has_reference = begun & ~begins
    odd = np.flatnonzero(~sound)
    if len(odd):
        blank = odd[reason[odd] == FINE]
        reason[blank] = _reasons(blank, due, begun, reference, times, market)
        end = np.minimum(bars.last_position[number[odd]], due.last[odd])
        is_void = np.isin(reason[odd], VOID_REASONS)
        running[odd] = has_reference[odd] & ~is_void & (first[odd] <= end)
        # positions that mean nothing still have to be positions
        top = max(len(bars.day) - 1, 0)
        reference[odd] = np.minimum(reference[odd], np.clip(end, floor[odd], None)).clip(
            max=top
        )
        first[odd] = np.minimum(first[odd], due.last[odd])
    additive = market.venue.additive.take(number, mode="clip")
    until = _day_of_others(due, times, market)
    windows = Windows(floor, reference, first, due.last, additive, times.legs, until)
    return Resolved(windows, sound, running, reason, due.rolled & sound)


def _deadlines(
    times: CallTimes, market: Market, calendar: Calendar, reference: IntArray
) -> Deadlines:
    bars, number = market.bars, times.instrument
    last, is_due_session, is_due_beyond = calendar.look_up(times.deadline_day)
    reached = ~is_due_beyond
    rolled = is_due_session == 0
    dated = times.sessions == 0
    fixed = np.zeros(len(number), dtype=bool)
    if is_due_beyond.any():
        reached |= times.deadline_day <= bars.reach.take(number)
    if not dated.all():
        end = bars.last_position[number]
        last = np.where(dated, last, reference + times.sessions)
        reached = np.where(dated, reached, (last <= end) | market.is_over.take(number))
        last = np.minimum(last, end)
        rolled &= dated
    if market.is_over.any():
        fixed = market.is_over.take(number) & (last == bars.last_position[number])
        rolled &= ~fixed
        reached &= ~_waits_for_others(fixed & dated, times, market)
    halted = np.zeros(len(number), dtype=bool)
    if len(market.halted):
        halted = market.is_halted(number, times.deadline_day) & dated & ~fixed
    return Deadlines(last, reached, rolled, halted, fixed)


def _missing_sessions(
    times: CallTimes,
    due: Deadlines,
    reference_day: IntArray,
    begun: BoolArray,
    reference: IntArray,
    market: Market,
) -> tuple[BoolArray, BoolArray]:
    """Return where the reference or the deadline session is missing from the file.

    Instruments with the same market code share their trading days. Where another one of them
    traded between the day a call needs and the session its own file has for it, the next or
    the last session there is would be a wrong answer. Without its reference a call cannot be
    judged at all; without its deadline session what was final before stays so.
    """
    day, number = market.bars.day, times.instrument
    top = max(len(day) - 1, 0)
    dated = times.sessions == 0
    far = np.where(dated & due.reached, times.deadline_day, reference_day - 1)
    before = np.where(begun, day[np.minimum(reference, top)] - 1, far)
    before = np.where(dated, np.minimum(before, times.deadline_day), before)
    at_reference = market.lacks_session(number, reference_day, before)
    # a last session before the first of the instrument means that there is none
    has_last = due.last >= market.bars.offsets[number]
    after = np.where(has_last, day[np.clip(due.last, 0, top)] + 1, reference_day)
    after = np.maximum(after, reference_day)
    at_deadline = market.lacks_session(number, after, times.deadline_day)
    return at_reference, at_deadline & dated & due.reached


def _waits_for_others(fixed: BoolArray, times: CallTimes, market: Market) -> BoolArray:
    """Return where a comparison on an amount for good waits for the others' deadline price."""
    if times.legs is None:
        return np.zeros(len(fixed), dtype=bool)
    over = np.append(market.is_over, True)  # a leg that is not there
    result: BoolArray = fixed & (times.deadline_day > market.as_of_day)
    return result & ~over[times.legs].all(axis=1)


def _rolled_too_far(
    due: Deadlines,
    sound: BoolArray,
    times: CallTimes,
    market: Market,
    rules: SettlementRules,
) -> IntArray:
    """Return the calls whose deadline session lies too long before the deadline."""
    far = np.flatnonzero(due.rolled & sound & ~due.halted)
    days = times.deadline_day[far] - market.bars.day[due.last[far]]
    result: IntArray = far[days > rules.roll_back_days]
    return result


def _day_of_others(due: Deadlines, times: CallTimes, market: Market) -> IntArray | None:
    """Return the day on which other instruments are read, None where it is that of ``last``."""
    if times.legs is None or not len(market.bars.day):
        return None
    day = market.bars.day[np.clip(due.last, 0, len(market.bars.day) - 1)]
    until: IntArray = np.where(due.fixed & (times.sessions == 0), times.deadline_day, day)
    return until


def _reasons(
    odd: IntArray,
    due: Deadlines,
    begun: BoolArray,
    reference: IntArray,
    times: CallTimes,
    market: Market,
) -> IntArray:
    """Return why the calls in these rows cannot be judged on a deadline."""
    begun, reached = begun[odd], due.reached[odd]
    length, dated = due.last[odd] - reference[odd], times.sessions[odd] == 0
    reason = np.full(len(odd), NO_DEADLINE_PRICE, dtype=np.int64)
    reason[~reached & (~dated | (times.deadline_day[odd] > market.as_of_day))] = RUNS
    reason[reached & (length == 0)] = SAME_CLOSE
    reason[reached & (length < 0)] = EMPTY
    reason[~begun] = NO_REFERENCE
    reason[~begun & reached] = EMPTY
    reason[due.halted[odd] & np.isin(reason, (EMPTY, SAME_CLOSE))] = HALTED
    return reason


def publication_days(
    times: CallTimes, market: Market, rules: SettlementRules
) -> tuple[IntArray, BoolArray | Literal[True]]:
    """Return the first day whose close may follow, and whether the path begins after it.

    A session is dated by its close; one that opens the evening before closes on its day.

    Returns
    -------
    reference_day : ndarray of int, shape (n,)
        The reference is the first session on or after this day.
    path_waits : ndarray of bool, shape (n,), or True for all
        Whether the session of that very day had opened at publication, so that the path
        begins with the next one.
    """
    timed = times.said_minute >= 0
    late = rules.day_only == "after-close"
    if not timed.any():
        return (times.said_day + 1, np.zeros_like(timed)) if late else (times.said_day, True)
    opens = market.venue.opens[times.instrument]
    closes = market.venue.closes[times.instrument]
    after_close = np.where(timed, times.said_minute > closes, late)
    before_open = times.said_minute < opens
    overnight = opens > closes
    # the day of the first session that opens later, counted from the day of the statement
    first_day = np.where(timed, 1 - before_open + overnight, 1)
    return times.said_day + after_close, first_day > after_close


def legs_lack_returns(times: CallTimes, market: Market, rows: IntArray) -> BoolArray:
    """Return where a compared instrument is quoted by difference and so has no return."""
    result = np.zeros(len(times.instrument), dtype=bool)
    if times.legs is not None:
        additive = np.append(market.venue.additive, False)
        result[rows] = additive[times.legs[rows]].any(axis=1)
    return result


def uncountable(
    times: CallTimes, resolved: Resolved, market: Market, rows: IntArray
) -> BoolArray:
    """Return where a comparison counts sessions beyond the end of its own instrument."""
    result = np.zeros(len(times.instrument), dtype=bool)
    number = times.instrument[rows]
    wanted = resolved.windows.reference[rows] + times.sessions[rows]
    beyond = wanted > market.bars.last_position[number]
    result[rows] = (times.sessions[rows] > 0) & market.is_over[number] & beyond
    return result
