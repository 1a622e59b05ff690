"""The prices of one instrument as a file gives them."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from foresaid.model.bars import FloatArray, IntArray


@dataclass(frozen=True)
class PriceHistory:
    """One instrument's prices in the units of the file; arrays (n,), oldest first.

    ``high``, ``low``, ``total`` and ``volume`` are NaN where the file had none. ``aside`` holds
    the days of rows that were left out because no one traded, ``confirmed`` those whose prices
    a person has found right.
    """

    day: IntArray
    high: FloatArray
    low: FloatArray
    close: FloatArray
    total: FloatArray | None = None
    volume: FloatArray | None = None
    aside: IntArray = field(default_factory=lambda: np.zeros(0, dtype=np.int64))
    confirmed: IntArray = field(default_factory=lambda: np.zeros(0, dtype=np.int64))
