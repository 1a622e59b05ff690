"""Scoring a ledger: calls with their outcomes, grouped, one line of scores a group."""

from __future__ import annotations

from dataclasses import asdict, dataclass, fields
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from foresaid.claims.registry import NOT_A_CALL
from foresaid.pipeline.field_numbers import FIELD_COLUMNS, field_numbers
from foresaid.pipeline.groups import days, floats, grouped_calls, is_headline, is_scored
from foresaid.pipeline.hurdles import BAND_COLUMNS, field_hurdles, settle_headline
from foresaid.pipeline.watching import WATCH_COLUMNS, watched
from foresaid.score.record import Record, is_long_enough, is_one_sided
from foresaid.score.scoreboard import GroupScore, score_record

if TYPE_CHECKING:
    from collections.abc import Sequence
    from datetime import date

    from foresaid.ledger.store import Ledger
    from foresaid.model.codebook import Codebook
    from foresaid.pipeline.hurdles import Hurdles


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
    hurdles : Hurdles
        The calendar along which records were moved, and what it says of each.
    """

    rows: list[dict[str, Any]]
    as_of: date
    codebook: Codebook
    stale: tuple[str, ...]
    hurdles: Hurdles


def score_ledger(ledger: Ledger, by: Sequence[str], *, weighted: bool = False) -> Scores:
    """Return the scores of every group under the latest settlement.

    Parameters
    ----------
    ledger : Ledger
        Settled at least once.
    by : sequence of str
        Keys of ``groups.GROUPS``, in the order wanted; empty scores everything as one group.
    weighted : bool
        Whether the codebook's class weights count in the weighted columns.

    Raises
    ------
    UsageError
        If nothing was settled, or a key is unknown.
    """
    found = grouped_calls(ledger, by)
    table, book = found.table, found.codebook
    if weighted:
        table["weight"] = _weights(table, book)
    headline = settle_headline(ledger, found)
    table["went"] = headline.went(len(table))
    parts = [table.iloc[rows] for _, rows in found.groups]
    records = [record_of(part[is_headline(part)]) for part in parts]
    ranked = [is_long_enough(one, book) and not is_one_sided(one) for one in records]
    leans = leans_against(table)
    right = (table["result"] == "hit").to_numpy(dtype=bool) ^ leans
    hurdles = field_hurdles(headline, found, right, leans, ranked)
    as_of, level = found.settlement.as_of, book.verdict.level
    rows = []
    for at, (keys, numbers) in enumerate(found.groups):
        score = asdict(score_record(records[at], book, hurdles.shifted[at]))
        watching = watched(parts[at], leans[numbers], as_of=as_of, level=level)
        rows.append(keys | _counts(parts[at]) | score | hurdles.band[at] | watching)
    beside = field_numbers(rows, seed=book.chance.walks_seed)
    rows = [row | more for row, more in zip(rows, beside, strict=True)]
    return Scores(rows, found.settlement.as_of, book, found.stale, hurdles)


def score_columns_of(by: Sequence[str]) -> list[str]:
    """Return the columns of a score row, in order."""
    return [
        *by,
        *_COUNTS,
        *(field.name for field in fields(GroupScore)),
        *BAND_COLUMNS,
        *WATCH_COLUMNS,
        *FIELD_COLUMNS,
    ]


_COUNTS = (
    "screened", "not_a_call", "open", "void", "views", "early", "imputed_n", "imputed_hits",
    "imputed_expected_hits", "withdrawn_n", "withdrawn_hits", "withdrawn_expected_hits",
)  # fmt: skip


def _weights(table: pd.DataFrame, book: Codebook) -> list[float]:
    horizons = {one.name: one.weight for one in book.horizon_classes} | {book.undated: 0.0}
    specificities = {one.name: one.weight for one in book.specificity_classes}
    return [
        horizons.get(h, 0.0) * specificities.get(s, 0.0)
        for h, s in zip(table["horizon_class"], table["specificity_class"], strict=True)
    ]


def _counts(group: pd.DataFrame) -> dict[str, Any]:
    scored, result = is_scored(group), group["result"]
    imputed = scored & (group["horizon_imputed"] == 1)
    withdrawn = scored & ~imputed & (group["withdrawn_at"] != "")
    return {
        "screened": len(group),
        "not_a_call": int((result == NOT_A_CALL).sum()),
        "open": int((result == "open").sum()),
        "void": int((result == "void").sum()),
        "views": _views(group[is_headline(group)]),
        "early": int((result.isin(["hit", "miss"]) & ~scored).sum()),
        **_beside(group[imputed], "imputed"),
        **_beside(group[withdrawn], "withdrawn"),
    }


def _views(rows: pd.DataFrame) -> int:
    """Return how many views the calls state: one with all its revisions counts once."""
    before = {ref: old for ref, old in zip(rows["ref"], rows["revises"], strict=True) if old}
    firsts = set()
    for ref in rows["ref"]:
        first = ref
        while first in before:  # a revision names an earlier statement, so this ends
            first = before[first]
        firsts.add(first)
    return len(firsts)


def _beside(rows: pd.DataFrame, name: str) -> dict[str, Any]:
    """Return how many calls of a part of the group came right, and how many by chance."""
    part = record_of(rows)
    known = np.isfinite(part.chance)
    expected = float(part.chance_right[known].sum()) if known.any() else None
    return {
        f"{name}_n": len(rows),
        f"{name}_hits": int(part.right.sum()),
        f"{name}_expected_hits": expected,
    }


def leans_against(table: pd.DataFrame) -> Any:  # noqa: ANN401 - a bool array
    """Return which calls are right when their claim fails: stated as less than even."""
    return np.nan_to_num(floats(table["probability_high"]), nan=1.0) < 0.5


def record_of(rows: pd.DataFrame) -> Record:
    """Return calls as the arrays that scores are worked out from."""
    low, high = floats(rows["probability_low"]), floats(rows["probability_high"])
    sides = {"up": 1, "down": -1}
    return Record(
        came_true=(rows["result"] == "hit").to_numpy(dtype=bool),
        leans_against=leans_against(rows),
        chance=floats(rows["chance"]),
        probability_low=low,
        probability_high=high,
        instrument=pd.factorize(rows["instrument"])[0].astype(np.int64),
        start=days(rows["reference_session"]),
        end=days(rows["deadline_session"]),
        direction=np.array([sides.get(side, 0) for side in rows["direction"]], dtype=np.int64),
        went=rows["went"].to_numpy(dtype=np.int64),
        weight=floats(rows["weight"]),
    )
