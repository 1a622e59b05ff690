"""Tables for the screen: few columns, sensible digits, plain words."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from rich.table import Table
from rich.text import Text

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Sequence

    from rich.console import JustifyMethod

    from foresaid.model.issues import Issue


@dataclass(frozen=True)
class Column:
    """One column: its heading, how a row becomes its text, and how it stands.

    A column that wraps gives way on a narrow screen, so that the others stay whole; one that
    is ``wide`` is left out there.
    """

    heading: str
    text: Callable[[dict[str, Any]], str]
    justify: JustifyMethod = "right"
    wraps: bool = False
    wide: bool = False


NARROW = 112
LEAST = 9  # characters that a column which gives way keeps


def make_table(
    columns: Sequence[Column], rows: Iterable[dict[str, Any]], *, width: int
) -> Table:
    """Return a table for a screen of that width; text from the ledger is never markup."""
    is_narrow = width < NARROW
    table = Table(
        box=None,
        pad_edge=False,
        padding=(0, 1 if is_narrow else 2, 0, 0),
        header_style="bold",
        caption_style="none",
        caption_justify="left",
    )
    left_out = [column.heading for column in columns if column.wide and is_narrow]
    if left_out:
        table.caption = f"Left out on a narrow screen: {', '.join(left_out)}."
    columns = [column for column in columns if not (column.wide and is_narrow)]
    for column in columns:
        table.add_column(
            column.heading,
            justify=column.justify,
            overflow="fold",
            no_wrap=not column.wraps,
            min_width=LEAST if column.wraps else None,
        )
    for row in rows:
        table.add_row(*(Text(column.text(row)) for column in columns))
    return table


def fraction(value: float | None, *, digits: int = 0) -> str:
    """Return a fraction as a percentage, a dash for None.

    Examples
    --------
    >>> fraction(0.6178), fraction(None)
    ('62 %', '–')
    """
    return "–" if value is None else f"{100 * value:.{digits}f} %"


def decimal(value: float | None, *, digits: int = 3) -> str:
    """Return a number with fixed digits, a dash for None."""
    return "–" if value is None else f"{value:.{digits}f}"


def p_value(value: float | None) -> str:
    """Return a p-value with two significant digits.

    Examples
    --------
    >>> p_value(0.0312), p_value(3e-9), p_value(0.62)
    ('0.031', '<0.0001', '0.62')
    """
    if value is None:
        return "–"
    if value < 1e-4:
        return "<0.0001"
    digits = 2 if value >= 0.1 else 3 if value >= 0.01 else 4
    return f"{value:.{digits}f}"


def _interval(row: dict[str, Any]) -> str:
    if row["hit_rate"] is None:
        return "–"
    low, high = 100 * row["hit_low"], 100 * row["hit_high"]
    return f"{100 * row['hit_rate']:.0f} ({low:.0f} to {high:.0f})"


def _by_chance(row: dict[str, Any]) -> str:
    if row["expected_hits"] is None:
        return "–"
    expected = f"{row['expected_hits']:.1f}"
    return expected if row["n_base"] == row["n"] else f"{expected} of {row['n_base']}"


def _imputed(row: dict[str, Any]) -> str:
    return f"{row['imputed_hits']} of {row['imputed_n']}" if row["imputed_n"] else "–"


def _withdrawn(row: dict[str, Any]) -> str:
    return f"{row['withdrawn_hits']} of {row['withdrawn_n']}" if row["withdrawn_n"] else "–"


def _text(name: str) -> Callable[[dict[str, Any]], str]:
    """Return what shows a cell as text, a dash where it is empty or nought."""
    return lambda row: str(row[name] or "–")


def key_columns(keys: Sequence[str]) -> list[Column]:
    """Return the columns that name a group."""
    return [Column(key, _text(key), "left") for key in keys]


def score_columns(keys: Sequence[str], *, has_weights: bool) -> list[Column]:
    """Return the columns of the score table for groups by ``keys``."""
    columns = [
        *key_columns(keys),
        Column("right", lambda row: f"{row['hits']} of {row['n']}"),
        Column("in % (interval)", _interval, wide=True),
        Column("chance", _by_chance),
        Column("coin", lambda row: p_value(row["p_coin"]), wide=True),
        Column("base", lambda row: p_value(row["p_base"])),
        Column("timing", lambda row: p_value(row["p_timing"])),
        Column("field", lambda row: p_value(row["p_field"])),
        Column("apart", lambda row: str(row["n_effective"])),
    ]
    if has_weights:
        columns.append(Column("weighted", lambda row: fraction(row["weighted_hit_rate"])))
    columns.append(Column("verdict", lambda row: row["verdict"], "left", wraps=True))
    return columns


def beside_columns(keys: Sequence[str]) -> list[Column]:
    """Return the columns of what stands beside the rates."""
    return [
        *key_columns(keys),
        Column("not a call", _text("not_a_call")),
        Column("open", _text("open")),
        Column("void", _text("void")),
        Column("early", _text("early"), wide=True),
        Column("undated right", _imputed, wide=True),
        Column("withdrawn right", _withdrawn, wide=True),
        Column("stated", _text("n_probability")),
        Column("Brier", lambda row: decimal(row["brier"])),
        Column("skill", lambda row: decimal(row["brier_skill"], digits=2)),
        Column("evidence", _evidence),
    ]


def _evidence(row: dict[str, Any]) -> str:
    """Return the larger of the two e-values, with the day on which it passed."""
    low = row["e_value_low"] > row["e_value"]
    value = row["e_value_low"] if low else row["e_value"]
    passed = row["e_passed_low_on"] if low else row["e_passed_on"]
    shown = f"{value:,.0f}" if value >= 100 else f"{value:.1f}"
    return shown + (" low" if low else "") + (f", {passed}" if passed else "")


def has_something_beside(row: dict[str, Any]) -> bool:
    """Return whether a group has anything but matured calls without probabilities."""
    names = (
        "not_a_call",
        "open",
        "void",
        "early",
        "imputed_n",
        "withdrawn_n",
        "n_probability",
        "e_passed_on",
        "e_passed_low_on",
    )
    return any(row[name] for name in names)


SCORE_GUIDE = (
    "right: calls that came right, of all that matured with a stated date. chance: how many "
    "would have with no skill, from each market's own past. Then four hurdles, each the share "
    "of cases in which luck alone does as well or better: against a coin; against that past "
    "(base); with the same calls made at other times (timing); and as the best of all records "
    "in the table that are long enough (field). apart: windows without overlap."
)
BESIDE_GUIDE = (
    "Outside the rates: open and void calls, calls settled early whose date has not come, and "
    "calls without a stated date. Withdrawn calls count in the rates. stated: calls with a "
    "probability. Brier: mean squared distance of stated probabilities and outcomes, 0 is "
    "best; skill: how much of the Brier score of chance is saved. evidence: an e-value that "
    "may be looked at on any day, open calls counted as lost, and the day on which it first "
    "reached one over the level; low: for worse than chance."
)


def error_columns(keys: Sequence[str]) -> list[Column]:
    """Return the columns of the table of forecast errors for groups by ``keys``."""
    return [
        *key_columns(keys),
        Column("forecast", _text("forecast"), "left"),
        Column("right", lambda row: f"{row['hits']} of {row['n']}"),
        Column("in %", lambda row: fraction(row["hit_rate"])),
        Column("stated", lambda row: fraction(row["stated_rate"])),
        Column("at any time", lambda row: _text_of(row["any_time_hits"])),
        Column("covered", lambda row: fraction(row["covered"])),
        Column("loss", lambda row: decimal(row["loss"], digits=4)),
        Column("of no skill", lambda row: decimal(row["loss_reference"], digits=4)),
        Column("saved", lambda row: decimal(row["skill"], digits=2)),
    ]


def _text_of(value: object) -> str:
    return "–" if value is None else str(value)


ERROR_GUIDE = (
    "right: reached at the deadline, or inside the range, the outer quantiles, the bin given "
    "most. stated: mean probability of that. covered: median share of the way to a target. "
    "loss: mean error of a target, interval score, pinball loss (parts of the reference price, "
    "points for yields) or ranked probability score; of no skill: that of no change or of past "
    "moves, on the calls that have it; saved: how much of it the forecaster saves, 1 is best."
)


def change_columns() -> list[Column]:
    """Return the columns of the list of changed results."""
    names = ("ref", "before", "after", "because")
    return [Column(name, _text(name), "left", wraps=name == "because") for name in names]


def _outcome(row: dict[str, Any]) -> str:
    said = row["outcome"] or "not settled"
    return f"{said}: {row['reason']}" if row["reason"] else said


def call_columns() -> list[Column]:
    """Return the columns of the list of calls."""
    return [
        Column("ref", _text("ref"), "left"),
        Column("forecaster", _text("forecaster"), "left"),
        Column("said", lambda row: row["said_at"][:10], "left"),
        Column("instrument", _text("instrument"), "left"),
        Column("claim", _text("claim"), "left", wraps=True),
        Column("horizon", _text("horizon"), "left", wraps=True),
        Column("chance", lambda row: fraction(row["chance"])),
        Column("outcome", _outcome, "left", wraps=True),
    ]


def issue_lines(issues: Iterable[Issue]) -> list[str]:
    """Return one line an issue: where, what, the value, what to do."""
    lines = []
    for issue in issues:
        where = ", ".join(
            part
            for part in (
                issue.file,
                f"line {issue.line}" if issue.line is not None else "",
                issue.column or "",
            )
            if part
        )
        value = f" [{issue.value}]" if issue.value else ""
        hint = f" {issue.hint}" if issue.hint else ""
        prefix = "note: " if issue.severity == "note" else ""
        lines.append(f"{prefix}{where}: {issue.message}{value}.{hint}")
    return lines
