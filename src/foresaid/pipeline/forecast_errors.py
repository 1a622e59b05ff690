"""Point, interval and distribution forecasts: how far off they were, group by group."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from foresaid.claims.phrases import parse_claim
from foresaid.claims.registry import KINDS, NOT_A_CALL
from foresaid.pipeline.groups import floats, is_headline
from foresaid.score.probability import brier_skill

if TYPE_CHECKING:
    from collections.abc import Sequence

    import pandas as pd

    from foresaid.pipeline.groups import Grouped

KINDS_OF_LOSS = {
    "error": "target",
    "interval": "range",
    "pinball": "quantiles",
    "ranked": "bins",
}
_COLUMNS = (
    "forecast", "n", "hits", "hit_rate", "stated_rate", "any_time_hits", "covered", "loss",
    "n_reference", "loss_same", "loss_reference", "skill",
)  # fmt: skip


def error_columns(by: Sequence[str]) -> list[str]:
    """Return the columns of a row, in order."""
    return [*by, *_COLUMNS]


def forecast_errors(found: Grouped) -> list[dict[str, Any]]:
    """Return one row for each group and kind of forecast: matured calls with a stated date."""
    return [keys | row for keys, rows in found.groups for row in _rows(found.table.iloc[rows])]


def _rows(group: pd.DataFrame) -> list[dict[str, Any]]:
    """Return the rows of one group, in the order of ``KINDS_OF_LOSS``."""
    kinds = [
        "" if text.startswith(NOT_A_CALL) else KINDS[parse_claim(text).kind].loss
        for text in group["claim"]
    ]
    scored = is_headline(group).to_numpy()
    rows = []
    for loss, name in KINDS_OF_LOSS.items():
        part = group[scored & (np.array(kinds, dtype=object) == loss)]
        if len(part):
            rows.append({"forecast": name} | _summary(part, is_point=loss == "error"))
    return rows


def _summary(part: pd.DataFrame, *, is_point: bool) -> dict[str, Any]:
    loss, reference = floats(part["loss"]), floats(part["loss_reference"])
    both = np.isfinite(reference)
    hits = int((part["result"] == "hit").sum())
    mean_same = float(loss[both].mean()) if both.any() else None
    mean_reference = float(reference[both].mean()) if both.any() else None
    any_time = [text == "hit" for text in part["alt_any_time"]]
    stated = floats(part["probability"])
    return {
        "n": len(part),
        "hits": hits,
        "hit_rate": hits / len(part),
        "stated_rate": None if is_point else float(stated.mean()),
        "any_time_hits": sum(any_time) if is_point else None,
        "covered": float(np.median(floats(part["covered"]))) if is_point else None,
        "loss": float(loss.mean()),
        "n_reference": int(both.sum()),
        "loss_same": mean_same,
        "loss_reference": mean_reference,
        "skill": None
        if mean_same is None or mean_reference is None
        else brier_skill(mean_same, mean_reference),
    }
