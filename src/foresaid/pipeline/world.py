"""What a ledger holds, as the arrays that settlement and chance read."""

from __future__ import annotations

from dataclasses import dataclass, replace
from datetime import date
from itertools import pairwise
from typing import TYPE_CHECKING, Any

import numpy as np

from foresaid.claims.binding import quantity_arrays
from foresaid.claims.conditions import parse_condition
from foresaid.claims.phrases import parse_claim
from foresaid.ledger import queries
from foresaid.market.clock import local_times
from foresaid.market.closures import without_stale
from foresaid.market.currency import Converted, converted_name, find_conversion
from foresaid.market.histories import build_market
from foresaid.model.price_history import PriceHistory
from foresaid.pipeline.kinds import check_kinds
from foresaid.settle.outcomes import CallClaims
from foresaid.settle.windows import CallTimes

if TYPE_CHECKING:
    from collections.abc import Collection, Sequence

    import pandas as pd

    from foresaid.claims.claim import Claim
    from foresaid.ledger.store import Ledger
    from foresaid.market.known import Market
    from foresaid.model.bars import BoolArray, IntArray
    from foresaid.model.codebook import Codebook
    from foresaid.model.records import Action, Instrument

NO_DAYS = np.zeros(0, dtype=np.int64)
OTHER_CURRENCY = "no pair converts the instrument's prices to the stated currency"
OTHER_CURRENCIES = "no pair converts the prices of a compared instrument"


@dataclass(frozen=True)
class World:
    """The market with the instruments in the order of its numbers.

    The first ``n_own`` are those of the ledger, the others their prices in other currencies.
    """

    market: Market
    instruments: tuple[Instrument, ...]
    number: dict[str, int]
    actions: tuple[Action, ...]
    n_own: int

    def symbol_of(self, number: int) -> str:
        """Return the ledger's symbol of an instrument, whatever currency it is priced in."""
        one = self.instruments[number]
        ending = converted_name("", one.currency) if number >= self.n_own else ""
        return one.symbol.removesuffix(ending)


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
    n_own = len(instruments)
    check_kinds(instruments, codebook)
    histories = _histories(ledger, vintage)
    actions = queries.actions(ledger, vintage=vintage)
    series = queries.series_kinds(ledger, vintage=vintage)
    known = {one.symbol: one for one in instruments}
    prices: dict[str, PriceHistory | Converted] = dict(histories)
    for symbol, currency in sorted(_with_successors(set(currencies), actions, known)):
        own = known[symbol]
        conversion = find_conversion(known.values(), own=own.currency, wanted=currency)
        if conversion is None or conversion.pair.symbol not in histories:
            continue
        name = converted_name(symbol, currency)
        prices[name] = Converted(symbol, conversion)
        instruments.append(replace(own, symbol=name, currency=currency))
    market = build_market(instruments, prices, actions, series, codebook, as_of=as_of)
    number = {one.symbol: i for i, one in enumerate(instruments)}
    told = [
        replace(action, instrument=name)
        for name, one in prices.items()
        for action in actions
        if isinstance(one, Converted) and action.instrument == one.symbol
    ]
    return World(market, tuple(instruments), number, (*actions, *told), n_own)


def _with_successors(
    wanted: set[tuple[str, str]], actions: list[Action], known: dict[str, Instrument]
) -> set[tuple[str, str]]:
    """Return the wanted prices with those of whatever instruments became.

    An instrument's own prices go on in its own currency, whatever its successor is quoted in.
    """
    became = {one.instrument: one.into for one in actions if one.kind == "merger"}
    own = {(symbol, known[symbol].currency) for symbol in became}
    for symbol, currency in wanted | own:
        following = became.get(symbol, "")
        while following in known and (following, currency) not in wanted:
            theirs = known[following].currency
            if currency and theirs and theirs != currency:
                wanted.add((following, currency))
            elif theirs != currency:
                break
            following = became.get(following, "")
    return wanted


