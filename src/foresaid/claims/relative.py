"""The kernel of claims that set instruments against each other by their returns."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

import numpy as np

from foresaid.claims.kernels import Judged, Kernel, Unfit

if TYPE_CHECKING:
    from foresaid.model.bars import Bars, BoolArray, FloatArray, IntArray, Windows

NO_RETURN = "quotes compared by difference have no return"


@dataclass(frozen=True)
class RelativeKernel(Kernel):
    """Return of the instrument less the best return of the others, over the same days.

    Total returns where they are known for all of them, price returns for all otherwise: never
    one leg of each. Another instrument's price on a day is its last close by then; one that
    came to a fixed amount is worth that for good.

    Attributes
    ----------
    side : {1, -1}
        1 where the instrument has to do better, -1 where it has to do worse.
    strict : bool
        Whether equality fails.
    price_only : bool
        Whether total returns are left aside.
    """

    side: Literal[1, -1]
    strict: bool
    price_only: bool = False
    needs_legs: bool = True

    def judge(
        self, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
    ) -> Judged:
        """Judge each window's difference of returns against its mark; see ``Kernel.judge``."""
        lead = self._lead(bars, windows)
        gap = lead * self.side - marks[:, 0]
        slack = np.full(len(gap), tolerance)
        hit = gap > slack if self.strict else gap >= -slack
        never, value = np.zeros_like(hit), bars.close.take(windows.last)
        tie = (np.abs(gap) <= slack) & self.strict
        return Judged(hit, windows.last, value, lead, never, tie)

    def unsound(
        self, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
    ) -> list[Unfit]:
        """Return where a compared instrument has no price, or no return has a meaning."""
        del marks, tolerance
        before, behind = np.zeros(len(windows), bool), np.zeros(len(windows), bool)
        for leg, real in self._legs(windows):
            number = np.where(real, leg, 0)
            calendar, over = bars.calendar(number), bars.over[number]
            start, _, had_ended = calendar.look_up(bars.day[windows.reference])
            no_price = (start < bars.offsets[number]) | (over & had_ended)
            # a price at or below zero is none to measure a return from
            no_price |= bars.close[np.maximum(start, 0)] <= 0
            before |= real & no_price
            behind |= real & (_until(bars, windows) > bars.reach[number])
        return [
            Unfit(windows.additive, NO_RETURN),
            Unfit(before, "no price of a compared instrument at the reference"),
            Unfit(behind, "no price of a compared instrument at the deadline", "open"),
        ]

    def _lead(self, bars: Bars, windows: Windows) -> FloatArray:
        """Return the instrument's return less the best of the others, shape (n,)."""
        total = self.uses_total(bars, windows)
        number = np.searchsorted(bars.offsets, windows.reference, side="right") - 1
        own = self._returns(bars, number, windows, total)
        best = np.full(len(windows), -np.inf)
        for leg, real in self._legs(windows):
            other = self._returns(bars, np.where(real, leg, number), windows, total)
            best = np.where(real, np.maximum(best, other), best)
        result: FloatArray = own - best
        return result

    def uses_total(self, bars: Bars, windows: Windows) -> BoolArray:
        """Return where total returns are known for every leg by the end, shape (n,)."""
        number = np.searchsorted(bars.offsets, windows.reference, side="right") - 1
        until = _until(bars, windows)
        known = bars.knows_total(number, until) & (not self.price_only)
        for leg, real in self._legs(windows):
            known &= ~real | bars.knows_total(np.where(real, leg, 0), until)
        return known

    def _legs(self, windows: Windows) -> list[tuple[IntArray, BoolArray]]:
        legs = windows.legs if windows.legs is not None else np.zeros((len(windows), 0), int)
        return [(legs[:, i], legs[:, i] >= 0) for i in range(legs.shape[1])]

    def _returns(
        self, bars: Bars, number: IntArray, windows: Windows, total: BoolArray
    ) -> FloatArray:
        calendar = bars.calendar(number)
        start, *_ = calendar.look_up(bars.day[windows.reference])
        end, *_ = calendar.look_up(_until(bars, windows))
        floor = bars.offsets[number]
        start, end = np.maximum(start, floor), np.maximum(end, floor)
        with np.errstate(divide="ignore", invalid="ignore"):
            plain = bars.close[end] / bars.close[start] - 1.0
            full = bars.total[end] / bars.total[start] - 1.0
        return np.where(total, full, plain)


def _until(bars: Bars, windows: Windows) -> IntArray:
    """Return the day on which the returns end, shape (n,)."""
    return bars.day[windows.last] if windows.until is None else windows.until
