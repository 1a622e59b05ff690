"""Corporate actions as factors that keep a price history free of steps.

A price of the day times its factor is a *continuous* price. The factor of a session is the
product of all ratios in force by then, so it never depends on what happened later.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from foresaid.model.days import day_number

if TYPE_CHECKING:
    from collections.abc import Iterable

    from foresaid.model.bars import FloatArray, IntArray
    from foresaid.model.records import Action


@dataclass(frozen=True)
class FactorSteps:
    """When the factor of one instrument changes, and to what.

    Attributes
    ----------
    day : ndarray of int, shape (n,)
        Effective days since 1970-01-01, rising.
    product : ndarray of float, shape (n + 1,)
        The factor before the first day, then from each day on.
    """

    day: IntArray
    product: FloatArray

    def at(self, day: IntArray) -> FloatArray:
        """Return the factor in force on each day, shape (m,)."""
        return self.product[np.searchsorted(self.day, day, side="right")]


def factor_steps(actions: Iterable[Action]) -> FactorSteps:
    """Return the factor steps of one instrument's splits and rebases.

    A split of ``ratio`` new shares for each old one divides the price by the ratio, so the
    continuous price multiplies it back; a rebase to ``ratio`` times the old level is divided
    out.

    Examples
    --------
    >>> from datetime import date
    >>> from foresaid.model.records import Action
    >>> steps = factor_steps([Action("ABC", date(1970, 1, 11), "split", ratio=3.0)])
    >>> steps.at(np.array([9, 10])).tolist()
    [1.0, 3.0]
    """
    days, factors = [], []
    for action in sorted(actions, key=lambda one: one.effective):
        if action.ratio and action.kind in ("split", "rebase"):
            days.append(day_number(action.effective))
            factors.append(action.ratio if action.kind == "split" else 1.0 / action.ratio)
    product = np.concatenate(([1.0], np.cumprod(np.array(factors, dtype=np.float64))))
    return FactorSteps(np.array(days, dtype=np.int64), product)
