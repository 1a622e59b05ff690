"""Prices in query: which ones calls wait for, and a person's word that one is right."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from foresaid.claims.paths import LOOK_BACK
from foresaid.ingest.dates import parse_date
from foresaid.ledger import queries, writes
from foresaid.model.codebook import parse_codebook
from foresaid.model.days import day_of
from foresaid.model.errors import UsageError
from foresaid.model.said import CellFault
from foresaid.pipeline.settling import judge
from foresaid.settle.outcomes import PRICE_QUERY

if TYPE_CHECKING:
    from collections.abc import Iterator

    from foresaid.ledger.store import Ledger
    from foresaid.model.bars import IntArray
    from foresaid.pipeline.outcome_rows import Judgement

QUERY_COLUMNS = ("instrument", "session", "price", "value", "close", "close_before", "calls")


@dataclass(frozen=True)
class Confirmation:
    """Whose prices are right on which session, by whose word, on what evidence."""

    instrument: str
    session: str
    who: str
    evidence: str
    at: str


def confirm_prices(ledger: Ledger, request: Confirmation) -> str:
    """Keep a person's word that the prices of a session are right as they stand.

    Returns
    -------
    str
        The close, as the file has it.

    Raises
    ------
    UsageError
        If there is no such instrument or session, or the evidence is missing.
    """
    known = queries.instruments(ledger)
    if request.instrument not in known:
        raise UsageError(f"There is no instrument {request.instrument!r} in this ledger.")
    if not request.evidence.strip():
        raise UsageError("A confirmation needs its evidence: --evidence TEXT.")
    session = parse_date(request.session)
    if isinstance(session, CellFault):
        raise UsageError(f"{session.message}. {session.hint}")
    row = queries.price_source(
        ledger, request.instrument, session.isoformat(), vintage=queries.vintage(ledger)
    )
    if row is None:
        raise UsageError(f"There is no price of {request.instrument} on {session}.")
    confirmation = {
        "instrument": known[request.instrument][0],
        "session": session.isoformat(),
        **{name: row[name] for name in ("high", "low", "close")},
        "confirmed_at": request.at,
        "who": request.who,
        "evidence": request.evidence,
    }
    with ledger.writing():
        writes.add_confirmation(ledger, confirmation, at=request.at)
    return f"{row['close']:g}"


def prices_in_query(ledger: Ledger) -> list[dict[str, Any]]:
    """Return the prices that open calls are waiting for, one row each.

    Columns are those of ``QUERY_COLUMNS``; prices stand as in the file.

    Raises
    ------
    UsageError
        If nothing is settled yet.
    """
    settlement = queries.latest_settlement(ledger)
    if settlement is None:
        raise UsageError("Nothing is settled yet. Run: foresaid settle")
    found = queries.outcomes(ledger, settlement.id)
    waiting = set(found.loc[found["reason"] == PRICE_QUERY, "call"])
    frame = queries.calls(ledger)
    frame = frame[frame["call"].isin(waiting)].reset_index(drop=True)
    if frame.empty:
        return []
    book = parse_codebook(queries.codebook_source(ledger, settlement.codebook), file="ledger")
    judged = judge(ledger, frame, book, as_of=settlement.as_of, vintage=settlement.vintage)
    refs: dict[int, list[str]] = {}
    for row, ref in enumerate(frame["ref"]):
        for position in queried_sessions(judged, row):
            refs.setdefault(position, []).append(ref)
    return [
        {**price, "calls": " ".join(refs[position])}
        for position in sorted(refs)
        for price in describe_query(judged, position)
    ]


def queried_sessions(judged: Judgement, row: int) -> list[int]:
    """Return where the prices in query stand that the sessions of one call rest on."""
    market, windows = judged.world.market, judged.outcomes.resolved.windows
    if market.doubts is None or not len(market.bars.day):
        return []
    begin = max(int(windows.floor[row]), int(windows.reference[row]) - LOOK_BACK)
    end = int(windows.last[row]) + 1
    spans = [(begin, end)]
    offsets = market.bars.offsets.tolist()
    spans += [(offsets[leg], offsets[leg + 1]) for leg in _legs(judged, row)]
    pairs = zip(market.doubts.session.tolist(), market.doubts.origin.tolist(), strict=True)
    return sorted({of for at, of in pairs if any(a <= at < b for a, b in spans)})


def _legs(judged: Judgement, row: int) -> IntArray:
    legs = judged.calls.times.legs
    return np.zeros(0, dtype=np.int64) if legs is None else legs[row][legs[row] >= 0]


def describe_query(judged: Judgement, position: int) -> Iterator[dict[str, Any]]:
    """Yield each price in query of a session, in the units of the file."""
    market, world = judged.world.market, judged.world
    bars, doubts = market.bars, market.doubts
    number = int(np.searchsorted(bars.offsets, position, side="right")) - 1
    at = np.array([position], dtype=np.int64)

    def in_file(value: float) -> float:
        return float(market.in_file_units(np.array([value]), at)[0])

    for name in ("close", "high", "low"):
        if doubts is not None and getattr(doubts, name)[position]:
            yield {
                "instrument": world.symbol_of(number),
                "session": day_of(int(bars.day[position])).isoformat(),
                "price": name,
                "value": in_file(float(getattr(bars, name)[position])),
                "close": in_file(float(bars.close[position])),
                "close_before": in_file(float(bars.close[position - 1])),
            }
