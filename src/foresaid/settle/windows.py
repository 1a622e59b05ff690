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
    from foresaid.model.bars import BoolArray, FloatArray, IntArray
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


FINE, NO_REFERENCE, RUNS, NO_DEADLINE_PRICE, EMPTY, SAME_CLOSE = range(6)
REASONS = (
    "",
    "no price yet on or after the statement",
    "the window still runs",
    "no price at the deadline",
    "the deadline is before the reference session",
    "the deadline close is the reference close",
)
VOID_REASONS = (EMPTY, SAME_CLOSE)


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
    last, is_due_session, is_due_beyond = calendar.look_up(times.deadline_day)
    reached = ~is_due_beyond
    rolled = is_due_session == 0
    dated = times.sessions == 0
    if is_due_beyond.any():
        _weekends_may_pass(reached, times, market)
        reached |= market.is_over.take(number)
    if not dated.all():
        end = bars.last_position[number]
        last = np.where(dated, last, reference + times.sessions)
        reached = np.where(dated, reached, (last <= end) | market.is_over[number])
        last = np.minimum(last, end)
        rolled &= dated
    sound = (last > reference) & reached & begun
    reason, running = np.zeros(len(number), dtype=np.int64), np.zeros(len(number), dtype=bool)
    if bars.longest_gap > rules.roll_back_days:
        far = np.flatnonzero(rolled & sound)
        far = far[times.deadline_day[far] - bars.day[last[far]] > rules.roll_back_days]
        far = far[~market.is_over[number[far]]]
        sound[far], reason[far] = False, NO_DEADLINE_PRICE
    odd = np.flatnonzero(~sound & (reason == FINE))
    if len(odd):
        length = last[odd] - reference[odd]
        state = _State(begun[odd], reached[odd], dated[odd], length, times.deadline_day[odd])
        reason[odd] = _reasons(state, market)
        end = bars.last_position[number[odd]]
        running[odd] = state.begun & ~state.reached & (first[odd] <= end)
        # positions that mean nothing still have to be positions
        top = max(len(bars.day) - 1, 0)
        reference[odd] = np.minimum(reference[odd], np.clip(end, floor[odd], None)).clip(
            max=top
        )
        first[odd] = np.minimum(first[odd], last[odd])
    additive = market.venue.additive.take(number)
    windows = Windows(floor, reference, first, last, additive, times.legs)
    return Resolved(
        windows, sound, running, reason, _rolled_back(rolled & sound, times, market)
    )


def _rolled_back(rolled: BoolArray, times: CallTimes, market: Market) -> BoolArray:
    """Return where a deadline was no session of an instrument that still traded."""
    if market.has_endings:
        rolled &= times.deadline_day < market.ended_day.take(times.instrument)
    return rolled


@dataclass(frozen=True)
class _State:
    """What decides why a call is not fit to be judged on its deadline; arrays (n,)."""

    begun: BoolArray
    reached: BoolArray
    dated: BoolArray
    length: IntArray
    deadline_day: IntArray


def _reasons(state: _State, market: Market) -> IntArray:
    reason = np.full(len(state.begun), NO_DEADLINE_PRICE, dtype=np.int64)
    reason[~state.reached & (~state.dated | (state.deadline_day > market.as_of_day))] = RUNS
    reason[state.reached & (state.length == 0)] = SAME_CLOSE
    reason[state.reached & (state.length < 0)] = EMPTY
    reason[~state.begun] = NO_REFERENCE
    reason[~state.begun & state.reached] = EMPTY
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
