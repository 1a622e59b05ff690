"""Named reads: what a ledger holds, as records, arrays and frames."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from foresaid.model.records import Action, Forecaster, Instrument

if TYPE_CHECKING:
    from foresaid.ledger.store import Ledger
    from foresaid.model.bars import FloatArray, IntArray

_INSTRUMENT_FIELDS = (
    "symbol, name, currency, zone, opens, closes, sense, kind, market, benchmark, base, term"
)
_PRICE_FIELDS = ("open", "high", "low", "close", "volume", "total")

_CALLS = """
SELECT c.id AS call, s.ref, f.handle AS forecaster, coalesce(i.symbol, '') AS instrument,
       c.claim, c.claim_typed, c.not_a_call, s.said_at, s.said_zone, c.horizon,
       c.horizon_typed, c.horizon_imputed, c.deadline, c.sessions, c.probability_low,
       c.probability_high, c.likelihood, c.given, c.currency, c.horizon_class,
       c.specificity_class, s.outlet, s.link, s.quote, coalesce(g.name, '') AS collection,
       c.coder, c.coded_at, coalesce(r.ref, '') AS revises,
       (SELECT count(*) FROM statement o WHERE o.copy_of = s.id) AS copies,
       coalesce(w.withdrawn_at, '') AS withdrawn_at,
       coalesce(w.why, '') AS withdrawn_why, c.note
FROM call c
JOIN statement s ON s.id = c.statement
JOIN forecaster f ON f.id = s.forecaster
LEFT JOIN instrument i ON i.id = c.instrument
LEFT JOIN collection g ON g.id = s.collection
LEFT JOIN statement r ON r.id = c.revises
LEFT JOIN withdrawal w ON w.statement = s.id
ORDER BY c.id
"""


@dataclass(frozen=True)
class PriceRows:
    """Prices in force at a vintage, ordered by instrument and session; arrays (n,).

    ``instrument`` holds ledger ids, ``day`` days since 1970-01-01; the prices are in the
    units of the day, NaN where the file had none.
    """

    instrument: IntArray
    day: IntArray
    load: IntArray
    open: FloatArray
    high: FloatArray
    low: FloatArray
    close: FloatArray
    volume: FloatArray
    total: FloatArray


@dataclass(frozen=True, slots=True)
class Settlement:
    """One settlement run: what it was made from."""

    id: int
    as_of: date
    codebook: str
    vintage: int
    last_call: int
    last_decision: int
    last_confirmation: int
    program: str
    settled_at: str


def instruments(ledger: Ledger) -> dict[str, tuple[int, Instrument]]:
    """Return every instrument with its ledger id, by symbol, oldest first."""
    rows = ledger.db.execute(f"SELECT id, {_INSTRUMENT_FIELDS} FROM instrument ORDER BY id")
    return {row[1]: (row[0], Instrument(*row[1:])) for row in rows}


def forecasters(ledger: Ledger) -> dict[str, tuple[int, Forecaster]]:
    """Return every forecaster with their ledger id, by handle, oldest first."""
    aliases: dict[int, list[str]] = {}
    for alias, owner in ledger.db.execute("SELECT alias, forecaster FROM alias ORDER BY alias"):
        aliases.setdefault(owner, []).append(alias)
    rows = ledger.db.execute("SELECT id, handle, name, role, desk FROM forecaster ORDER BY id")
    return {
        handle: (key, Forecaster(handle, name, role, desk, tuple(aliases.get(key, ()))))
        for key, handle, name, role, desk in rows
    }


def actions(ledger: Ledger, *, vintage: int) -> list[Action]:
    """Return the corporate actions known at a vintage, by date."""
    rows = ledger.db.execute(
        'SELECT i.symbol, a.effective, a.kind, a.ratio, a.amount, a.currency, a."into" '
        "FROM action a JOIN instrument i ON i.id = a.instrument WHERE a.load <= ? "
        "ORDER BY a.effective, a.id",
        (vintage,),
    )
    return [Action(row[0], date.fromisoformat(row[1]), *row[2:]) for row in rows]


def vintage(ledger: Ledger) -> int:
    """Return the number of the last load of prices or actions, 0 when there is none."""
    found = ledger.scalar("SELECT max(id) FROM load WHERE what IN ('prices', 'actions')")
    return int(found or 0)


def last_call(ledger: Ledger) -> int:
    """Return the id of the newest call, 0 when there is none."""
    return int(ledger.scalar("SELECT max(id) FROM call") or 0)


@dataclass(frozen=True, slots=True)
class Decision:
    """What a person decided about the plain fact on which a call depends."""

    met: bool
    decided_at: str
    who: str
    evidence: str


def decisions(ledger: Ledger, *, as_of: date) -> dict[int, Decision]:
    """Return the latest decision about each call's condition, by call id.

    What happened after ``as_of`` is not known yet.
    """
    rows = ledger.db.execute(
        "SELECT call, met, decided_at, who, evidence FROM decision "
        "WHERE substr(decided_at, 1, 10) <= ? ORDER BY id",
        (as_of.isoformat(),),
    )
    return {row[0]: Decision(bool(row[1]), *row[2:]) for row in rows}


def last_decision(ledger: Ledger) -> int:
    """Return the id of the newest decision, 0 when there is none."""
    return int(ledger.scalar("SELECT max(id) FROM decision") or 0)


@dataclass(frozen=True, slots=True)
class Confirmation:
    """Prices that a person found right: the instrument's ledger id, the day, the numbers."""

    instrument: int
    day: int
    high: float | None
    low: float | None
    close: float
    who: str
    evidence: str


