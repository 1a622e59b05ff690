"""Prices of an instrument in another currency, through a pair's history."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from foresaid.model.bars import FloatArray, IntArray
    from foresaid.model.price_history import PriceHistory
    from foresaid.model.records import Action, Instrument


@dataclass(frozen=True)
class Conversion:
    """How prices in one currency become prices in another.

    ``pair`` quotes units of its term for one unit of its base; ``divides`` where it is quoted
    the other way round.
    """

    pair: Instrument
    divides: bool

    def rates(self, history: PriceHistory, day: IntArray) -> FloatArray:
        """Return the rate known at each day: the pair's last close by then, NaN before all."""
        at = np.searchsorted(history.day, day, side="right") - 1
        if not len(history.day):
            return np.full(len(day), np.nan)
        rate = np.where(at >= 0, history.close[np.maximum(at, 0)], np.nan)
        return 1.0 / rate if self.divides else rate


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


def convert_history(
    history: PriceHistory, pair: PriceHistory, conversion: Conversion
) -> PriceHistory:
    """Return a history in the other currency; sessions before the pair's first are left out.

    High and low are converted at the same rate as the close, since a pair's path within the
    day is not known.
    """
    rates = conversion.rates(pair, history.day)
    keep = np.isfinite(rates)
    rates = rates[keep]
    return replace(
        history,
        day=history.day[keep],
        high=history.high[keep] * rates,
        low=history.low[keep] * rates,
        close=history.close[keep] * rates,
        total=None if history.total is None else history.total[keep] * rates,
        volume=None,
    )


def convert_actions(
    actions: Sequence[Action], pair: PriceHistory, conversion: Conversion, *, name: str
) -> list[Action]:
    """Return an instrument's actions under another name, amounts in the other currency."""
    days = np.array([one.effective for one in actions], dtype="datetime64[D]").astype(np.int64)
    rates = conversion.rates(pair, days)
    return [
        replace(
            one,
            instrument=name,
            amount=None if one.amount is None else one.amount * float(rate),
        )
        for one, rate in zip(actions, rates, strict=True)
        if one.amount is None or np.isfinite(rate)
    ]
