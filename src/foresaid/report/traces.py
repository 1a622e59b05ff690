"""A trace as text."""

from __future__ import annotations

import textwrap
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Sequence

ALTERNATE_WORDS = {
    "deadline": "judged at the deadline close alone",
    "any_time": "judged on any high or low of the window",
    "closes": "judged on closes instead of highs and lows",
    "price_return": "judged on price returns, dividends left aside",
    "shorter": "with the codebook's shorter length for the imputed horizon",
    "longer": "with the codebook's longer length for the imputed horizon",
    "close_before": "measured from the close before publication",
}


def trace_text(
    call: dict[str, Any],
    steps: Sequence[tuple[str, str]],
    prices: Sequence[dict[str, Any]],
    alternates: dict[str, str],
    *,
    width: int,
) -> str:
    """Return the trace as lines of at most ``width`` characters."""
    lines = [f"{call['ref']}: {call['outcome']}", ""]
    for name, text in steps:
        lines += _entry(name, text, width)
    for price in prices:
        numbers = ", ".join(
            f"{field} {price[field]!r}"
            for field in ("open", "high", "low", "close")
            if price[field] is not None
        )
        text = f"{price['session']} ({price['use']}): {numbers}; {price['file']} sha256 "
        lines += _entry("price", text + str(price["sha256"]), width)
    for name, result in alternates.items():
        words = ALTERNATE_WORDS.get(name, name.replace("_", " "))
        lines += _entry("other reading", f"{words}: {result}", width)
    return "\n".join(lines)


def _entry(name: str, text: str, width: int) -> list[str]:
    label = f"{name:<14}"
    return textwrap.wrap(
        label + text,
        width=max(width, 60),
        subsequent_indent=" " * 14,
        break_long_words=False,
        break_on_hyphens=False,
    )


def trace_rows(
    steps: Sequence[tuple[str, str]],
    prices: Sequence[dict[str, Any]],
    alternates: dict[str, str],
) -> list[dict[str, str]]:
    """Return the trace as rows of step and text."""
    rows = [{"step": name, "text": text} for name, text in steps]
    for price in prices:
        text = "; ".join(f"{key} {value}" for key, value in price.items())
        rows.append({"step": "price", "text": text})
    rows += [{"step": f"alt_{name}", "text": result} for name, result in alternates.items()]
    return rows
