"""Clocks, prices, corporate actions, losses and chances in the words of a trace."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from foresaid.claims.numbers import print_number

if TYPE_CHECKING:
    from collections.abc import Mapping

    from foresaid.model.records import Action


# what each loss is called, and the forecast without skill beside it
LOSS_WORDS = {
    "error": ("distance from the target, as a part of the reference,", "no change"),
    "interval": ("interval score, as a part of the reference,", "past moves"),
    "pinball": ("pinball loss, as a part of the reference,", "past moves"),
    "ranked": ("ranked probability score", "past moves"),
}


def action_text(action: Action) -> str:
    """Return a corporate action in words, with the factor it puts on prices."""
    numbers = {
        "ratio": action.ratio and price_text(action.ratio),
        "amount": action.amount is not None and price_text(action.amount),
        "into": action.into,
    }
    said = ", ".join(f"{name} {value}" for name, value in numbers.items() if value)
    text = f"{action.effective}: {action.kind}" + (f" ({said})" if said else "")
    if action.kind in ("split", "rebase") and action.ratio:
        factor = action.ratio if action.kind == "split" else 1.0 / action.ratio
        text += f"; prices from then on times {price_text(factor)} to compare with before"
    return text


def clock_text(minutes: float) -> str:
    """Return minutes after midnight as HH:MM."""
    return f"{int(minutes) // 60:02d}:{int(minutes) % 60:02d}"


def price_text(value: float) -> str:
    """Return a price with at most 12 significant digits."""
    return print_number(float(f"{value:.12g}"))


def loss_text(loss: str, row: Mapping[str, Any]) -> str:
    """Return the loss of a point, interval or distribution forecast, empty without one."""
    if row["loss"] is None:
        return ""
    name, reference = LOSS_WORDS[loss]
    text = f"{name} {row['loss']:.6g}"
    if row["loss_reference"] is None:
        return f"{text}; the history is too short for {reference}"
    return f"{text}, that of {reference} {row['loss_reference']:.6g}"


def chance_text(row: Mapping[str, Any], *, enough: int) -> str:
    """Return the chance of a call and what it rests on.

    ``enough`` disjoint earlier windows let the history stand alone.
    """
    counted = (
        f"the same claim came true from {row['chance_hits']} of {row['chance_windows']} "
        f"earlier starts whose windows had ended before publication "
        f"({row['chance_disjoint']} of them would not overlap)"
    )
    if row["chance"] is None:
        return "none: " + ("too little history" if row["result"] != "void" else "void")
    chance = f"{row['chance']:.6g}"
    if row["chance_model"] == "history":
        return f"{chance}: {counted}"
    model = (
        f"a driftless walk with a daily deviation of {row['chance_volatility']:.6g} gives "
        f"{row['chance_modelled']:.6g}"
    )
    if row["chance_model"] == "volatility":
        return f"{chance}: no earlier window; {model}"
    weight = row["chance_disjoint"] / enough
    return f"{chance}: {counted}; {model}; weight {weight:.3g} on the first"
