"""Two forecasters on matched calls, in sentences."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from foresaid.report.tables import p_value

if TYPE_CHECKING:
    from collections.abc import Mapping


def comparison_lines(row: Mapping[str, Any]) -> list[str]:
    """Return what a comparison found, one sentence a line.

    ``row`` has the columns of ``foresaid compare --format json``.
    """
    first, second = row["first"], row["second"]
    lines = [
        f"{row['matched']} matched calls in {row['windows_disjoint']} windows that do not "
        f"overlap: {first} right in {row['first_right']}, {second} in {row['second_right']}.",
        f"{first} alone was right in {row['only_first']}, {second} alone in "
        f"{row['only_second']}: p = {p_value(row['p_only'])}, two-sided, exact, calls taken as "
        "independent.",
    ]
    what = "mean Brier score" if row["loss"] == "Brier" else "share wrong"
    losses = f"{what}: {row['first_loss']:.3f} and {row['second_loss']:.3f}"
    if row["p_loss"] is None:
        lines.append(
            f"{losses}; not to be tested: too few pairs, or no difference that varies."
        )
    else:
        lines.append(
            f"{losses}; p = {p_value(row['p_loss'])}, two-sided, with up to "
            f"{row['horizon']} windows in a row depending on each other (Diebold-Mariano, "
            "corrected for small samples)."
        )
    return lines