def _histories(ledger: Ledger, vintage: int) -> dict[str, PriceHistory]:
    """Return the price history of every instrument that has one, by symbol."""
    rows = queries.prices(ledger, vintage=vintage)
    symbols = {key: symbol for symbol, (key, _) in queries.instruments(ledger).items()}
    confirmed = confirmed_days(rows, queries.confirmations(ledger))
    bounds = np.flatnonzero(np.diff(rows.instrument, prepend=-1, append=-1))
    histories = {}
    for begin, end in pairwise(bounds):
        own = slice(int(begin), int(end))
        history = PriceHistory(
            rows.day[own],
            rows.high[own],
            rows.low[own],
            rows.close[own],
            rows.total[own],
            rows.volume[own],
            confirmed=confirmed.get(int(rows.instrument[begin]), NO_DAYS),
        )
        histories[symbols[int(rows.instrument[begin])]] = without_stale(history)
    return histories


def confirmed_days(
    rows: queries.PriceRows, confirmations: Sequence[queries.Confirmation]
) -> dict[int, IntArray]:
    """Return the days of each instrument whose prices are still those that were confirmed."""
    found: dict[int, set[int]] = {}
    for one in confirmations:
        begin, end = np.searchsorted(rows.instrument, [one.instrument, one.instrument + 1])
        at = begin + int(np.searchsorted(rows.day[begin:end], one.day))
        if at >= end or rows.day[at] != one.day:
            continue
        held = (float(rows.high[at]), float(rows.low[at]), float(rows.close[at]))
        same = all(
            a == b or (b is None and np.isnan(a))
            for a, b in zip(held, (one.high, one.low, one.close), strict=True)
        )
        if same:
            found.setdefault(one.instrument, set()).add(one.day)
    return {key: np.array(sorted(days), dtype=np.int64) for key, days in found.items()}


def wanted_currencies(ledger: Ledger, frame: pd.DataFrame) -> set[tuple[str, str]]:
    """Return the instruments that calls speak of in a currency other than their own.

    Conditions on instruments are calls as well: in the currency of their own instrument.
    """
    own = {symbol: one.currency for symbol, (_, one) in queries.instruments(ledger).items()}
    stated = set(zip(frame["instrument"], frame["currency"], frame["claim"], strict=True))
    spoken = {(symbol, currency, parse_claim(phrase)) for symbol, currency, phrase in stated}
    for text in set(frame["given"]) - {""}:
        condition = parse_condition(text, said=date.min)
        if condition.claim is not None:
            spoken.add((condition.instrument, "", condition.claim))
    wanted: set[tuple[str, str]] = set()
    for symbol, stated_in, claim in spoken:
        currency = stated_in or own[symbol]
        legs = {symbol, *claim.others}
        wanted |= {
            (leg, currency) for leg in legs if currency and own[leg] not in ("", currency)
        }
    return wanted


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
    values, units = quantity_arrays(parsed)
    kinds = np.array([claim.kind for claim in parsed], dtype=object)
    legs = _legs(parsed, codes, instruments, world)
    blocked = _blocked(frame, instruments)
    if legs is not None:
        blocked[(blocked == "") & _differ_in_currency(instruments, legs, world)] = (
            OTHER_CURRENCIES
        )
    return CallClaims(kinds[codes], values[codes], units[codes], blocked), legs


def _legs(
    parsed: list[Claim], codes: IntArray, instruments: list[Instrument], world: World
) -> IntArray | None:
    """Return the numbers of the other instruments of each call, None where there is none.

    Each is taken in the currency of the call's own instrument where the world has it.
    """
    width = max((len(claim.others) for claim in parsed), default=0)
    if not width:
        return None
    legs = np.full((len(codes), width), -1, dtype=np.int64)
    has_legs = np.array([bool(claim.others) for claim in parsed])
    for row in np.flatnonzero(has_legs[codes]):
        currency = instruments[row].currency
        for column, symbol in enumerate(parsed[codes[row]].others):
            converted = world.number.get(converted_name(symbol, currency))
            legs[row, column] = world.number[symbol] if converted is None else converted
    return legs


def _differ_in_currency(
    instruments: list[Instrument], legs: IntArray, world: World
) -> BoolArray:
    """Return where the legs of a comparison are quoted in different currencies."""
    quoted = np.array([*(one.currency for one in world.instruments), ""], dtype=object)
    own = np.array([one.currency for one in instruments], dtype=object)[:, None]
    theirs = quoted[legs]
    differ = (theirs != own) & (theirs != "") & (own != "")
    result: BoolArray = np.any((legs >= 0) & differ, axis=1)
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
