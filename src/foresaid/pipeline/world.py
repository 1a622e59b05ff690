"""What a ledger holds, as the arrays that settlement and chance read."""

from __future__ import annotations

from dataclasses import dataclass, replace
from itertools import pairwise
from typing import TYPE_CHECKING, Any

import numpy as np

from foresaid.claims.binding import quantity_arrays
from foresaid.claims.phrases import parse_claim
from foresaid.claims.registry import KINDS
from foresaid.ledger import queries
from foresaid.market.clock import local_times
from foresaid.market.currency import (
    convert_actions,
    convert_history,
    converted_name,
    find_conversion,
)
from foresaid.market.histories import Market, PriceHistory, build_market
from foresaid.pipeline.kinds import check_kinds
from foresaid.settle.outcomes import CallClaims
from foresaid.settle.windows import CallTimes

if TYPE_CHECKING:
    from collections.abc import Collection
    from datetime import date

    import pandas as pd

    from foresaid.claims.claim import Claim
    from foresaid.ledger.store import Ledger
    from foresaid.model.bars import BoolArray, IntArray
    from foresaid.model.codebook import Codebook
    from foresaid.model.records import Action, Instrument

MAX_QUANTITIES = max(len(kind.number_slots) for kind in KINDS.values())
OTHER_CURRENCY = "no pair converts the instrument's prices to the stated currency"
OTHER_CURRENCIES = "compared with an instrument in another currency"


@dataclass(frozen=True)
class World:
    """The market with the instruments in the order of its numbers."""

    market: Market
    instruments: tuple[Instrument, ...]
    number: dict[str, int]
    actions: tuple[Action, ...]


@dataclass(frozen=True)
class CodedCalls:
    """Calls as arrays, with the frame they came from (same order, calls only)."""

    frame: pd.DataFrame
    times: CallTimes
    claims: CallClaims
    inverse: BoolArray


def load_world(
    ledger: Ledger,
    codebook: Codebook,
    *,
    as_of: date,
    vintage: int,
    currencies: Collection[tuple[str, str]] = (),
) -> World:
    """Return the market as it was known at the end of a day, in one vintage.

    ``currencies`` holds pairs of symbol and currency in which prices are wanted besides the
    instrument's own; those for which the ledger has no pair of currencies are left out.
    """
    instruments = [one for _, one in queries.instruments(ledger).values()]
    check_kinds(instruments, codebook)
    histories = _histories(ledger, vintage)
    actions = queries.actions(ledger, vintage=vintage)
    series = queries.series_kinds(ledger, vintage=vintage)
    known = {one.symbol: one for one in instruments}
    wanted = _with_successors(set(currencies), actions, known)
    for symbol, currency in sorted(wanted):
        own = known[symbol]
        conversion = find_conversion(known.values(), own=own.currency, wanted=currency)
        if conversion is None or conversion.pair.symbol not in histories:
            continue
        pair, name = histories[conversion.pair.symbol], converted_name(symbol, currency)
        paid = [one for one in actions if one.instrument == symbol]
        instruments.append(replace(own, symbol=name, currency=currency))
        if symbol in histories:
            histories[name] = convert_history(histories[symbol], pair, conversion)
        actions += [
            replace(one, into=converted_name(one.into, currency))
            if (one.into, currency) in wanted
            else one
            for one in convert_actions(paid, pair, conversion, name=name)
        ]
        series[name] = series.get(symbol, "raw")
    market = build_market(instruments, histories, actions, series, codebook, as_of=as_of)
    number = {one.symbol: i for i, one in enumerate(instruments)}
    return World(market, tuple(instruments), number, tuple(actions))


def _with_successors(
    wanted: set[tuple[str, str]], actions: list[Action], known: dict[str, Instrument]
) -> set[tuple[str, str]]:
    """Return the wanted prices with those of whatever these instruments became."""
    became = {one.instrument: one.into for one in actions if one.kind == "merger"}
    for symbol, currency in list(wanted):
        following = became.get(symbol, "")
        while following in known and (following, currency) not in wanted:
            if known[following].currency != currency:
                wanted.add((following, currency))
            following = became.get(following, "")
    return wanted


