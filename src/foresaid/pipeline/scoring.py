"""Scoring a ledger: calls with their outcomes, grouped, one line of scores a group."""

from __future__ import annotations

import json
from dataclasses import asdict, dataclass, fields
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from foresaid.claims.registry import NOT_A_CALL
from foresaid.ledger import queries
from foresaid.model.codebook import parse_codebook
from foresaid.model.errors import UsageError
from foresaid.score.scoreboard import GroupScore, Record, score_record
from foresaid.settle.outcomes import alternate_names

if TYPE_CHECKING:
    from collections.abc import Sequence
    from datetime import date

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


@dataclass(frozen=True)
class Scores:
    """Scores with what they rest on.

    Attributes
    ----------
    rows : list of dict
        One for each group: the keys asked for, then the scores.
    as_of : date
        The day of the settlement.
    codebook : Codebook
        The rules it was settled under.
    stale : tuple of str
        What the ledger has gained since.
    """

    rows: list[dict[str, Any]]
    as_of: date
    codebook: Codebook
    stale: tuple[str, ...]


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
    return tuple(parts)


def score_ledger(ledger: Ledger, by: Sequence[str], *, weighted: bool = False) -> Scores:
    """Return the scores of every group under the latest settlement.

    Parameters
    ----------
    ledger : Ledger
        Settled at least once.
    by : sequence of str
        Keys of ``GROUPS``, in the order wanted; empty scores everything as one group.
    weighted : bool
        Whether the codebook's class weights count in the weighted columns.

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
    table["weight"] = _weights(table, book) if weighted else 1.0
    rows = [
        keys | _counts(group) | scores
        for keys, group in _grouped(table, by)
        for scores in [_score(group, book)]
    ]
    return Scores(rows, settlement.as_of, book, stale_parts(ledger, settlement))


def score_columns_of(by: Sequence[str]) -> list[str]:
    """Return the columns of a score row, in order."""
    return [*by, *_COUNTS, *(field.name for field in fields(GroupScore))]


_COUNTS = (
    "screened", "not_a_call", "open", "void", "early", "imputed_n", "imputed_hits",
    "imputed_expected_hits", "withdrawn_n", "withdrawn_hits", "withdrawn_expected_hits",
)  # fmt: skip


def _grouped(
    table: pd.DataFrame, by: Sequence[str]
) -> list[tuple[dict[str, Any], pd.DataFrame]]:
    if not by:
        return [({}, table)]
    columns = [GROUPS[key] for key in by]
    groups = table.groupby(columns, sort=True, dropna=False)
    return [(dict(zip(by, key, strict=True)), group) for key, group in groups]


def _weights(table: pd.DataFrame, book: Codebook) -> list[float]:
    horizons = {one.name: one.weight for one in book.horizon_classes} | {book.undated: 0.0}
    specificities = {one.name: one.weight for one in book.specificity_classes}
    return [
        horizons.get(h, 0.0) * specificities.get(s, 0.0)
        for h, s in zip(table["horizon_class"], table["specificity_class"], strict=True)
    ]


def _is_scored(group: pd.DataFrame) -> pd.Series:
    """Return which calls are matured with a result; imputed horizons among them."""
    return group["result"].isin(["hit", "miss"]) & (group["matured"] == 1)


def _counts(group: pd.DataFrame) -> dict[str, Any]:
    scored, result = _is_scored(group), group["result"]
    imputed = scored & (group["horizon_imputed"] == 1)
    withdrawn = scored & ~imputed & (group["withdrawn_at"] != "")
    return {
        "screened": len(group),
        "not_a_call": int((result == NOT_A_CALL).sum()),
        "open": int((result == "open").sum()),
        "void": int((result == "void").sum()),
        "early": int((result.isin(["hit", "miss"]) & ~scored).sum()),
        **_beside(group[imputed], "imputed"),
        **_beside(group[withdrawn], "withdrawn"),
    }


def _beside(rows: pd.DataFrame, name: str) -> dict[str, Any]:
    """Return how many calls of a part of the group came right, and how many by chance."""
    part = _record(rows)
    known = np.isfinite(part.chance)
    expected = float(part.chance_right[known].sum()) if known.any() else None
    return {
        f"{name}_n": len(rows),
        f"{name}_hits": int(part.right.sum()),
        f"{name}_expected_hits": expected,
    }


def _score(group: pd.DataFrame, book: Codebook) -> dict[str, Any]:
    headline = _is_scored(group) & (group["horizon_imputed"] == 0)
    return asdict(score_record(_record(group[headline]), book))


def _record(rows: pd.DataFrame) -> Record:
    low, high = _floats(rows["probability_low"]), _floats(rows["probability_high"])
    sides = {"up": 1, "down": -1}
    return Record(
        came_true=(rows["result"] == "hit").to_numpy(dtype=bool),
        leans_against=np.nan_to_num(high, nan=1.0) < 0.5,
        chance=_floats(rows["chance"]),
        probability_low=low,
        probability_high=high,
        instrument=pd.factorize(rows["instrument"])[0].astype(np.int64),
        start=_days(rows["reference_session"]),
        end=_days(rows["deadline_session"]),
        direction=np.array([sides.get(side, 0) for side in rows["direction"]], dtype=np.int64),
        weight=_floats(rows["weight"]),
    )


def _floats(column: pd.Series) -> Any:  # noqa: ANN401 - a float array
    return column.to_numpy(dtype=np.float64, na_value=np.nan)


def _days(column: pd.Series) -> Any:  # noqa: ANN401 - an int array
    return column.to_numpy(dtype="datetime64[D]").astype(np.int64)
