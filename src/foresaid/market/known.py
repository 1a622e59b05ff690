"""What is known of prices on one day: the arrays that settlement and chance read."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np

from foresaid.market.closures import days_in

if TYPE_CHECKING:
    from foresaid.market.actions import FactorSteps
    from foresaid.market.doubts import Doubts
    from foresaid.model.bars import Bars, BoolArray, FloatArray, IntArray


@dataclass(frozen=True)
class Venue:
    """What settlement needs to know of each instrument; arrays (n_instruments,).

    Attributes
    ----------
    opens, closes : ndarray of int
        Local minutes after midnight.
    hours_known : ndarray of bool
        Whether the hours are the instrument's own, not the codebook's default.
    additive : ndarray of bool
        Whether prices are compared by difference.
    weekends : ndarray of bool
        Whether it trades on Saturdays and Sundays.
    total_return : ndarray of bool
        Whether its only prices are a total-return series, which has no levels.
    market : ndarray of str
        Market code, empty where it is not known; instruments of one market share its days.
    """

    opens: IntArray
    closes: IntArray
    hours_known: BoolArray
    additive: BoolArray
    weekends: BoolArray
    total_return: BoolArray
    market: np.ndarray[Any, np.dtype[np.object_]]


_SPAN = 2**33  # more than any day, so that a number and a day make one key
_FIRST = -(2**31)


@dataclass(frozen=True)
class Market:
    """Everything known about prices on one day, in one vintage.

    Attributes
    ----------
    bars, venue : Bars, Venue
        Prices in continuous units, and what is known of each instrument.
    steps : tuple of FactorSteps
        Factors of each instrument.
    as_of_day : int
        The day, since 1970-01-01.
    ended_day : ndarray of int, shape (n_instruments,)
        When an instrument ended, far in the future for those that go on.
    file_of : ndarray of int, shape (n_instruments,)
        The instrument in whose file the prices stand: itself, unless they are converted.
    aside : tuple of ndarray of int
        Days of each instrument on which there is a row but no one traded, rising.
    halts : tuple of ndarray of int, shape (k, 2)
        First day of each halt and the day trading resumed.
    doubts : Doubts or None
        Prices in query, None where there are none.
    """

    bars: Bars
    venue: Venue
    steps: tuple[FactorSteps, ...]
    as_of_day: int
    ended_day: IntArray
    file_of: IntArray
    aside: tuple[IntArray, ...]
    halts: tuple[IntArray, ...]
    doubts: Doubts | None = None

    @property
    def is_over(self) -> BoolArray:
        """Whether each instrument came to a fixed amount, shape (n_instruments,)."""
        return self.bars.over

    @cached_property
    def longest_gap(self) -> int:
        """The most days from a session to the next one, or to the last day that is known."""
        bars = self.bars
        goes_on = ~bars.over & (bars.last_position >= bars.offsets[:-1])
        tails = np.where(goes_on, bars.reach - bars.last_day, 0)
        # a fixed amount may come long after the last session
        return max(bars.longest_gap, int(tails.max(initial=0)))

    @cached_property
    def halted(self) -> IntArray:
        """The numbers of the instruments that were ever halted."""
        return np.flatnonzero([len(spans) > 0 for spans in self.halts]).astype(np.int64)

    def is_halted(self, instrument: IntArray, day: IntArray) -> BoolArray:
        """Return where trading was halted on a day that has passed, shape (n,)."""
        result = np.zeros(len(day), dtype=bool)
        for number in self.halted:
            rows = np.flatnonzero((instrument == number) & (day <= self.as_of_day))
            result[rows] = days_in(self.halts[number], day[rows])
        return result

    def halts_between(
        self, instrument: IntArray, after: IntArray, until: IntArray
    ) -> BoolArray:
        """Return where a halt lies on any day later than one and no later than another."""
        result = np.zeros(len(instrument), dtype=bool)
        for number in self.halted:
            rows = np.flatnonzero(instrument == number)
            for begin, resumed in self.halts[number]:
                result[rows] |= (begin <= until[rows]) & (resumed > after[rows] + 1)
        return result

    @cached_property
    def _factor_keys(self) -> tuple[IntArray, FloatArray, BoolArray]:
        """Return a key of instrument and day for each step, its factor, and who has steps."""
        counts = np.array([len(one.day) for one in self.steps], dtype=np.int64)
        number = np.repeat(np.arange(len(counts)), counts + 1)
        days = [np.concatenate(([_FIRST], one.day)) for one in self.steps]
        products = [one.product for one in self.steps]
        flat = np.concatenate(days) if days else np.zeros(0, dtype=np.int64)
        factors = np.concatenate(products) if products else np.zeros(0)
        return number * _SPAN + flat, factors, counts > 0

    def level_factor(self, instrument: IntArray, day: IntArray) -> FloatArray:
        """Return continuous price over a price stated on that day, shape (n,)."""
        keys, factors, is_stepped = self._factor_keys
        result = np.ones(len(day))
        rows = np.flatnonzero(is_stepped[instrument])
        wanted = instrument[rows] * _SPAN + day[rows]
        result[rows] = factors[np.searchsorted(keys, wanted, side="right") - 1]
        return result

    @cached_property
    def _missing_keys(self) -> IntArray:
        """Return a key of instrument and day for each session that its file lacks, rising.

        Instruments of one market share their trading days. What was converted lacks what the
        file lacks. Stale rows, halts and days from the end of an instrument on are not
        missing, and the days of terms are no trading days.
        """
        codes = self.venue.market
        found = [np.zeros(0, dtype=np.int64)]
        for code in sorted(set(codes.tolist()) - {""}):
            own = {
                int(i): self._own_days(int(i)) for i in np.unique(self.file_of[codes == code])
            }
            days = np.unique(np.concatenate(list(own.values())))
            for number in np.flatnonzero(codes == code):
                traded = own[int(self.file_of[number])]
                lacks = days[~np.isin(days, traded) & (days < self.ended_day[number])]
                lacks = lacks[~np.isin(lacks, self.aside[number])]
                lacks = lacks[~days_in(self.halts[number], lacks)]
                found.append(number * _SPAN + lacks)
        return np.sort(np.concatenate(found))

    def _own_days(self, number: int) -> IntArray:
        """Return the sessions of one instrument before its end."""
        day = self.bars.day[self.bars.offsets[number] : self.bars.offsets[number + 1]]
        before: IntArray = day[day < self.ended_day[number]]
        return before

    @property
    def lacks_sessions(self) -> bool:
        """Whether any file lacks a session of its market."""
        return len(self._missing_keys) > 0

    def lacks_session(
        self, instrument: IntArray, begin: IntArray, until: IntArray
    ) -> BoolArray:
        """Return where a file lacks a session from one day through another, shape (n,)."""
        key = instrument * _SPAN
        first = np.searchsorted(self._missing_keys, key + begin)
        return np.searchsorted(self._missing_keys, key + until, side="right") > first

    def in_file_units(self, price: FloatArray, positions: IntArray) -> FloatArray:
        """Return continuous prices as they stand in the file, shape (n,).

        Undoing a factor, a conversion or an exchange may leave an error in the last places:
        a price that 12 significant digits state but for that error is given with those.
        """
        factor = self.bars.factor[positions]
        plain = price / factor
        with np.errstate(divide="ignore", invalid="ignore"):
            places = np.power(10.0, 11.0 - np.floor(np.log10(np.abs(plain))))
            short = np.where(np.isfinite(places), np.round(plain * places) / places, plain)
        noise = 8.0 * np.finfo(np.float64).eps * np.abs(plain)
        return np.where(np.abs(short - plain) <= noise, short, plain)