def confirmations(ledger: Ledger) -> list[Confirmation]:
    """Return every confirmation of prices, oldest first."""
    rows = ledger.db.execute(
        "SELECT instrument, CAST(julianday(session) - 2440587.5 AS INTEGER), high, low, close, "
        "who, evidence FROM confirmation ORDER BY id"
    )
    return [Confirmation(*row) for row in rows]


def last_confirmation(ledger: Ledger) -> int:
    """Return the id of the newest confirmation, 0 when there is none."""
    return int(ledger.scalar("SELECT max(id) FROM confirmation") or 0)


def series_kinds(ledger: Ledger, *, vintage: int) -> dict[str, str]:
    """Return what the prices of each instrument are: raw, split-adjusted or total-return."""
    rows = ledger.db.execute(
        "SELECT DISTINCT i.symbol, l.series FROM "
        "(SELECT DISTINCT instrument, load FROM price WHERE load <= ?) p "
        "JOIN instrument i ON i.id = p.instrument JOIN load l ON l.id = p.load",
        (vintage,),
    )
    return dict(rows.fetchall())


def prices(ledger: Ledger, *, vintage: int, as_of: date | None = None) -> PriceRows:
    """Return the prices in force at a vintage, up to a day.

    A later load holds only the rows that differ, so the newest load of a session counts.
    """
    rows = ledger.db.execute(
        "SELECT instrument, CAST(julianday(session) - 2440587.5 AS INTEGER), load, "
        f"{', '.join(_PRICE_FIELDS)} FROM price WHERE load <= ? AND session <= ? "
        "ORDER BY instrument, session, load",
        (vintage, (as_of or date.max).isoformat()),
    ).fetchall()
    table = np.array(rows, dtype=np.float64).reshape(len(rows), 9)
    keys = table[:, :2].astype(np.int64)
    newest = np.ones(len(rows), dtype=bool)
    newest[:-1] = (keys[1:] != keys[:-1]).any(axis=1)
    kept = table[newest]
    whole = kept[:, :3].astype(np.int64)
    return PriceRows(whole[:, 0], whole[:, 1], whole[:, 2], *(kept[:, 3 + i] for i in range(6)))


def price_source(
    ledger: Ledger, symbol: str, session: str, *, vintage: int
) -> dict[str, Any] | None:
    """Return one price row in the units of the day, with the file it came from."""
    found = ledger.db.query(
        "SELECT session, open, high, low, close, file, sha256 FROM price p "
        "JOIN instrument i ON i.id = p.instrument JOIN load l ON l.id = p.load "
        "WHERE i.symbol = ? AND session = ? AND p.load <= ? ORDER BY p.load DESC LIMIT 1",
        (symbol, session, vintage),
    )
    return next(iter(found), None)


def calls(ledger: Ledger) -> pd.DataFrame:
    """Return every call with its statement, one row each, in order of entry."""
    cursor = ledger.db.execute(_CALLS)
    names = [item[0] for item in cursor.description]
    return pd.DataFrame(cursor.fetchall(), columns=names, dtype=object)


def statement_digests(ledger: Ledger) -> dict[str, str]:
    """Return the digest of every statement's row, by ref."""
    return dict(ledger.db.execute("SELECT ref, digest FROM statement").fetchall())


def statement_owners(ledger: Ledger) -> dict[str, str]:
    """Return the handle of whoever made each statement, by ref."""
    return dict(
        ledger.db.execute(
            "SELECT s.ref, f.handle FROM statement s JOIN forecaster f ON f.id = s.forecaster"
        ).fetchall()
    )


def latest_settlement(ledger: Ledger) -> Settlement | None:
    """Return the newest settlement run, None when nothing was settled yet."""
    row = ledger.db.execute(
        "SELECT id, as_of, codebook, vintage, last_call, last_decision, last_confirmation, "
        "program, settled_at FROM settlement ORDER BY id DESC LIMIT 1"
    ).fetchone()
    return None if row is None else Settlement(row[0], date.fromisoformat(row[1]), *row[2:])


def outcomes(ledger: Ledger, settlement: int) -> pd.DataFrame:
    """Return the outcomes of one settlement run, one row a call."""
    cursor = ledger.db.execute(
        "SELECT * FROM outcome WHERE settlement = ? ORDER BY call", (settlement,)
    )
    names = [item[0] for item in cursor.description]
    frame = pd.DataFrame(cursor.fetchall(), columns=names, dtype=object)
    return frame.drop(columns="settlement")


def codebook_source(ledger: Ledger, digest: str) -> str:
    """Return the text of a codebook that was used on this ledger."""
    return str(ledger.scalar("SELECT source FROM codebook WHERE digest = ?", (digest,)))
