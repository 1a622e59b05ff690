"""Rows of a price file that are no sessions: stale repeats, and rows during a halt."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from foresaid.model.days import day_number

if TYPE_CHECKING:
    from collections.abc import Iterable

    from foresaid.model.bars import BoolArray, IntArray
    from foresaid.model.price_history import PriceHistory
    from foresaid.model.records import Action

FAR = int(np.iinfo(np.int64).max)
THURSDAY, SATURDAY = 3, 5  # days of the week from Monday on; 1970-01-01 was a Thursday


def without_stale(history: PriceHistory) -> PriceHistory:
    """Return a history without rows that only repeat the close because no one traded.

    Such a row has a volume of zero, the close of the row before it, and no high or low that
    differs from the close; an earlier row has a volume above zero, so that a file of zeros
    throughout counts as one without volumes. The days left out are kept in ``aside``.
    """
    if history.volume is None or len(history.day) < 2:
        return history
    close, volume = history.close, history.volume
    traded = np.logical_or.accumulate(volume > 0)
    repeats = np.zeros(len(close), dtype=bool)
    repeats[1:] = (close[1:] == close[:-1]) & traded[:-1]
    flat = ~(history.high != close) | np.isnan(history.high)
    flat &= ~(history.low != close) | np.isnan(history.low)
    stale = repeats & flat & (volume == 0)
    return keep_rows(history, ~stale) if stale.any() else history


def keep_rows(history: PriceHistory, keep: BoolArray) -> PriceHistory:
    """Return the rows to keep; the days of the others join ``aside``."""
    return replace(
        history,
        day=history.day[keep],
        high=history.high[keep],
        low=history.low[keep],
        close=history.close[keep],
        total=None if history.total is None else history.total[keep],
        volume=None if history.volume is None else history.volume[keep],
        aside=np.union1d(history.aside, history.day[~keep]).astype(np.int64),
    )


def halts_of(actions: Iterable[Action], *, today: int) -> IntArray:
    """Return the halts of one instrument known by ``today``.

    Shape (n, 2): first day of each halt, and the day trading resumed, far in the future where
    it has not. A second halt within a halt, and a resume without one, mean nothing.
    """
    spans: list[list[int]] = []
    for action in sorted(actions, key=lambda one: (one.effective, one.kind)):
        day = day_number(action.effective)
        is_halted = bool(spans) and spans[-1][1] == FAR
        if day > today:
            break
        if action.kind == "halt" and not is_halted:
            spans.append([day, FAR])
        elif action.kind == "resume" and is_halted:
            spans[-1][1] = day
    return np.array(spans, dtype=np.int64).reshape(-1, 2)


def days_in(spans: IntArray, day: IntArray) -> BoolArray:
    """Return which days lie in any of the spans, their last day excluded; shape (n,)."""
    if not len(spans):
        return np.zeros(len(day), dtype=bool)
    at = np.searchsorted(spans[:, 0], day, side="right") - 1
    inside: BoolArray = (at >= 0) & (day < spans[np.maximum(at, 0), 1])
    return inside


def reach_of(known_day: int, halts: IntArray, *, weekends: bool, today: int) -> int:
    """Return the day up to which it is known what the last close was.

    It is the last day with a row, and every day after it up to today on which no session can
    have been: Saturdays and Sundays where the instrument does not trade then, days of a halt.

    Examples
    --------
    >>> none = np.zeros((0, 2), dtype=np.int64)
    >>> reach_of(1, none, weekends=False, today=30)  # 1970-01-02, a Friday
    3
    """
    reach = known_day
    while -FAR < reach < today:
        day = reach + 1
        inside = (halts[:, 0] <= day) & (day < halts[:, 1])
        if inside.any():
            reach = min(int(halts[inside, 1].max()) - 1, today)
        elif not weekends and (day + THURSDAY) % 7 >= SATURDAY:
            reach = day
        else:
            break
    return reach
