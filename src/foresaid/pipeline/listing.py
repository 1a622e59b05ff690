"""The list of calls, as it is given out."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from foresaid.claims.registry import NOT_A_CALL
from foresaid.ingest.faults import nearest
from foresaid.ledger import queries
from foresaid.model.errors import UsageError
from foresaid.pipeline.groups import listed_calls, stale_parts
from foresaid.settle.outcomes import alternate_names

if TYPE_CHECKING:
    from collections.abc import Collection, Mapping

    from foresaid.ledger.store import Ledger

CALL_COLUMNS = (
    "ref", "forecaster", "instrument", "claim", "said_at", "horizon", "horizon_class",
    "specificity_class", "direction", "probability", "probability_low", "probability_high",
    "likelihood", "given", "outcome", "reason", "matured", "reference_session",
    "reference_price", "first_session", "deadline", "sessions", "deadline_session",
    "decided_session", "decided_price", "move_frac", "move_points", "measured", "chance",
    "chance_model", "chance_windows", "chance_hits", "chance_disjoint",
    "chance_volatility", "chance_modelled", "loss", "loss_reference", "covered", "flags",
    *(f"alt_{name}" for name in alternate_names()),
    "claim_typed", "horizon_typed", "currency", "quote", "outlet", "link", "collection",
    "coder", "coded_at", "revises", "copies", "withdrawn_at",
    "withdrawn_why", "note",
)  # fmt: skip

OUTCOMES = ("hit", "miss", "open", "void", NOT_A_CALL)


def call_rows(
    ledger: Ledger, wanted: Mapping[str, str]
) -> tuple[list[dict[str, Any]], tuple[str, ...] | None]:
    """Return the calls whose columns equal ``wanted``, and what is newer than the outcomes.

    The second part is None where nothing was settled yet.

    Raises
    ------
    UsageError
        If a wanted forecaster, instrument or outcome is none that there is.
    """
    _check_wanted(ledger, wanted)
    table, settlement = listed_calls(ledger)
    for column, value in wanted.items():
        table = table[table[column] == value]
    kept = table[list(CALL_COLUMNS)]
    rows = [dict(zip(CALL_COLUMNS, row, strict=True)) for row in kept.itertuples(index=False)]
    return rows, None if settlement is None else stale_parts(ledger, settlement)


def _check_wanted(ledger: Ledger, wanted: Mapping[str, str]) -> None:
    known: dict[str, Collection[str]] = {
        "forecaster": queries.forecasters(ledger),
        "instrument": queries.instruments(ledger),
        "outcome": OUTCOMES,
    }
    for column, value in wanted.items():
        if value in known[column]:
            continue
        close = nearest(value, known[column])
        hint = f" The nearest is `{close}`." if close else ""
        if column == "outcome":
            hint = f" Write one of: {', '.join(OUTCOMES)}."
        raise UsageError(f"There is no {column} `{value}`.{hint}")
