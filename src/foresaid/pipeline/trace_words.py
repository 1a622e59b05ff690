"""Clocks, prices and corporate actions in the words of a trace."""

from __future__ import annotations

from typing import TYPE_CHECKING

from foresaid.claims.numbers import print_number

if TYPE_CHECKING:
    from foresaid.model.records import Action


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
