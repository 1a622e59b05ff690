"""Where the price stood at the end of earlier windows: the forecast anyone could have made."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from foresaid.chance.base_rate import disjoint_in_history, earlier_windows, signatures

if TYPE_CHECKING:
    from foresaid.chance.base_rate import Starts
    from foresaid.model.bars import Bars, FloatArray


def past_moves(bars: Bars, starts: Starts, *, enough: int) -> list[FloatArray]:
    """Return the ends of all windows of a call's length that had ended before it.

    Parameters
    ----------
    bars : Bars
        Prices; only those before each call's reference are looked at.
    starts : Starts
        The n calls.
    enough : int
        Windows without overlap that the history has to hold.

    Returns
    -------
    list of ndarray of float, length n
        Closing price of each earlier window over its first one (less it where prices are
        compared by difference), sorted; empty where the history is too short.
    """
    found: list[FloatArray] = [np.zeros(0)] * len(starts.reference)
    has_enough = disjoint_in_history(bars, starts) >= enough
    for rows in signatures(starts):
        earlier = earlier_windows(bars, starts, rows)
        if earlier is None:
            continue
        first, last = bars.close[earlier.all.reference], bars.close[earlier.all.last]
        with np.errstate(divide="ignore", invalid="ignore"):
            moves = last - first if starts.additive[rows[0]] else last / first
        for row, known in zip(rows, earlier.known(bars, starts, rows), strict=True):
            if has_enough[row]:
                own = moves[:known]
                found[row] = np.sort(own[np.isfinite(own)])
    return found
