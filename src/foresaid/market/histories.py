"""From price rows and actions to the arrays that kernels read."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np

from foresaid.market.actions import FactorSteps, factor_steps
from foresaid.market.closures import FAR, days_in, halts_of, keep_rows
from foresaid.market.doubts import Doubts, find_doubts
from foresaid.market.endings import (
    NEVER,
    are_over,
    days_of_terms,
    ended_days,
    ending_of,
    with_endings,
)
from foresaid.model.bars import Bars, concatenate_bars
from foresaid.model.days import day_number

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence
    from datetime import date

    from foresaid.market.endings import Ending
    from foresaid.model.bars import BoolArray, FloatArray, IntArray
    from foresaid.model.codebook import Codebook
    from foresaid.model.price_history import PriceHistory
    from foresaid.model.records import Action, Instrument


@dataclass(frozen=True)
class Venue:
    """What settlement needs to know of each instrument; arrays (n_instruments,).

    Attributes
    ----------
    opens, closes : ndarray of int
        Local minutes after midnight.
    hours_known : ndarray of bool
        Whether the hours are the instrument's own, not the codebook's default.
    additive : ndarray of bool
        Whether prices are compared by difference.
    weekends : ndarray of bool
        Whether it trades on Saturdays and Sundays.
    total_return : ndarray of bool
        Whether its only prices are a total-return series, which has no levels.
    market : ndarray of str
        Market code, empty where it is not known; instruments of one market share its days.
    """

    opens: IntArray
    closes: IntArray
    hours_known: BoolArray
    additive: BoolArray
    weekends: BoolArray
    total_return: BoolArray
    market: np.ndarray[Any, np.dtype[np.object_]]


@dataclass(frozen=True)
class Market:
    """Everything known about prices on one day, in one vintage.

    Attributes
    ----------
    bars, venue : Bars, Venue
        Prices in continuous units, and what is known of each instrument.
    steps : tuple of FactorSteps
        Factors of each instrument.
    as_of_day : int
        The day, since 1970-01-01.
    ended_day : ndarray of int, shape (n_instruments,)
        When an instrument ended, far in the future for those that go on.
    known_day : ndarray of int, shape (n_instruments,)
        The last day with a row in the file, a session or not; far in the past without any.
    aside : tuple of ndarray of int
        Days of rows of each instrument that were left aside, rising.
    halts : tuple of ndarray of int, shape (k, 2)
        First day of each halt and the day trading resumed.
    doubts : Doubts or None
        Prices in query, None where there are none.
    """

    bars: Bars
    venue: Venue
    steps: tuple[FactorSteps, ...]
    as_of_day: int
    ended_day: IntArray
    known_day: IntArray
    aside: tuple[IntArray, ...]
    halts: tuple[IntArray, ...]
    doubts: Doubts | None = None

    @property
    def is_over(self) -> BoolArray:
        """Whether each instrument came to a fixed amount, shape (n_instruments,)."""
        return self.bars.over

    @cached_property
    def has_endings(self) -> bool:
        """Whether any instrument has ended."""
        return bool((self.ended_day < NEVER).any())

    @cached_property
    def longest_gap(self) -> int:
        """The most days from a session to the next one, or to the last row of a file."""
        tails = np.where(self.bars.last_day > -FAR // 2, self.known_day - self.bars.last_day, 0)
        return max(self.bars.longest_gap, int(tails.max(initial=0)))

    @cached_property
    def halted(self) -> IntArray:
        """The numbers of the instruments that were ever halted."""
        return np.flatnonzero([len(spans) > 0 for spans in self.halts]).astype(np.int64)

    def is_halted(self, instrument: IntArray, day: IntArray) -> BoolArray:
        """Return where trading was halted on a day that has passed, shape (n,)."""
        result = np.zeros(len(day), dtype=bool)
        for number in self.halted:
            rows = np.flatnonzero((instrument == number) & (day <= self.as_of_day))
            result[rows] = days_in(self.halts[number], day[rows])
        return result

    def halts_between(
        self, instrument: IntArray, after: IntArray, until: IntArray
    ) -> BoolArray:
        """Return where a halt lies on any day later than one and no later than another."""
        result = np.zeros(len(instrument), dtype=bool)
        for number in self.halted:
            rows = np.flatnonzero(instrument == number)
            for begin, resumed in self.halts[number]:
                result[rows] |= (begin <= until[rows]) & (resumed > after[rows] + 1)
        return result

    def level_factor(self, instrument: IntArray, day: IntArray) -> FloatArray:
        """Return continuous price over a price stated on that day, shape (n,)."""
        result = np.ones(len(day))
        for number in np.unique(instrument):
            rows = instrument == number
            result[rows] = self.steps[number].at(day[rows])
        return result

    def in_file_units(self, price: FloatArray, positions: IntArray) -> FloatArray:
        """Return continuous prices as they stand in the file, shape (n,).

        Undoing a factor, a conversion or an exchange may leave an error in the last places:
        a price that 12 significant digits state but for that error is given with those.
        """
        factor = self.bars.factor[positions]
        plain = price / factor
        with np.errstate(divide="ignore", invalid="ignore"):
            places = np.power(10.0, 11.0 - np.floor(np.log10(np.abs(plain))))
            short = np.where(np.isfinite(places), np.round(plain * places) / places, plain)
        noise = 8.0 * np.finfo(np.float64).eps * np.abs(plain)
        return np.where(np.abs(short - plain) <= noise, short, plain)


def build_market(
    instruments: Sequence[Instrument],
    histories: Mapping[str, PriceHistory],
    actions: Sequence[Action],
    series: Mapping[str, str],
    codebook: Codebook,
    *,
    as_of: date,
) -> Market:
    """Return the market of these instruments as it was known at the end of a day.

    Parameters
    ----------
    instruments : sequence of Instrument
        Their order becomes the instrument number.
    histories : mapping of str to PriceHistory
        By symbol; an instrument without prices may be absent.
    actions : sequence of Action
        Splits and rebases become factors, dividends total returns; an instrument that ends
        goes on at its terms.
    series : mapping of str to str
        What the prices are: raw (the default), split-adjusted or total-return. Split-adjusted
        prices are in the units of the last session of the file.
    codebook : Codebook
        Behaviour of the instrument kinds.
    as_of : date
        Sessions after this day are left out.
    """
    today = day_number(as_of)
    by_symbol: dict[str, list[Action]] = {one.symbol: [] for one in instruments}
    for action in actions:
        by_symbol[action.instrument].append(action)
    steps = tuple(factor_steps(by_symbol[one.symbol]) for one in instruments)
    kinds = np.array([series.get(one.symbol, "raw") for one in instruments], dtype=object)
    symbols = [one.symbol for one in instruments]
    known = {
        symbol: [one for one in by_symbol[symbol] if one.effective <= as_of]
        for symbol in symbols
    }
    halts = tuple(halts_of(by_symbol[symbol], today=today) for symbol in symbols)
    rows = {
        symbol: _traded(histories[symbol], spans)
        for symbol, spans in zip(symbols, halts, strict=True)
        if symbol in histories
    }
    columns = {
        symbol: _columns(rows.get(symbol), step, kind, known[symbol], today)
        for symbol, step, kind in zip(symbols, steps, kinds, strict=True)
    }
    found = {symbol: ending_of(known[symbol], today=today) for symbol in symbols}
    endings = {symbol: one for symbol, one in found.items() if one is not None}
    columns = with_endings(columns, endings, dict(zip(symbols, steps, strict=True)))
    over = are_over(symbols, endings)
    bars = concatenate_bars(
        symbols,
        [columns[one] | {"over": is_over} for one, is_over in zip(symbols, over, strict=True)],
    )
    venue = _venue(instruments, kinds == "total-return", codebook)
    right = _settled_sessions(bars, rows, halts, endings)
    return Market(
        bars,
        venue,
        steps,
        today,
        ended_days(symbols, endings),
        np.array([_last_row(histories.get(one), today) for one in symbols], dtype=np.int64),
        tuple(rows[one].aside if one in rows else _NO_DAYS for one in symbols),
        halts,
        find_doubts(bars, venue.additive, right, codebook.settlement),
    )


_NO_DAYS = np.zeros(0, dtype=np.int64)


def _traded(history: PriceHistory, halts: IntArray) -> PriceHistory:
    """Return the rows of a history outside its halts."""
    inside = days_in(halts, history.day)
    return keep_rows(history, ~inside) if inside.any() else history


def _last_row(history: PriceHistory | None, today: int) -> int:
    """Return the last day up to today that has a row, far in the past without any."""
    if history is None:
        return -FAR
    days = np.concatenate((history.day, history.aside))
    return int(days[days <= today].max(initial=-FAR))


def _settled_sessions(
    bars: Bars,
    rows: Mapping[str, PriceHistory],
    halts: Sequence[IntArray],
    endings: Mapping[str, Ending],
) -> IntArray:
    """Return the sessions that are in no query.

    A person has confirmed them, trading resumed on them, or terms set their price.
    """
    found: list[int] = []
    for number, symbol in enumerate(bars.symbols):
        own = bars.day[bars.offsets[number] : bars.offsets[number + 1]]
        inside = np.zeros(len(own), dtype=bool)
        if symbol in rows and len(rows[symbol].confirmed):
            inside = np.isin(own, rows[symbol].confirmed)
        for day in days_of_terms(symbol, endings):
            inside[np.flatnonzero(own >= day)[:2]] = True
        for resumed in halts[number][:, 1]:
            inside[np.flatnonzero(own >= resumed)[:1]] = True
        found += (bars.offsets[number] + np.flatnonzero(inside)).tolist()
    return np.array(found, dtype=np.int64)


def _columns(
    history: PriceHistory | None,
    steps: FactorSteps,
    kind: str,
    actions: Sequence[Action],
    today: int,
) -> dict[str, Any]:
    if history is None:
        names = ("day", "high", "low", "close", "has_range", "factor", "total")
        return dict.fromkeys(names, np.zeros(0)) | {"total_known": False}
    day, close = history.day, history.close
    factor = steps.at(day)
    if kind == "split-adjusted":
        # already in the units of the last session, whose factor holds throughout
        factor = np.full(len(day), factor[-1] if len(factor) else 1.0)
    has_range = np.isfinite(history.high) & np.isfinite(history.low)
    total, total_known = total_return(history, close * factor, steps.at(day), actions, kind)
    columns: dict[str, Any] = {
        "day": day,
        "high": np.where(has_range, history.high, close) * factor,
        "low": np.where(has_range, history.low, close) * factor,
        "close": close * factor,
        "has_range": has_range,
        "factor": factor,
        "total": total,
    }
    known = int(np.searchsorted(day, today, side="right"))
    cut = {name: column[:known] for name, column in columns.items()}
    return cut | {"total_known": total_known}


def total_return(
    history: PriceHistory,
    close: FloatArray,
    factor: FloatArray,
    actions: Sequence[Action],
    kind: str,
) -> tuple[FloatArray, bool]:
    """Return the total-return level of each session, and whether it is known.

    A total column or a total-return series is taken as it is. Otherwise a dividend of ``d``
    (``factor`` brings it from the units of its day to continuous ones) on its effective
    session multiplies the level from then on by ``1 + d / close``: it is
    reinvested at that session's close, so that the level never depends on what came later.
    Without any dividend on record the level is the close and counts as not known.
    """
    if kind == "total-return":
        return close, True
    if history.total is not None and np.isfinite(history.total).all() and len(history.total):
        return history.total, True
    paid = [one for one in actions if one.kind == "dividend" and one.amount]
    growth = np.ones(len(close))
    for one in paid:
        day = day_number(one.effective)
        at = int(np.searchsorted(history.day, day))
        if at < len(close) and close[at] > 0:
            growth[at] *= 1.0 + float(one.amount or 0.0) * factor[at] / close[at]
    return close * np.cumprod(growth), bool(paid)


def _venue(
    instruments: Sequence[Instrument], total_return: BoolArray, codebook: Codebook
) -> Venue:
    rules = codebook.settlement
    kinds = [codebook.instrument_kinds[one.kind] for one in instruments]
    known = np.array([bool(one.opens and one.closes) for one in instruments], dtype=bool)
    opens = [minutes(one.opens) if one.opens else rules.default_opens for one in instruments]
    closes = [
        minutes(one.closes) if one.closes else rules.default_closes for one in instruments
    ]
    return Venue(
        opens=np.array(opens, dtype=np.int64),
        closes=np.array(closes, dtype=np.int64),
        hours_known=known,
        additive=np.array([kind.scale == "difference" for kind in kinds], dtype=bool),
        weekends=np.array([kind.weekends for kind in kinds], dtype=bool),
        total_return=np.asarray(total_return, dtype=bool),
        market=np.array([one.market for one in instruments], dtype=object),
    )


def minutes(clock: str) -> int:
    """Return a time of day written HH:MM as minutes after midnight.

    Examples
    --------
    >>> minutes("17:30")
    1050
    """
    hours, _, rest = clock.partition(":")
    return int(hours) * 60 + int(rest)
