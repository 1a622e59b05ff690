"""Kernels: whether a claim came true in a window, for many windows at once.

A kernel sees prices, windows and *marks*, nothing else. A mark is a threshold relative to the
reference price: a ratio, or a difference for instruments whose price may be negative. The
same kernel therefore judges a claim at its own start, at every earlier start (base rate) and
at shifted starts (null worlds).
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass
from enum import Enum
from typing import TYPE_CHECKING, Literal, NamedTuple

import numpy as np

if TYPE_CHECKING:
    from foresaid.model.bars import Bars, BoolArray, FloatArray, IntArray, Windows


class Over(Enum):
    """Which sessions of a window have to meet a bound."""

    END = "the deadline session"
    ANY = "any session"
    ALL = "every session"


class On(Enum):
    """Which price of a session is looked at."""

    CLOSE = "close"
    RANGE = "high or low"


@dataclass(frozen=True, slots=True)
class Bound:
    """One comparison of prices with a mark.

    Attributes
    ----------
    side : {1, -1, 0}
        Prices must be above (1) or below (-1) the mark; 0 means beyond it as seen from the
        reference: above where the mark is higher, below where it is lower.
    strict : bool
        Whether equality fails.
    over, on : Over, On
        The sessions and the price compared. Above a mark on ``RANGE`` means the high for
        ``ANY`` and the low for ``ALL``; below, the other way round.
    mark : int
        Which of the claim's marks is meant.
    """

    side: Literal[1, -1, 0]
    strict: bool
    over: Over
    on: On = On.CLOSE
    mark: int = 0


@dataclass(frozen=True)
class Judged:
    """What a kernel found; arrays of shape (n,).

    Attributes
    ----------
    hit : ndarray of bool
        Whether the claim came true.
    decided : ndarray of int
        Position of the session that decided it: the first that settled the matter, the
        deadline session where nothing did before.
    value : ndarray of float
        The price looked at in that session, in continuous units.
    measured : ndarray of float
        What was compared with the mark, less the mark's neutral point: for prices the move
        from the reference, as a part of it or in points where differences are compared.
    final : ndarray of bool
        Whether no later session could change the answer.
    tie : ndarray of bool
        Whether the price that decided a strict comparison equals its mark.
    """

    hit: BoolArray
    decided: IntArray
    value: FloatArray
    measured: FloatArray
    final: BoolArray
    tie: BoolArray


Unsettled = Literal["void", "void once due", "open"]
ONCE_DUE: Unsettled = "void once due"


class Unfit(NamedTuple):
    """Windows in which a claim cannot be judged, and what it is then.

    It is void at once where no later session can give it a meaning, ``ONCE_DUE`` where one may
    until the deadline session is known, and open for want of prices by then.
    """

    rows: BoolArray
    reason: str
    result: Unsettled = "void"


class Kernel(ABC):
    """One way of judging windows.

    Attributes
    ----------
    bounds : tuple of Bound
        The comparisons it consists of, empty where it is more than comparisons.
    needs_legs : bool
        Whether it looks at other instruments.
    reads_range : bool
        Whether it looks at highs and lows.
    fits_anywhere : bool
        Whether marks that fit one window fit all: ``unsound`` depends on nothing else.
    """

    bounds: tuple[Bound, ...] = ()
    needs_legs: bool = False
    reads_range: bool = False
    fits_anywhere: bool = False

    @abstractmethod
    def judge(
        self, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
    ) -> Judged:
        """Judge window ``i`` against its own marks, ``marks`` of shape (n, n_marks)."""

    def hits(
        self, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
    ) -> BoolArray:
        """Return only whether each claim came true, which may cost less than ``judge``."""
        return self.judge(bars, windows, marks, tolerance).hit

    def unsound(
        self, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
    ) -> list[Unfit]:
        """Return which windows give the claim no meaning, with the reason in words."""
        del bars, windows, marks, tolerance
        return []

    def outcomes(
        self, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
    ) -> BoolArray:
        """Judge every window against every set of marks.

        Parameters
        ----------
        bars, windows : Bars, Windows
            Prices, and n windows of one instrument.
        marks : ndarray of float, shape (m, n_marks)
            Sets of marks.
        tolerance : float
            Two prices this near each other, as a part of their size, are equal.

        Returns
        -------
        ndarray of bool, shape (m, n)
            Row ``j`` is the outcome of claim ``j`` at each window.
        """
        shape = (len(windows), marks.shape[1])
        rows = [
            self.hits(bars, windows, np.broadcast_to(row, shape), tolerance) for row in marks
        ]
        return np.array(rows, dtype=bool).reshape(len(marks), len(windows))
