"""From price rows and actions to the arrays that kernels read."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from foresaid.market.actions import factor_steps
from foresaid.market.closures import halts_of, reach_of
from foresaid.market.currency import Converted, convert_line, converted_name
from foresaid.market.doubts import Doubts, find_doubts
from foresaid.market.endings import NEVER, ended_days, ending_of, with_endings
from foresaid.market.known import Market, Venue
from foresaid.market.lines import line_of, reinvested, without_query
from foresaid.model.bars import concatenate_bars
from foresaid.model.days import day_number
from foresaid.model.price_history import PriceHistory

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence
    from datetime import date

    from foresaid.market.lines import Line
    from foresaid.model.bars import Bars, BoolArray, IntArray
    from foresaid.model.codebook import Codebook
    from foresaid.model.records import Action, Instrument


def build_market(
    instruments: Sequence[Instrument],
    histories: Mapping[str, PriceHistory | Converted],
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
    histories : mapping of str to PriceHistory or Converted
        By symbol; an instrument without prices may be absent. Instruments that are the prices
        of another one in another currency come after all others.
    actions : sequence of Action
        Splits and rebases become factors, dividends total returns; an instrument that ends
        goes on at its terms.
    series : mapping of str to str
        What the prices are: raw (the default), split-adjusted or total-return. Split-adjusted
        prices are in the units of the last row of the file.
    codebook : Codebook
        Behaviour of the instrument kinds.
    as_of : date
        Sessions after this day are left out.
    """
    today = day_number(as_of)
    converted = {name: one for name, one in histories.items() if isinstance(one, Converted)}
    files = {name: one for name, one in histories.items() if isinstance(one, PriceHistory)}
    facts = _Facts(instruments, actions, series, converted, today)
    filed = facts.lines_of(files)
    venue = _venue(instruments, facts.total_return, codebook)
    symbols = list(filed)
    bars = concatenate_bars(symbols, [line.columns() for line in filed.values()])
    right = _settled_sessions(bars, filed, files)
    additive = venue.additive[: len(symbols)]
    found = find_doubts(bars, additive, right, codebook.settlement)
    if found is not None:
        filed = _with_queries(filed, found)
    lines = facts.carried_on(filed)
    reach = [
        NEVER
        if line.over
        else reach_of(line.known_day, line.halts, weekends=bool(weekends), today=today)
        for line, weekends in zip(lines.values(), venue.weekends, strict=True)
    ]
    bars = _bars_of(lines, reach)
    doubts = None
    if found is not None:
        clean = _bars_of(facts.carried_on(_cleaned(filed, found)), reach)
        doubts = _doubts_of(found, bars, clean, lines)
    return Market(
        bars,
        venue,
        tuple(facts.steps.values()),
        today,
        ended_days(list(lines), facts.endings),
        facts.file_of,
        tuple(line.aside for line in lines.values()),
        tuple(line.halts for line in lines.values()),
        doubts,
    )


class _Facts:
    """What is known of each instrument besides its prices, by symbol."""

    def __init__(
        self,
        instruments: Sequence[Instrument],
        actions: Sequence[Action],
        series: Mapping[str, str],
        converted: Mapping[str, Converted],
        today: int,
    ) -> None:
        self.today, self.converted = today, converted
        self.number = {one.symbol: i for i, one in enumerate(instruments)}
        self.currency = {one.symbol: one.currency for one in instruments}
        own = {one.symbol: one.symbol for one in instruments}
        own |= {name: one.symbol for name, one in converted.items()}
        self.own = own
        by_symbol: dict[str, list[Action]] = {symbol: [] for symbol in own}
        for action in actions:
            by_symbol[action.instrument].append(action)
        self.kinds = {symbol: series.get(one, "raw") for symbol, one in own.items()}
        # what a total-return series says is as it is
        self.steps = {
            symbol: factor_steps([] if self.kinds[one] == "total-return" else by_symbol[one])
            for symbol, one in own.items()
        }
        self.actions = {
            symbol: [one for one in by_symbol[symbol] if day_number(one.effective) <= today]
            for symbol in own
        }
        self.endings = {}
        for symbol, one in own.items():
            ending = ending_of(self.actions[one], today=today)
            if ending is not None:
                into = self._in_currency(ending.into, self.currency[symbol])
                self.endings[symbol] = replace(ending, into=into)

    def _in_currency(self, symbol: str, currency: str) -> str:
        """Return whose prices are those of an instrument in a currency, empty for none."""
        theirs = self.currency.get(symbol, "")
        if not theirs or not currency or theirs == currency:
            return symbol
        name = converted_name(symbol, currency)
        return name if name in self.converted else ""

    @property
    def total_return(self) -> BoolArray:
        """Whether each series is one of total returns, shape (n,)."""
        return np.array([kind == "total-return" for kind in self.kinds.values()], dtype=bool)

    @property
    def file_of(self) -> IntArray:
        """The number of the instrument in whose file the prices stand, shape (n,)."""
        return np.array([self.number[own] for own in self.own.values()], dtype=np.int64)

    def lines_of(self, histories: Mapping[str, PriceHistory]) -> dict[str, Line]:
        """Return the sessions of each file up to today or the end of its instrument."""
        lines = {}
        for symbol, own in self.own.items():
            if symbol != own:
                continue
            ending = self.endings.get(symbol)
            until = self.today if ending is None else ending.day - 1
            lines[symbol] = line_of(
                histories.get(symbol),
                self.steps[symbol],
                self.kinds[symbol],
                self.actions[symbol],
                halts_of(self.actions[symbol], today=self.today),
                until,
            )
        return lines

    def carried_on(self, filed: Mapping[str, Line]) -> dict[str, Line]:
        """Return the lines of all instruments: converted, and carried on where they end."""
        lines, endings = dict(filed), dict(self.endings)
        for name, one in self.converted.items():
            pair, ending = one.conversion.pair.symbol, endings.get(name)
            lines[name] = convert_line(
                filed[one.symbol],
                filed[pair],
                one.conversion,
                pair_number=self.number[pair],
                also=None if ending is None else ending.day,
            )
            if ending is not None and ending.amount:
                rate = one.conversion.rates(filed[pair], np.array([ending.day]))
                endings[name] = replace(ending, amount=ending.amount * float(rate[0]))
        lines = {symbol: reinvested(lines[symbol]) for symbol in self.own}
        return with_endings(lines, endings, self.steps)


