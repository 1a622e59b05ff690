"""Where each call is judged: reference, path and deadline sessions, no look-ahead.

The conventions are those of docs/settlement.md: the reference is the close of the first
session whose close is at or after publication; a path runs from the first session that opens
after publication through the deadline session; a deadline that is no session rolls back.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

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
    """

    instrument: IntArray
    said_day: IntArray
    said_minute: FloatArray
    deadline_day: IntArray
    sessions: IntArray


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
    reference_day, first_day = publication_days(times, market, rules)
    floor = bars.offsets[number]
    end = bars.offsets[number + 1] - 1
    reference = bars.at_or_after(number, reference_day)
    first = bars.at_or_after(number, first_day)
    dated = times.sessions == 0
    by_date = bars.at_or_before(number, times.deadline_day)
    last = np.where(dated, by_date, reference + times.sessions)
    last_day = bars.day[np.maximum(end, 0)] if len(bars.day) else np.zeros_like(end)
    reached = _reached(times, market, last_day, dated, last <= end)
    begun = reference <= end
    reason = np.full(len(number), FINE, dtype=np.int64)
    target = np.minimum(last, end)
    target_day = bars.day[np.maximum(target, 0)] if len(bars.day) else np.zeros_like(end)
    gap = times.deadline_day - target_day
    reason[begun & reached & dated & (gap > rules.roll_back_days)] = NO_DEADLINE_PRICE
    reason[begun & ~reached] = np.where(
        times.deadline_day[begun & ~reached] > market.as_of_day, RUNS, NO_DEADLINE_PRICE
    )
    reason[begun & ~reached & ~dated] = RUNS
    reason[begun & reached & (last == reference)] = SAME_CLOSE
    reason[begun & reached & (last < reference)] = EMPTY
    reason[~begun] = np.where(dated & reached, EMPTY, NO_REFERENCE)[~begun]
    safe = np.minimum(reference, np.maximum(end, floor))
    windows = Windows(
        floor, safe, np.minimum(first, target), target, market.venue.additive[number]
    )
    matured = reason == FINE
    running = begun & ~reached & (first <= end)
    return Resolved(windows, matured, running, reason, matured & dated & (gap > 0))


def publication_days(
    times: CallTimes, market: Market, rules: SettlementRules
) -> tuple[IntArray, IntArray]:
    """Return the first day whose close, and the first day whose opening, may follow.

    A session is dated by its close; one that opens the evening before closes on its day.

    Returns
    -------
    reference_day, first_day : ndarray of int, shape (n,)
        The reference is the first session on or after the one, the path begins with the
        first session on or after the other.
    """
    opens = market.venue.opens[times.instrument]
    closes = market.venue.closes[times.instrument]
    timed = times.said_minute >= 0
    after_close = np.where(timed, times.said_minute > closes, rules.day_only == "after-close")
    before_open = timed & (times.said_minute < opens)
    overnight = timed & (opens > closes)
    reference_day = times.said_day + after_close
    first_day = times.said_day + 1 - before_open + overnight
    return reference_day, first_day


def _reached(
    times: CallTimes, market: Market, last_day: IntArray, dated: BoolArray, known: BoolArray
) -> BoolArray:
    """Return whether the deadline session is known.

    Prices up to the deadline are enough; so are prices up to the last weekday before it, once
    the deadline has passed, where the instrument does not trade at weekends.
    """
    passed = times.deadline_day <= last_day
    waiting = np.flatnonzero(dated & ~passed & (times.deadline_day <= market.as_of_day))
    closed = waiting[~market.venue.weekends[times.instrument[waiting]]]
    after = np.asarray(last_day[closed] + 1, dtype="datetime64[D]")
    until = np.asarray(times.deadline_day[closed] + 1, dtype="datetime64[D]")
    passed[closed[np.busday_count(after, until) == 0]] = True
    return np.where(dated, passed, known)
