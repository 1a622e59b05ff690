"""Price histories as flat arrays, and the windows of them in which a claim is judged."""

from __future__ import annotations

from dataclasses import dataclass, fields
from functools import cached_property
from typing import TYPE_CHECKING, Any, TypeAlias

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Sequence

FloatArray: TypeAlias = "np.ndarray[Any, np.dtype[np.float64]]"
IntArray: TypeAlias = "np.ndarray[Any, np.dtype[np.int64]]"
BoolArray: TypeAlias = "np.ndarray[Any, np.dtype[np.bool_]]"


@dataclass(frozen=True)
class Bars:
    """The daily prices of many instruments, laid end to end, oldest first.

    A *position* is an index into the flat arrays. Prices are in continuous units: the price
    of the day times ``factor``, so that a split or rebase leaves no step.

    Attributes
    ----------
    symbols : tuple of str, length n_instruments
        Instrument ``i`` owns positions ``offsets[i]`` up to ``offsets[i + 1]``.
    offsets : ndarray of int, shape (n_instruments + 1,)
        Where each history begins; empty histories are allowed.
    day : ndarray of int, shape (n_bars,)
        Local date of the session in days since 1970-01-01, strictly rising by instrument.
    high, low, close : ndarray of float, shape (n_bars,)
        Finite; high and low equal the close where the file had none.
    has_range : ndarray of bool, shape (n_bars,)
        Whether high and low were in the file.
    factor : ndarray of float, shape (n_bars,)
        Continuous price over the price of the day.
    """

    symbols: tuple[str, ...]
    offsets: IntArray
    day: IntArray
    high: FloatArray
    low: FloatArray
    close: FloatArray
    has_range: BoolArray
    factor: FloatArray

    @cached_property
    def _calendar(self) -> tuple[IntArray, IntArray, IntArray, IntArray]:
        """A table from (instrument, day) to position, with its own offsets and first days."""
        starts, ends = self.offsets[:-1], self.offsets[1:]
        filled = ends > starts
        counts = np.ones(len(self.day), dtype=np.int64)
        counts[:-1] = np.diff(self.day)
        counts[ends[filled] - 1] = 1
        table = np.repeat(np.arange(len(self.day), dtype=np.int64), counts)
        begins = np.concatenate(([0], np.cumsum(counts)))
        safe_starts = np.minimum(starts, max(len(self.day) - 1, 0))
        first_day = self.day[safe_starts] if len(self.day) else np.zeros_like(starts)
        lengths = begins[ends] - begins[starts]
        return table, begins[starts], first_day, lengths

    def at_or_before(self, instrument: IntArray, day: IntArray) -> IntArray:
        """Return the position of the last session on or before each day.

        Parameters
        ----------
        instrument, day : ndarray of int, shape (n,)
            Instrument numbers, and days since 1970-01-01.

        Returns
        -------
        ndarray of int, shape (n,)
            ``offsets[instrument] - 1`` where the history begins later or is empty.
        """
        table, begin, first_day, length = self._calendar
        ahead = np.minimum(day - first_day[instrument], length[instrument] - 1)
        if not len(table):
            return self.offsets[instrument] - 1
        where = np.minimum(begin[instrument] + np.maximum(ahead, 0), len(table) - 1)
        return np.where(ahead < 0, self.offsets[instrument] - 1, table[where])

    def at_or_after(self, instrument: IntArray, day: IntArray) -> IntArray:
        """Return the position of the first session on or after each day.

        Returns
        -------
        ndarray of int, shape (n,)
            ``offsets[instrument + 1]`` where the history ends earlier.
        """
        return self.at_or_before(instrument, day - 1) + 1


@dataclass(frozen=True)
class Windows:
    """Where claims are judged; all arrays are positions, shape (n,).

    Attributes
    ----------
    floor : ndarray of int
        First bar of the instrument: how far back a claim may look.
    reference : ndarray of int
        The session whose close is the reference price.
    first, last : ndarray of int
        The path window, both ends included; ``last`` is the deadline session.
    additive : ndarray of bool
        Whether prices are compared by difference instead of ratio.
    """

    floor: IntArray
    reference: IntArray
    first: IntArray
    last: IntArray
    additive: BoolArray

    def __len__(self) -> int:
        return len(self.reference)

    def take(self, rows: Any) -> Windows:  # noqa: ANN401 - any numpy index
        """Return the windows at ``rows`` (a slice, a mask or an index array)."""
        return Windows(
            **{field.name: getattr(self, field.name)[rows] for field in fields(self)}
        )


def concatenate_bars(symbols: Sequence[str], columns: Sequence[dict[str, Any]]) -> Bars:
    """Return one ``Bars`` from a history per instrument.

    Parameters
    ----------
    symbols : sequence of str, length n
        Names, in order.
    columns : sequence of dict, length n
        Arrays ``day, high, low, close, has_range, factor`` of each instrument.
    """
    lengths = [len(history["day"]) for history in columns]

    def flat(name: str, dtype: type) -> Any:  # noqa: ANN401 - dtype decides
        parts: list[Any] = [np.asarray(history[name], dtype=dtype) for history in columns]
        return np.concatenate(parts) if parts else np.zeros(0, dtype=dtype)

    return Bars(
        symbols=tuple(symbols),
        offsets=np.concatenate(([0], np.cumsum(lengths, dtype=np.int64))).astype(np.int64),
        day=flat("day", np.int64),
        high=flat("high", np.float64),
        low=flat("low", np.float64),
        close=flat("close", np.float64),
        has_range=flat("has_range", np.bool_),
        factor=flat("factor", np.float64),
    )
