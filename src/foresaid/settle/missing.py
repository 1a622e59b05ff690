"""Sessions that are missing from a file although the market was open.

Instruments with the same market code share their trading days. Where another one of them
traded between the day a call needs and the session its own file has for it, a price is missing:
the next or the last one there is would be a wrong answer, so the call stays open.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from foresaid.market.closures import days_in

if TYPE_CHECKING:
    from foresaid.market.histories import Market
    from foresaid.model.bars import BoolArray, IntArray
    from foresaid.settle.windows import CallTimes, Resolved

MISSING = "a price is missing: its market traded on a day that the call needs"


def lacks_session(
    times: CallTimes, resolved: Resolved, reference_day: IntArray, market: Market
) -> BoolArray:
    """Return where the reference or the deadline session is missing from the file.

    Parameters
    ----------
    times : CallTimes
        The n calls.
    resolved : Resolved
        Their windows.
    reference_day : ndarray of int, shape (n,)
        First day whose close may be the reference.
    market : Market
        Prices, with the market codes of the instruments.

    Returns
    -------
    ndarray of bool, shape (n,)
        False where no market code is known or the window is not sound.
    """
    result = np.zeros(len(times.instrument), dtype=bool)
    codes = market.venue.market[times.instrument]
    for code in sorted(set(codes.tolist()) - {""}):
        days = _trading_days(market, code)
        rows = np.flatnonzero((codes == code) & resolved.matured)
        own = market.bars.day[resolved.windows.reference[rows]]
        first = days[np.searchsorted(days, reference_day[rows])]
        result[rows] |= first < own
        dated = times.sessions[rows] == 0
        last = market.bars.day[resolved.windows.last[rows]]
        due = np.minimum(times.deadline_day[rows], market.ended_day[times.instrument[rows]] - 1)
        latest = days[np.maximum(np.searchsorted(days, due, side="right") - 1, 0)]
        result[rows] |= dated & (latest > last)
        for row in rows[result[rows] & _leaves_aside(market, times.instrument[rows])]:
            at = np.searchsorted(rows, row)
            gaps = [
                (int(reference_day[row]), int(own[at])),
                (int(last[at]) + 1, int(due[at]) + 1),
            ]
            number = int(times.instrument[row])
            result[row] = any(
                _lacks_any(market, number, days, *gap) for gap in gaps[: 1 + dated[at]]
            )
    return result


def _leaves_aside(market: Market, instrument: IntArray) -> BoolArray:
    """Return which instruments have rows that were left aside, or halts; shape (n,)."""
    some = [
        len(days) + len(spans) > 0
        for days, spans in zip(market.aside, market.halts, strict=True)
    ]
    result: BoolArray = np.array(some, dtype=bool)[instrument]
    return result


def _lacks_any(market: Market, number: int, days: IntArray, begin: int, end: int) -> bool:
    """Return whether a day of the market in a gap is neither left aside nor in a halt."""
    inside = days[(days >= begin) & (days < end)]
    known = np.isin(inside, market.aside[number]) | days_in(market.halts[number], inside)
    return bool((~known).any())


def _trading_days(market: Market, code: str) -> IntArray:
    """Return every day on which any instrument of a market traded, rising."""
    offsets = market.bars.offsets
    members = np.flatnonzero(market.venue.market == code)
    days = [market.bars.day[offsets[i] : offsets[i + 1]] for i in members]
    return np.unique(np.concatenate(days))
