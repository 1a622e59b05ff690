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
    from foresaid.market.histories import Market
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
class Resolved:
    """Windows with what is known of them; arrays (n,).

    Attributes
    ----------
    windows : Windows
        Positions; for a window that still runs, ``last`` is the last session known. Positions
        mean nothing where neither ``matured`` nor ``running``.
    matured : ndarray of bool
        Whether the deadline session is known and the window is sound.
    running : ndarray of bool
        Whether the window has begun and its deadline is not known yet.
    reason : ndarray of int
        Index into ``REASONS`` where the call is neither matured nor fit to be judged.
    rolled_back : ndarray of bool
        Whether the deadline was no session.
    """

    windows: Windows
    matured: BoolArray
    running: BoolArray
    reason: IntArray
    rolled_back: BoolArray


FINE, NO_REFERENCE, RUNS, NO_DEADLINE_PRICE, EMPTY, SAME_CLOSE, HALTED = range(7)
REASONS = (
    "",
    "no price yet on or after the statement",
    "the window still runs",
    "no price at the deadline",
    "the deadline is before the reference session",
    "the deadline close is the reference close",
    "trading was halted through the whole window",
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
    calendar, floor = bars.calendar(number), bars.offsets.take(number)
    by_then, is_session, is_beyond = calendar.look_up(reference_day)
    reference = by_then + 1 - is_session
    first = (
        reference + is_session if path_waits is True else reference + is_session * path_waits
    )
    begun = ~is_beyond
    due = _deadlines(times, market, calendar, reference)
    sound = (due.last > reference) & due.reached & begun
    reason, running = np.zeros(len(number), dtype=np.int64), np.zeros(len(number), dtype=bool)
    if market.longest_gap > rules.roll_back_days:
        far = _rolled_too_far(due, sound, times, market, rules)
        sound[far], reason[far] = False, NO_DEADLINE_PRICE
    odd = np.flatnonzero(~sound & (reason == FINE))
    if len(odd):
        reason[odd] = _reasons(odd, due, begun, reference, times, market)
        end = bars.last_position[number[odd]]
        running[odd] = begun[odd] & ~due.reached[odd] & (first[odd] <= end)
        # positions that mean nothing still have to be positions
        top = max(len(bars.day) - 1, 0)
        reference[odd] = np.minimum(reference[odd], np.clip(end, floor[odd], None)).clip(
            max=top
        )
        first[odd] = np.minimum(first[odd], due.last[odd])
    additive = market.venue.additive.take(number)
    until = _day_of_others(due.last, times, market)
    windows = Windows(floor, reference, first, due.last, additive, times.legs, until)
    return Resolved(
        windows, sound, running, reason, _rolled_back(due.rolled & sound, times, market)
    )


@dataclass(frozen=True)
class _Deadlines:
    """Deadline sessions, whether they are known, and whether the day was no session; (n,)."""

    last: IntArray
    reached: BoolArray
    rolled: BoolArray
    halted: BoolArray


def _deadlines(
    times: CallTimes, market: Market, calendar: Calendar, reference: IntArray
) -> _Deadlines:
    number = times.instrument
    last, is_due_session, is_due_beyond = calendar.look_up(times.deadline_day)
    reached = ~is_due_beyond
    rolled = is_due_session == 0
    dated = times.sessions == 0
    if is_due_beyond.any():
        _weekends_may_pass(reached, times, market)
        reached |= times.deadline_day <= market.known_day.take(number)
        reached |= _is_certain(times, market)
    halted = np.zeros(len(number), dtype=bool)
    if len(market.halted):
        halted = market.is_halted(number, times.deadline_day) & dated
        reached |= halted
    if not dated.all():
        end = market.bars.last_position[number]
        last = np.where(dated, last, reference + times.sessions)
        reached = np.where(dated, reached, (last <= end) | _is_certain(times, market))
        last = np.minimum(last, end)
        rolled &= dated
    return _Deadlines(last, reached, rolled, halted)


def _rolled_too_far(
    due: _Deadlines,
    sound: BoolArray,
    times: CallTimes,
    market: Market,
    rules: SettlementRules,
) -> IntArray:
    """Return the calls whose deadline session lies too long before the deadline."""
    far = np.flatnonzero(due.rolled & sound & ~due.halted)
    far = far[times.deadline_day[far] - market.bars.day[due.last[far]] > rules.roll_back_days]
    result: IntArray = far[~market.is_over[times.instrument[far]]]
    return result


def _is_certain(times: CallTimes, market: Market) -> BoolArray:
    """Return where no later price can matter, because every leg came to a fixed amount.

    A comparison whose own instrument alone did so waits for the others until its deadline.
    """
    certain = market.is_over.take(times.instrument)
    if times.legs is None or not certain.any():
        return certain
    over = np.append(market.is_over, True)  # a leg that is not there
    due = (times.deadline_day <= market.as_of_day) & (times.sessions == 0)
    result: BoolArray = certain & (over[times.legs].all(axis=1) | due)
    return result


def _day_of_others(last: IntArray, times: CallTimes, market: Market) -> IntArray | None:
    """Return the day on which other instruments are read, None where it is that of ``last``."""
    if times.legs is None or not len(market.bars.day):
        return None
    day = market.bars.day[np.clip(last, 0, len(market.bars.day) - 1)]
    ended = market.ended_day.take(times.instrument)
    is_fixed = market.is_over.take(times.instrument) & (times.sessions == 0)
    until: IntArray = np.where(
        is_fixed & (ended <= times.deadline_day), times.deadline_day, day
    )
    return until


def _rolled_back(rolled: BoolArray, times: CallTimes, market: Market) -> BoolArray:
    """Return where a deadline was no session of an instrument that still traded."""
    if market.has_endings:
        rolled &= times.deadline_day < market.ended_day.take(times.instrument)
    return rolled


def _reasons(
    odd: IntArray,
    due: _Deadlines,
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


def _weekends_may_pass(reached: BoolArray, times: CallTimes, market: Market) -> None:
    """Mark deadlines as reached that only a weekend parts from the last price.

    Once such a deadline has passed, no later price can bring another session before it where
    the instrument does not trade at weekends.
    """
    waiting = np.flatnonzero(~reached & (times.deadline_day <= market.as_of_day))
    number = times.instrument[waiting]
    has_prices = market.bars.last_position >= market.bars.offsets[:-1]
    closed = waiting[~market.venue.weekends[number] & has_prices[number]]
    last_day = market.bars.last_day[times.instrument[closed]]
    after = np.asarray(last_day + 1, dtype="datetime64[D]")
    until = np.asarray(times.deadline_day[closed] + 1, dtype="datetime64[D]")
    reached[closed[np.busday_count(after, until) == 0]] = True
