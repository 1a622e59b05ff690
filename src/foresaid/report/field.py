"""The ranking of a field, with the band in which its best would lie by luck alone."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from foresaid.report.tables import Column, key_columns, p_value

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

HALF_WIDTH = 16  # characters on either side of the middle
REACH = 4.0  # standard deviations at the ends

FIELD_GUIDE = (
    "excess: right calls less the mean over all shifts of the calendar, with the standard "
    "deviation of the shifts. The line shows that excess in deviations, from -4 to 4: o is the "
    "record, the dashes are where the best and the worst of this field stay in 95 % of the "
    "shifts by luck alone. field: how often luck alone puts some record of the field as high "
    "(or as low). rank: where 90 % of ranks lie once short records are pulled to the field's "
    "mean."
)
APART_GUIDE = "Not ranked, because too short, one-sided or not to be moved along the calendar:"


def standing(row: dict[str, Any]) -> float | None:
    """Return a record's excess over its shifts in standard deviations, None where unknown."""
    if row["timing_expected"] is None or not row["timing_deviation"]:
        return None
    return float((row["timing_hits"] - row["timing_expected"]) / row["timing_deviation"])


def in_field(row: dict[str, Any]) -> bool:
    """Return whether a record has a part in the field."""
    return row["p_field"] is not None and standing(row) is not None


def ranked(rows: Iterable[dict[str, Any]]) -> list[dict[str, Any]]:
    """Return the records of the field, the best first; equal ones keep their order."""
    members = [row for row in rows if in_field(row)]
    return sorted(members, key=lambda row: -(standing(row) or 0.0))


def line_of(row: dict[str, Any]) -> str:
    """Return the picture of one record: its place on the line, and the band of luck."""
    cells = [" "] * (2 * HALF_WIDTH + 1)
    low, high = (_deviations(row, name) for name in ("luck_low", "luck_high"))
    for at in range(_cell(low), _cell(high) + 1):
        cells[at] = "-"
    cells[HALF_WIDTH] = "|"
    cells[_cell(standing(row) or 0.0)] = "o"
    return "".join(cells)


def _deviations(row: dict[str, Any], name: str) -> float:
    return float((row[name] - row["timing_expected"]) / row["timing_deviation"])


def _cell(value: float) -> int:
    place = HALF_WIDTH + round(value / REACH * HALF_WIDTH)
    return min(max(place, 0), 2 * HALF_WIDTH)


def field_columns(keys: Sequence[str]) -> list[Column]:
    """Return the columns of the ranking for groups by ``keys``."""
    return [
        *key_columns(keys),
        Column("right", lambda row: f"{row['timing_hits']} of {row['n_timing']}", wide=True),
        Column("excess", _excess),
        Column("worst and best by luck", line_of, "left"),
        Column("field", _own_tail),
        Column("rank", _rank_interval, wide=True),
        Column("verdict", lambda row: row["verdict"], "left", wraps=True),
    ]


def _rank_interval(row: dict[str, Any]) -> str:
    """Return the interval of the rank once unequal records are allowed for."""
    if row["rank_low"] is None:
        return "–"
    return f"{row['rank_low']:.0f} to {row['rank_high']:.0f}"


def shares_text(row: dict[str, Any]) -> str:
    """Return what a field says about how many of it have skill, empty for a small field."""
    if row["share_none"] is None:
        return ""
    parts = [
        f"{100 * row[f'share_{name}']:.0f} % ({100 * row[f'share_{name}_low']:.0f} to "
        f"{100 * row[f'share_{name}_high']:.0f}) {words}"
        for name, words in (
            ("none", "without skill"),
            ("some", "with some"),
            ("negative", "worse than chance"),
        )
    ]
    return (
        f"Of the field, by the timing hurdle: {', '.join(parts)}. An estimate for the whole, "
        "too coarse to see one or two records; intervals of 95 %, too narrow where people herd."
    )


def _own_tail(row: dict[str, Any]) -> str:
    """Return the p-value of the side on which a record lies."""
    if (standing(row) or 0.0) >= 0.0:
        return p_value(row["p_field"])
    return f"{p_value(row['p_field_low'])} low"


def _excess(row: dict[str, Any]) -> str:
    excess = row["timing_hits"] - row["timing_expected"]
    return f"{excess:+.1f} ({row['timing_deviation']:.1f})"


def apart_columns(keys: Sequence[str]) -> list[Column]:
    """Return the columns of the records that are not ranked."""
    return [
        *key_columns(keys),
        Column("right", lambda row: f"{row['hits']} of {row['n']}"),
        Column("verdict", lambda row: row["verdict"], "left"),
        Column("because", lambda row: row["verdict_reason"], "left", wraps=True),
    ]
