"""Calls with their outcomes, in the groups that are scored."""

from __future__ import annotations

import json
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from foresaid.ledger import queries
from foresaid.model.codebook import parse_codebook
from foresaid.model.errors import UsageError
from foresaid.settle.outcomes import alternate_names

if TYPE_CHECKING:
    from collections.abc import Sequence

    from foresaid.ledger.store import Ledger
    from foresaid.model.codebook import Codebook

GROUPS = {
    "forecaster": "forecaster",
    "horizon": "horizon_class",
    "specificity": "specificity_class",
    "direction": "direction",
    "instrument": "instrument",
    "desk": "desk",
    "year": "year",
}


def listed_calls(ledger: Ledger) -> tuple[pd.DataFrame, queries.Settlement | None]:
    """Return every call with its outcome in the latest settlement, empty where there is none.

    Columns are those of ``foresaid calls`` (docs/formats.md), values plain Python objects.
    """
    frame = queries.calls(ledger)
    settlement = queries.latest_settlement(ledger)
    found = queries.outcomes(ledger, settlement.id if settlement else 0)
    table = frame.merge(found, on="call", how="left").astype(object)
    table = table.where(table.notna(), None)
    table["probability"] = pd.Series(_middle(table), dtype=object)
    table["outcome"] = [result or "" for result in table["result"]]
    alternates = [json.loads(text or "{}") for text in table["alternates"]]
    for name in alternate_names():
        table[f"alt_{name}"] = [kept.get(name, "") for kept in alternates]
    for name in ("reason", "flags", "chance_model", "direction"):
        table[name] = [text or "" for text in table[name]]
    return table, settlement


def _middle(table: pd.DataFrame) -> list[float | None]:
    """Return the stated probability, the middle of the band for a word."""
    pairs = zip(table["probability_low"], table["probability_high"], strict=True)
    return [None if low is None else (low + high) / 2.0 for low, high in pairs]


def stale_parts(ledger: Ledger, settlement: queries.Settlement) -> tuple[str, ...]:
    """Return what came into the ledger after a settlement, in words."""
    parts = []
    if queries.last_call(ledger) != settlement.last_call:
        parts.append("new calls")
    if queries.vintage(ledger) != settlement.vintage:
        parts.append("new prices or actions")
    if queries.last_decision(ledger) != settlement.last_decision:
        parts.append("new decisions about conditions")
    if queries.last_confirmation(ledger) != settlement.last_confirmation:
        parts.append("newly confirmed prices")
    return tuple(parts)


@dataclass(frozen=True)
class Grouped:
    """Every call with its outcome, and which calls belong together.

    Attributes
    ----------
    table : DataFrame
        The calls of ``listed_calls`` that the settlement covers.
    groups : list of (dict, ndarray of int)
        The keys of each group and its rows of ``table``.
    settlement : Settlement
        The run that gave the outcomes.
    codebook : Codebook
        The rules it was settled under.
    stale : tuple of str
        What the ledger has gained since.
    """

    table: pd.DataFrame
    groups: list[tuple[dict[str, Any], np.ndarray[Any, np.dtype[np.intp]]]]
    settlement: queries.Settlement
    codebook: Codebook
    stale: tuple[str, ...]


def grouped_calls(ledger: Ledger, by: Sequence[str]) -> Grouped:
    """Return the calls under the latest settlement, grouped.

    Parameters
    ----------
    ledger : Ledger
        Settled at least once.
    by : sequence of str
        Keys of ``GROUPS``, in the order wanted; empty puts everything into one group.

    Raises
    ------
    UsageError
        If nothing was settled, or a key is unknown.
    """
    unknown = [key for key in by if key not in GROUPS]
    if unknown or len(set(by)) != len(by):
        raise UsageError(
            f"Cannot group by {', '.join(unknown) or 'the same thing twice'}; "
            f"the keys are {', '.join(GROUPS)}."
        )
    table, settlement = listed_calls(ledger)
    if settlement is None:
        raise UsageError("Nothing is settled yet. Run: foresaid settle")
    book = parse_codebook(queries.codebook_source(ledger, settlement.codebook), file="ledger")
    table = table[table["result"].notna()].reset_index(drop=True)
    desks = {handle: one.desk for handle, (_, one) in queries.forecasters(ledger).items()}
    table["desk"] = [desks[handle] for handle in table["forecaster"]]
    table["year"] = [text[:4] for text in table["said_at"]]
    table["weight"] = 1.0
    table["went"] = 0
    closing = {
        symbol: f"{one.zone} {one.closes}"
        for symbol, (_, one) in queries.instruments(ledger).items()
    }
    table["closing"] = [closing.get(symbol, "") for symbol in table["instrument"]]
    return Grouped(table, _groups(table, by), settlement, book, stale_parts(ledger, settlement))


def _groups(
    table: pd.DataFrame, by: Sequence[str]
) -> list[tuple[dict[str, Any], np.ndarray[Any, np.dtype[np.intp]]]]:
    if not by:
        return [({}, np.arange(len(table)))]
    found = table.groupby([GROUPS[key] for key in by], sort=True, dropna=False).indices
    groups = []
    for key, rows in found.items():
        values: Any = key if len(by) > 1 else (key,)
        groups.append((dict(zip(by, values, strict=True)), np.asarray(rows)))
    return groups


def is_scored(table: pd.DataFrame) -> pd.Series:
    """Return which calls are matured with a result; imputed horizons among them."""
    return table["result"].isin(["hit", "miss"]) & (table["matured"] == 1)


def is_headline(table: pd.DataFrame) -> pd.Series:
    """Return which calls are in the headline scores: matured, with a stated horizon."""
    return is_scored(table) & (table["horizon_imputed"] == 0)


def floats(column: pd.Series) -> Any:  # noqa: ANN401 - a float array
    """Return a column of numbers and None as floats, NaN for None."""
    return column.to_numpy(dtype=np.float64, na_value=np.nan)


def days(column: pd.Series) -> Any:  # noqa: ANN401 - an int array
    """Return a column of ISO dates as days since 1970-01-01."""
    return column.to_numpy(dtype="datetime64[D]").astype(np.int64)
