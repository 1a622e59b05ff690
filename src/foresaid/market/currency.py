"""Prices of an instrument in another currency, through a pair's history."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Iterable

    from foresaid.market.lines import Line
    from foresaid.model.bars import FloatArray, IntArray
    from foresaid.model.records import Instrument


@dataclass(frozen=True)
class Conversion:
    """How prices in one currency become prices in another.

    ``pair`` quotes units of its term for one unit of its base; ``divides`` where it is quoted
    the other way round.
    """

    pair: Instrument
    divides: bool

    def rates(self, pair: Line, day: IntArray) -> FloatArray:
        """Return the rate known at each day: the pair's last close by then, NaN before all."""
        at = np.searchsorted(pair.day, day, side="right") - 1
        if not len(pair.day):
            return np.full(len(day), np.nan)
        plain = pair.close / pair.factor
        rate = np.where(at >= 0, plain[np.maximum(at, 0)], np.nan)
        return 1.0 / rate if self.divides else rate


@dataclass(frozen=True)
class Converted:
    """Prices of the instrument ``symbol`` in another currency."""

    symbol: str
    conversion: Conversion


def find_conversion(
    instruments: Iterable[Instrument], *, own: str, wanted: str
) -> Conversion | None:
    """Return how to come from one currency to another through one pair, None without any."""
    for one in instruments:
        if one.kind == "pair" and (one.base, one.term) == (own, wanted):
            return Conversion(one, divides=False)
    for one in instruments:
        if one.kind == "pair" and (one.base, one.term) == (wanted, own):
            return Conversion(one, divides=True)
    return None


def converted_name(symbol: str, currency: str) -> str:
    """Return the name of an instrument's prices in another currency."""
    return f"{symbol} in {currency}"


def convert_line(
    line: Line, pair: Line, conversion: Conversion, *, pair_number: int, also: int | None
) -> Line:
    """Return a line in the other currency; sessions before the pair's first are left out.

    High and low are converted at the same rate as the close, since a pair's path within the
    day is not known. A dividend is converted at the rate of its effective day.

    Parameters
    ----------
    line, pair : Line
        The prices, and those of the pair.
    conversion : Conversion
        How the pair is quoted.
    pair_number : int
        Number of the pair, to tell where a rate in query stands.
    also : int or None
        Another day whose rate is used: that of the terms of an end.
    """
    rates, paid_at = conversion.rates(pair, line.day), conversion.rates(pair, line.paid_day)
    keep, known = np.isfinite(rates), np.isfinite(paid_at)
    rates, kept = rates[keep], line.take(keep)
    days = kept.day if also is None else np.append(kept.day, also)
    return replace(
        kept,
        high=kept.high * rates,
        low=kept.low * rates,
        close=kept.close * rates,
        total=kept.total * rates,
        paid_day=line.paid_day[known],
        paid=line.paid[known] * paid_at[known],
        queries=np.concatenate((kept.queries, _rates_in_query(pair, pair_number, days))),
    )


def _rates_in_query(pair: Line, number: int, day: IntArray) -> IntArray:
    """Return the days whose rate is a price in query, with where it stands; shape (q, 3)."""
    if not len(pair.queries):
        return np.zeros((0, 3), dtype=np.int64)
    at = np.searchsorted(pair.day, day, side="right") - 1
    day, of_rate = day[at >= 0], pair.day[at[at >= 0]]
    inside = np.isin(of_rate, pair.queries[:, 0])
    numbers = np.full(int(inside.sum()), number, dtype=np.int64)
    return np.column_stack((day[inside], numbers, of_rate[inside]))
