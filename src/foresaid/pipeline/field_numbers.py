"""What only a whole field can say: adjusted p-values, shares with skill, shrunken ranks."""

from __future__ import annotations

from dataclasses import fields
from typing import TYPE_CHECKING, Any

import numpy as np

from foresaid.score.multiplicity import (
    FieldShares,
    benjamini_hochberg,
    benjamini_yekutieli,
    field_shares,
    holm,
)
from foresaid.score.shrinkage import shrunken_ranks

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    from foresaid.model.bars import FloatArray

_ADJUSTMENTS: dict[str, Callable[[FloatArray], FloatArray]] = {
    "holm": holm,
    "bh": benjamini_hochberg,
    "by": benjamini_yekutieli,
}
_ADJUSTED = tuple(f"p_{name}_{how}" for name in ("base", "timing") for how in _ADJUSTMENTS)
_RANKS = (
    "excess_rate", "excess_error", "shrunken_rate", "shrunken_error", "p_best", "rank",
    "rank_low", "rank_high",
)  # fmt: skip
_SHARES = tuple(
    f"share_{name}{end}"
    for name in ("none", "some", "negative")
    for end in ("", "_low", "_high")
)
FIELD_COLUMNS = (*_ADJUSTED, *_RANKS, *_SHARES)


def field_numbers(rows: Sequence[dict[str, Any]], *, seed: int) -> list[dict[str, Any]]:
    """Return the numbers of the field for each group, None outside the field.

    Parameters
    ----------
    rows : sequence of dict
        Scores of the groups, in order.
    seed : int
        Of the draws for rank intervals and for the shares' intervals.
    """
    result: list[dict[str, Any]] = [dict.fromkeys(FIELD_COLUMNS) for _ in rows]
    members = [
        at
        for at, row in enumerate(rows)
        if row["p_field"] is not None and row["timing_deviation"] and row["p_base"] is not None
    ]
    if not members:
        return result
    generator = np.random.default_rng(seed)
    columns = _adjusted(rows, members) | _ranks(rows, members, generator)
    columns |= _shares(rows, members, generator)
    for place, at in enumerate(members):
        result[at] = {name: values[place] for name, values in columns.items()}
    return result


def _column(rows: Sequence[dict[str, Any]], members: list[int], name: str) -> FloatArray:
    return np.array([rows[at][name] for at in members], dtype=np.float64)


def _adjusted(rows: Sequence[dict[str, Any]], members: list[int]) -> dict[str, list[float]]:
    found = {}
    for hurdle in ("base", "timing"):
        p = _column(rows, members, f"p_{hurdle}")
        for how, adjust in _ADJUSTMENTS.items():
            found[f"p_{hurdle}_{how}"] = adjust(p).tolist()
    return found


def _ranks(
    rows: Sequence[dict[str, Any]], members: list[int], generator: np.random.Generator
) -> dict[str, list[Any]]:
    """Return excess a call over the shifts, pulled to the field, and what ranks it leaves."""
    n = _column(rows, members, "n_timing")
    excess = _column(rows, members, "timing_hits") - _column(rows, members, "timing_expected")
    rate, error = excess / n, _column(rows, members, "timing_deviation") / n
    found = shrunken_ranks(rate, error, generator)
    assert found is not None, "there is a member"
    columns = (
        rate, error, found.value, found.deviation, found.p_best, found.rank,
        found.rank_low, found.rank_high,
    )  # fmt: skip
    return dict(zip(_RANKS, (column.tolist() for column in columns), strict=True))


def _shares(
    rows: Sequence[dict[str, Any]], members: list[int], generator: np.random.Generator
) -> dict[str, list[Any]]:
    """Return the shares of the field, the same for every member."""
    upper, lower = (_column(rows, members, name) for name in ("p_timing", "p_timing_low"))
    found = field_shares(upper, lower, generator)
    values: list[Any] = [None] * len(_SHARES) if found is None else _flat(found)
    return {name: [value] * len(members) for name, value in zip(_SHARES, values, strict=True)}


def _flat(found: FieldShares) -> list[float]:
    shares = (found.none, found.some, found.negative)
    return [getattr(share, one.name) for share in shares for one in fields(share)]
