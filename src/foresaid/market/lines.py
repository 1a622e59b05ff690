"""What is known of one instrument: its sessions, the days that are none, and its dividends."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from foresaid.market.closures import FAR, days_in
from foresaid.model.days import day_number

if TYPE_CHECKING:
    from collections.abc import Sequence

    from foresaid.market.actions import FactorSteps
    from foresaid.model.bars import BoolArray, FloatArray, IntArray
    from foresaid.model.price_history import PriceHistory
    from foresaid.model.records import Action

NO_DAYS = np.zeros(0, dtype=np.int64)
_BY_SESSION = ("day", "high", "low", "close", "has_range", "factor", "total")


@dataclass(frozen=True)
class Line:
    """The sessions of one instrument, and what else is known of its days.

    Attributes
    ----------
    day, high, low, close, has_range, factor, total : ndarray, shape (n,)
        The columns of ``Bars``, oldest first, prices in continuous units.
    paid_day, paid : ndarray, shape (m,)
        Dividends that ``total`` does not hold yet, in continuous units.
    total_until, total_since : int
        The total return is known up to the one day, and again from the other one on.
    known_day : int
        The last day with a row in a file, a session or not; far in the past without any.
    aside : ndarray of int
        Days of rows on which no one traded, rising.
    halts : ndarray of int, shape (k, 2)
        First day of each halt and the day trading resumed.
    over : bool
        Whether it came to a fixed amount, so that no price can follow.
    queries : ndarray of int, shape (q, 3)
        Sessions whose prices rest on one in query: their days, and the number of the
        instrument and the day at which that price stands in a file.
    """

    day: IntArray
    high: FloatArray
    low: FloatArray
    close: FloatArray
    has_range: BoolArray
    factor: FloatArray
    total: FloatArray
    paid_day: IntArray
    paid: FloatArray
    total_until: int
    total_since: int
    known_day: int
    aside: IntArray
    halts: IntArray
    over: bool
    queries: IntArray

    def columns(self) -> dict[str, Any]:
        """Return what ``concatenate_bars`` reads."""
        columns = {name: getattr(self, name) for name in _BY_SESSION}
        known = self.total_until > -FAR or self.total_since < FAR
        return columns | {
            "total_known": known,
            "total_until": self.total_until,
            "total_since": self.total_since,
            "over": self.over,
        }

    def take(self, rows: slice | BoolArray) -> Line:
        """Return the line with some of its sessions."""
        kept: dict[str, Any] = {name: getattr(self, name)[rows] for name in _BY_SESSION}
        inside = np.isin(self.queries[:, 0], kept["day"])
        return replace(self, **kept, queries=self.queries[inside])


def line_of(
    history: PriceHistory | None,
    steps: FactorSteps,
    kind: str,
    actions: Sequence[Action],
    halts: IntArray,
    until: int,
) -> Line:
    """Return an instrument's own sessions, up to a day and without its halts.

    Parameters
    ----------
    history : PriceHistory or None
        Its prices without stale rows.
    steps : FactorSteps
        Its splits and rebases.
    kind : str
        What the prices are: raw, split-adjusted or total-return.
    actions : sequence of Action
        Its actions known by now.
    halts : ndarray of int, shape (k, 2)
        Its halts.
    until : int
        The last day that counts: that of settlement, or the last one before it ended.
    """
    paid = [
        (day_number(one.effective), one.amount)
        for one in actions
        if one.kind == "dividend" and one.amount and day_number(one.effective) <= until
    ]
    paid_day = np.array([day for day, _ in paid], dtype=np.int64)
    amount = np.array([amount for _, amount in paid], dtype=np.float64) * steps.at(paid_day)
    if history is None:
        none = np.zeros(0)
        plain = (NO_DAYS, none, none, none, none.astype(bool), none, none)
        since = int(paid_day.min(initial=FAR))
        ends = (-FAR, since, -FAR, NO_DAYS, halts, False, np.zeros((0, 3), dtype=np.int64))
        return Line(*plain, paid_day, amount, *ends)
    seen = np.concatenate((history.day, history.aside))
    seen.sort()
    keep = (history.day <= until) & ~days_in(halts, history.day)
    day, close = history.day[keep], history.close[keep]
    factor = _factor(kind, steps, day, seen)
    high, low = history.high[keep], history.low[keep]
    has_range = np.isfinite(high) & np.isfinite(low)
    line = Line(
        day=day,
        high=np.where(has_range, high, close) * factor,
        low=np.where(has_range, low, close) * factor,
        close=close * factor,
        has_range=has_range,
        factor=factor,
        total=close * factor,
        paid_day=paid_day,
        paid=amount,
        total_until=-FAR,
        total_since=int(paid_day.min(initial=FAR)),
        known_day=int(seen[seen <= until].max(initial=-FAR)),
        aside=history.aside[history.aside <= until],
        halts=halts,
        over=False,
        queries=np.zeros((0, 3), dtype=np.int64),
    )
    if kind == "total-return":
        return replace(line, total_until=FAR, paid_day=NO_DAYS, paid=np.zeros(0))
    return _with_column(line, history.total[keep]) if history.total is not None else line


def _factor(kind: str, steps: FactorSteps, day: IntArray, seen: IntArray) -> FloatArray:
    """Return continuous price over that of the file; adjusted ones have its last row's."""
    if kind == "total-return":
        return np.ones(len(day))
    if kind == "split-adjusted" and len(seen):
        return np.full(len(day), steps.at(seen[-1:])[0])
    return steps.at(day)


