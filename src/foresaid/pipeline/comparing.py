"""Two forecasters on the calls that both made: same instrument, same window."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from foresaid.ledger import queries
from foresaid.model.errors import UsageError
from foresaid.pipeline.groups import days, floats, grouped_calls, is_headline
from foresaid.pipeline.scoring import leans_against
from foresaid.score.equal_accuracy import diebold_mariano, paired_test
from foresaid.score.overlap import disjoint_windows

if TYPE_CHECKING:
    import pandas as pd

    from foresaid.ledger.store import Ledger
    from foresaid.model.bars import BoolArray, FloatArray

COMPARE_COLUMNS = (
    "first", "second", "matched", "windows_disjoint", "first_right", "second_right",
    "only_first", "only_second", "p_only", "horizon", "loss", "n_loss", "first_loss",
    "second_loss", "t_loss", "p_loss",
)  # fmt: skip
_WINDOW = ["instrument", "reference_session", "deadline_session"]


def compare_forecasters(ledger: Ledger, first: str, second: str) -> dict[str, Any]:
    """Return how two forecasters did on matched calls, with ``COMPARE_COLUMNS``.

    Matched are matured calls with a stated horizon on the same instrument whose windows have
    the same reference and deadline session; where one of the two has several of them, the
    earliest counts. The loss is the Brier score where both state a probability on every
    matched call, otherwise 0 for right and 1 for wrong.

    Raises
    ------
    UsageError
        If a forecaster is not known, the two are the same, or nothing matches.
    """
    known = queries.forecasters(ledger)
    for handle in (first, second):
        if handle not in known:
            raise UsageError(f"There is no forecaster {handle!r} in this ledger.")
    if first == second:
        raise UsageError("Name two different forecasters.")
    found = grouped_calls(ledger, [])
    table = found.table[is_headline(found.table)].copy()
    table["right"] = (table["result"] == "hit").to_numpy(dtype=bool) ^ leans_against(table)
    pairs = _matched(table, first, second)
    if pairs.empty:
        raise UsageError(
            f"{first} and {second} have no matured call on the same instrument with the same "
            "window, so there is nothing to compare."
        )
    return {"first": first, "second": second} | _compared(pairs)


def _matched(table: pd.DataFrame, first: str, second: str) -> pd.DataFrame:
    """Return the matched calls, one row each, in the order of their windows."""
    sides = []
    for handle in (first, second):
        own = table[table["forecaster"] == handle].sort_values(["said_at", "call"])
        sides.append(own.drop_duplicates(_WINDOW))
    pairs = sides[0].merge(sides[1], on=_WINDOW, suffixes=("_1", "_2"))
    return pairs.sort_values(["reference_session", "deadline_session", "instrument"])


def _compared(pairs: pd.DataFrame) -> dict[str, Any]:
    right = [pairs[f"right_{side}"].to_numpy(dtype=bool) for side in (1, 2)]
    starts, ends = days(pairs["reference_session"]), days(pairs["deadline_session"])
    test = paired_test(*right)
    name, losses = _losses(pairs, right)
    horizon = _longest_run(starts, ends)
    found = diebold_mariano(*losses, horizon=horizon)
    return {
        "matched": len(pairs),
        "windows_disjoint": disjoint_windows(starts, ends),
        "first_right": int(right[0].sum()),
        "second_right": int(right[1].sum()),
        "only_first": test.only_first,
        "only_second": test.only_second,
        "p_only": test.p_two_sided,
        "horizon": horizon,
        "loss": name,
        "n_loss": len(losses[0]),
        "first_loss": float(losses[0].mean()),
        "second_loss": float(losses[1].mean()),
        "t_loss": found.t if found else None,
        "p_loss": found.p_two_sided if found else None,
    }


def _losses(
    pairs: pd.DataFrame, right: list[BoolArray]
) -> tuple[str, tuple[FloatArray, FloatArray]]:
    """Return which loss is compared, and the losses of both."""
    stated: list[FloatArray] = [floats(pairs[f"probability_{side}"]) for side in (1, 2)]
    if all(np.isfinite(one).all() for one in stated):
        came: list[FloatArray] = [
            floats((pairs[f"result_{side}"] == "hit").astype(float)) for side in (1, 2)
        ]
        return "Brier", ((stated[0] - came[0]) ** 2, (stated[1] - came[1]) ** 2)
    wrong = [(~one).astype(np.float64) for one in right]
    return "wrong", (wrong[0], wrong[1])


def _longest_run(starts: Any, ends: Any) -> int:  # noqa: ANN401 - int arrays
    """Return how many windows in a row overlap at most: a window and the ones it reaches."""
    reached = np.searchsorted(starts, ends, side="left")
    return int(np.max(reached - np.arange(len(starts)), initial=1))