def _histories(ledger: Ledger, vintage: int) -> dict[str, PriceHistory]:
    """Return the price history of every instrument that has one, by symbol."""
    rows = queries.prices(ledger, vintage=vintage)
    symbols = {key: symbol for symbol, (key, _) in queries.instruments(ledger).items()}
    bounds = np.flatnonzero(np.diff(rows.instrument, prepend=-1, append=-1))
    histories = {}
    for begin, end in pairwise(bounds):
        own = slice(int(begin), int(end))
        histories[symbols[int(rows.instrument[begin])]] = PriceHistory(
            rows.day[own], rows.high[own], rows.low[own], rows.close[own], rows.total[own]
        )
    return histories


def wanted_currencies(ledger: Ledger, frame: pd.DataFrame) -> set[tuple[str, str]]:
    """Return the instruments that calls speak of in a currency other than their own."""
    own = {symbol: one.currency for symbol, (_, one) in queries.instruments(ledger).items()}
    stated = zip(frame["instrument"], frame["currency"], strict=True)
    return {(s, c) for s, c in set(stated) if c and own[s] and own[s] != c}


def coded_calls(frame: pd.DataFrame, world: World) -> CodedCalls:
    """Return the calls of a frame of ``queries.calls`` (no ``not a call`` rows) as arrays."""
    number = np.array(
        [
            world.number.get(converted_name(symbol, currency), world.number[symbol])
            for symbol, currency in zip(frame["instrument"], frame["currency"], strict=True)
        ],
        dtype=np.int64,
    )
    zones = [world.instruments[i].zone for i in number]
    day, minute = local_times(frame["said_at"].tolist(), zones)
    deadline = np.array(
        [text or "1970-01-01" for text in frame["deadline"]], dtype="datetime64[D]"
    )
    sessions = np.array([count or 0 for count in frame["sessions"]], dtype=np.int64)
    claims, legs = _claims(frame, [world.instruments[i] for i in number], world)
    times = CallTimes(number, day, minute, deadline.astype(np.int64), sessions, legs)
    inverse = np.array([one.sense == "inverse" for one in world.instruments], dtype=bool)
    return CodedCalls(frame, times, claims, inverse[number])


def _claims(
    frame: pd.DataFrame, instruments: list[Instrument], world: World
) -> tuple[CallClaims, IntArray | None]:
    """Return what the calls say and what they compare; each distinct phrase is read once."""
    phrases, codes = np.unique(frame["claim"].to_numpy(dtype=str), return_inverse=True)
    parsed = [parse_claim(str(phrase)) for phrase in phrases]
    values, units = quantity_arrays(parsed, MAX_QUANTITIES)
    kinds = np.array([claim.kind for claim in parsed], dtype=object)
    legs = _legs(parsed, world)
    blocked = _blocked(frame, instruments)
    if legs is not None:
        legs = legs[codes]
        blocked[(blocked == "") & _differ_in_currency(instruments, legs, world)] = (
            OTHER_CURRENCIES
        )
    return CallClaims(kinds[codes], values[codes], units[codes], blocked), legs


def _legs(parsed: list[Claim], world: World) -> IntArray | None:
    """Return the numbers of the other instruments of each phrase, None where there is none."""
    width = max((len(claim.others) for claim in parsed), default=0)
    if not width:
        return None
    legs = np.full((len(parsed), width), -1, dtype=np.int64)
    for row, claim in enumerate(parsed):
        for column, symbol in enumerate(claim.others):
            legs[row, column] = world.number[symbol]
    return legs


def _differ_in_currency(
    instruments: list[Instrument], legs: IntArray, world: World
) -> BoolArray:
    """Return where the legs of a comparison are quoted in different currencies."""
    quoted = np.array([*(one.currency for one in world.instruments), ""], dtype=object)
    own = np.array([one.currency for one in instruments], dtype=object)[:, None]
    theirs = quoted[legs]
    result: BoolArray = np.any((legs >= 0) & (theirs != own), axis=1)
    return result


def _blocked(
    frame: pd.DataFrame, instruments: list[Instrument]
) -> np.ndarray[Any, np.dtype[np.object_]]:
    blocked = np.full(len(frame), "", dtype=object)
    own = np.array([one.currency for one in instruments], dtype=object)
    stated = frame["currency"].to_numpy(dtype=object)
    differs = (stated != "") & (own != "") & (stated != own)
    blocked[differs] = OTHER_CURRENCY
    return blocked