def _bars_of(lines: Mapping[str, Line], reach: Sequence[int]) -> Bars:
    columns = [
        line.columns() | {"reach": day} for line, day in zip(lines.values(), reach, strict=True)
    ]
    return concatenate_bars(list(lines), columns)


def _settled_sessions(
    bars: Bars, filed: Mapping[str, Line], histories: Mapping[str, PriceHistory]
) -> IntArray:
    """Return the sessions that are in no query: confirmed, or the first after a halt."""
    found = [np.zeros(0, dtype=np.int64)]
    for offset, (symbol, line) in zip(bars.offsets, filed.items(), strict=False):
        inside = np.zeros(len(line.day), dtype=bool)
        if symbol in histories and len(histories[symbol].confirmed):
            inside = np.isin(line.day, histories[symbol].confirmed)
        for resumed in line.halts[:, 1]:
            inside[np.flatnonzero(line.day >= resumed)[:1]] = True
        found.append(offset + np.flatnonzero(inside))
    return np.concatenate(found)


def _with_queries(filed: Mapping[str, Line], found: Doubts) -> dict[str, Line]:
    """Return the lines with the days of their sessions in query."""
    result = {}
    for number, (symbol, line) in enumerate(filed.items()):
        own = slice(found.bars.offsets[number], found.bars.offsets[number + 1])
        day = line.day[found.any[own]]
        queries = np.column_stack((day, np.full_like(day, number), day))
        result[symbol] = replace(line, queries=queries)
    return result


def _cleaned(filed: Mapping[str, Line], found: Doubts) -> dict[str, Line]:
    """Return the lines without their prices in query."""
    result, bars = dict(filed), found.bars
    for number, (symbol, line) in enumerate(filed.items()):
        if len(line.queries):
            own = slice(bars.offsets[number], bars.offsets[number + 1])
            result[symbol] = without_query(line, bars.high[own], bars.low[own], bars.close[own])
    return result


def _doubts_of(found: Doubts, bars: Bars, clean: Bars, lines: Mapping[str, Line]) -> Doubts:
    """Return the doubts of all sessions: of each file, and of what rests on its prices."""
    session, origin = [], []
    for number, line in enumerate(lines.values()):
        day, of_number, of_day = line.queries[np.isin(line.queries[:, 0], line.day)].T
        session.append(bars.at_or_before(np.full_like(day, number), day))
        origin.append(bars.at_or_before(of_number, of_day))
    masks = (found.close, found.high, found.low)
    close, high, low = (_moved(mask, found.bars, bars) for mask in masks)
    at, of = np.concatenate(session), np.concatenate(origin)
    order = np.argsort(at, kind="stable")
    prices = replace(bars, high=clean.high, low=clean.low, close=clean.close, total=clean.total)
    return Doubts(close, high, low, prices, at[order], of[order])


def _moved(mask: BoolArray, bars: Bars, others: Bars) -> BoolArray:
    """Return a mask of the sessions of some bars as one of other bars that hold them all."""
    moved = np.zeros(len(others.day), dtype=bool)
    owner = np.searchsorted(bars.offsets, np.flatnonzero(mask), side="right") - 1
    moved[others.at_or_before(owner, bars.day[mask])] = True
    return moved


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
