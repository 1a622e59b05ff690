"""A planned test in sentences."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from foresaid.report.tables import fraction, p_value

if TYPE_CHECKING:
    from collections.abc import Mapping


def plan_lines(row: Mapping[str, Any]) -> list[str]:
    """Return what a plan comes to, one sentence a line.

    ``row`` has the columns of ``foresaid power --format json``.
    """
    test = f"level {row['level']:g}, one-sided"
    if row["field"] > 1:
        test += f", best of {row['field']} records"
    if row["overlap"] > 1.0:
        test += f", {row['overlap']:.3g} calls to a window"
    lines = []
    if row["forecaster"]:
        lines.append(
            f"{row['forecaster']}: {row['n']} matured calls, right by chance in "
            f"{fraction(row['chance'], digits=1)} of them."
        )
    needed = row["calls_needed"]
    enough = "no number of calls is enough" if needed is None else f"takes {needed:,} calls"
    lines.append(
        f"To find {fraction(row['skill'], digits=1)} right against "
        f"{fraction(row['chance'], digits=1)} by chance, with power "
        f"{fraction(row['power'])} ({test}): {enough}."
    )
    if row["n"] is not None:
        lines += _with_calls(row)
    lines.append(
        "Calls are taken as independent but for the overlap; calls on markets that move "
        "together need more."
    )
    return lines


def _with_calls(row: Mapping[str, Any]) -> list[str]:
    lines = [f"{row['n']} calls find it with power {fraction(row['achieved_power'])}."]
    if row["detectable_skill"] is None:
        lines.append("Even a forecaster who is always right would not show it surely.")
    else:
        lines.append(
            f"What they find with power {fraction(row['power'])} is "
            f"{fraction(row['detectable_skill'], digits=1)} right or more."
        )
    lines.append(
        f"All right would have given p = {p_value(row['best_possible_p'])} against chance."
    )
    return lines
