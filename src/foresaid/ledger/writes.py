"""Rows into the ledger. Every function runs inside ``Ledger.writing``."""

from __future__ import annotations

from dataclasses import asdict
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping, Sequence

    from foresaid.ledger.store import Ledger
    from foresaid.model.codebook import Codebook
    from foresaid.model.records import Action, CodedCall, Forecaster, Instrument


def add_load(ledger: Ledger, row: Mapping[str, Any]) -> int:
    """Record that a file was read and return the load's id.

    ``row`` has the columns of the table: what, file, sha256, series, n_rows, loaded_at.
    """
    detail = {key: row[key] for key in row if key != "loaded_at"}
    ledger.record("import", detail, at=row["loaded_at"])
    return ledger.insert("load", dict(row))


def add_codebook(ledger: Ledger, codebook: Codebook, *, at: str) -> None:
    """Keep a codebook with its text, once."""
    ledger.db.execute(
        "INSERT INTO codebook (digest, name, source, first_used_at) VALUES (?, ?, ?, ?) "
        "ON CONFLICT DO NOTHING",
        (codebook.digest, codebook.name, codebook.source, at),
    )


def add_instruments(ledger: Ledger, rows: Iterable[Instrument], load: int) -> None:
    """Add instruments."""
    for row in rows:
        ledger.insert("instrument", asdict(row) | {"load": load})


def add_forecasters(ledger: Ledger, rows: Iterable[Forecaster], load: int) -> None:
    """Add forecasters with their aliases."""
    for row in rows:
        fields = asdict(row)
        aliases = fields.pop("aliases")
        owner = ledger.insert("forecaster", fields | {"load": load})
        for alias in aliases:
            ledger.insert("alias", {"alias": alias, "forecaster": owner})


def add_actions(
    ledger: Ledger, rows: Iterable[Action], load: int, ids: Mapping[str, int]
) -> None:
    """Add corporate actions."""
    for row in rows:
        fields = asdict(row) | {
            "instrument": ids[row.instrument],
            "effective": row.effective.isoformat(),
            "load": load,
        }
        ledger.insert("action", fields)


def add_prices(ledger: Ledger, rows: Iterable[tuple[Any, ...]]) -> None:
    """Add price rows: instrument id, session, load, open, high, low, close, volume, total."""
    ledger.db.conn.executemany("INSERT INTO price VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?)", rows)


def collection_id(ledger: Ledger, name: str) -> int | None:
    """Return the id of a collection, made when it is new; None for no name."""
    if not name:
        return None
    found = ledger.scalar("SELECT id FROM collection WHERE name = ?", (name,))
    return (
        int(found)
        if found
        else ledger.insert("collection", {"name": name, "sampling_rule": ""})
    )


def statement_id(ledger: Ledger, ref: str) -> int | None:
    """Return the id of a statement, None for no ref."""
    if not ref:
        return None
    return int(ledger.scalar("SELECT id FROM statement WHERE ref = ?", (ref,)))


_STATEMENT_FIELDS = (
    "ref", "said_at", "said_zone", "outlet", "link", "quote", "digest"
)  # fmt: skip
_CALL_FIELDS = (
    "claim_typed", "claim", "not_a_call", "horizon_typed", "horizon", "sessions",
    "probability_low", "probability_high", "likelihood", "given", "currency",
    "horizon_class", "specificity_class", "coder", "coded_at", "note",
)  # fmt: skip


def add_calls(
    ledger: Ledger,
    rows: Iterable[CodedCall],
    load: int,
    *,
    forecasters: Mapping[str, int],
    instruments: Mapping[str, int],
    codebook: str,
) -> None:
    """Add statements with their calls; a copy is a statement alone.

    Rows that others copy or revise have to come first.
    """
    collections: dict[str, int | None] = {}
    for row in rows:
        if row.collection not in collections:
            collections[row.collection] = collection_id(ledger, row.collection)
        fields = {name: getattr(row, name) for name in _STATEMENT_FIELDS}
        statement = ledger.insert(
            "statement",
            fields
            | {
                "forecaster": forecasters[row.forecaster],
                "collection": collections[row.collection],
                "copy_of": statement_id(ledger, row.copy_of),
                "load": load,
            },
        )
        if row.copy_of:
            continue
        fields = {name: getattr(row, name) for name in _CALL_FIELDS}
        ledger.insert(
            "call",
            fields
            | {
                "statement": statement,
                "instrument": instruments.get(row.instrument),
                "horizon_imputed": int(row.horizon_imputed),
                "deadline": row.deadline.isoformat() if row.deadline else None,
                "revises": statement_id(ledger, row.revises),
                "codebook": codebook,
            },
        )


def add_decision(ledger: Ledger, row: Mapping[str, Any], *, at: str) -> None:
    """Add what a person decided about a condition.

    ``row`` has the columns of the table: call, met, decided_at, who, evidence.
    """
    ledger.record("decide", dict(row), at=at)
    ledger.insert("decision", dict(row))


def add_confirmation(ledger: Ledger, row: Mapping[str, Any], *, at: str) -> None:
    """Add a person's word that prices are right.

    ``row`` has the columns of the table: instrument, session, high, low, close, confirmed_at,
    who, evidence.
    """
    ledger.record("confirm", dict(row), at=at)
    ledger.insert("confirmation", dict(row))


def add_withdrawal(ledger: Ledger, ref: str, row: Mapping[str, Any], *, at: str) -> None:
    """Add a withdrawal: withdrawn_at, who, why."""
    ledger.record("withdraw", {"ref": ref, **row}, at=at)
    ledger.insert("withdrawal", {"statement": statement_id(ledger, ref), **row})


def add_settlement(
    ledger: Ledger, header: Mapping[str, Any], outcomes: Sequence[tuple[Any, ...]]
) -> int:
    """Add a settlement run with its outcomes (columns in the order of the table)."""
    settlement = ledger.insert("settlement", dict(header))
    slots = ", ".join("?" * (len(outcomes[0]) + 1)) if outcomes else ""
    if outcomes:
        ledger.db.conn.executemany(
            f"INSERT INTO outcome VALUES ({slots})", ((settlement, *row) for row in outcomes)
        )
    ledger.record(  # what a run was made from, not what came out
        "settle",
        {key: header[key] for key in ("as_of", "codebook", "vintage", "last_call")},
        at=header["settled_at"],
    )
    return settlement