def _with_column(line: Line, column: FloatArray) -> Line:
    """Return a line with the total returns of its file, as far as they have no gap.

    From the first gap on they go on as the close does, and with the dividends on record.
    """
    gaps = np.flatnonzero(~np.isfinite(column))
    if not len(column) or (len(gaps) and gaps[0] == 0):
        return line
    if not len(gaps):
        return replace(line, total=column, total_until=FAR, paid_day=NO_DAYS, paid=np.zeros(0))
    at = int(gaps[0])
    with np.errstate(divide="ignore", invalid="ignore"):
        onward = line.close[at:] * (column[at - 1] / line.close[at - 1])
    since = line.paid_day >= line.day[at]
    return replace(
        line,
        total=np.concatenate((column[:at], onward)),
        total_until=int(line.day[at]) - 1,
        paid_day=line.paid_day[since],
        paid=line.paid[since],
    )


def without_query(line: Line, high: FloatArray, low: FloatArray, close: FloatArray) -> Line:
    """Return a line with other prices, its total returns in proportion to its closes."""
    with np.errstate(divide="ignore", invalid="ignore"):
        total = np.where(close == line.close, line.total, line.total * (close / line.close))
    return replace(line, high=high, low=low, close=close, total=total)


def reinvested(line: Line) -> Line:
    """Return a line with its dividends in its total returns.

    A dividend of ``d`` multiplies them by ``1 + d / close`` from the first session on or after
    its effective day: it is reinvested at that session's close, so that a level never depends
    on what came later.

    Examples
    --------
    >>> from foresaid.market.actions import factor_steps
    >>> from foresaid.model.price_history import PriceHistory
    >>> none, day = np.full(2, np.nan), np.array([5, 6])
    >>> prices = PriceHistory(day, none, none, np.array([50.0, 40.0]))
    >>> line = line_of(prices, factor_steps([]), "raw", [], np.zeros((0, 2), int), 9)
    >>> paid = replace(line, paid_day=np.array([6]), paid=np.array([2.0]))
    >>> reinvested(paid).total.tolist()
    [50.0, 42.0]
    """
    at = np.searchsorted(line.day, line.paid_day)
    real = np.flatnonzero(at < len(line.day))
    real = real[line.close[at[real]] > 0]
    if not len(real):
        return line
    growth = np.ones(len(line.day))
    np.multiply.at(growth, at[real], 1.0 + line.paid[real] / line.close[at[real]])
    return replace(line, total=line.total * np.cumprod(growth))
