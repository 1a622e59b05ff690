"""Price histories as flat arrays, and the windows of them in which a claim is judged."""

from __future__ import annotations

from dataclasses import dataclass, field, fields
from functools import cached_property
from typing import TYPE_CHECKING, Any, TypeAlias

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Sequence

FloatArray: TypeAlias = "np.ndarray[Any, np.dtype[np.float64]]"
IntArray: TypeAlias = "np.ndarray[Any, np.dtype[np.int64]]"
BoolArray: TypeAlias = "np.ndarray[Any, np.dtype[np.bool_]]"

_BEYOND = 2**40  # more than any day or cell
_NO_DAYS = np.zeros(0, dtype=np.int64)


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
    total : ndarray of float, shape (n_bars,)
        Total-return level, in any unit; the close where it is not known.
    total_known : ndarray of bool, shape (n_instruments,)
        Whether ``total`` holds more than the close.
    over : ndarray of bool, shape (n_instruments,)
        Whether the instrument came to a fixed amount, so that its last price holds for good.
    reach : ndarray of int, shape (n_instruments,)
        The day up to which it is known what the last close was.
    total_until, total_since : ndarray of int, shape (n_instruments,)
        ``total`` is more than the close for what ends by the one day, or on or after the other.
    """

    symbols: tuple[str, ...]
    offsets: IntArray
    day: IntArray
    high: FloatArray
    low: FloatArray
    close: FloatArray
    has_range: BoolArray
    factor: FloatArray
    total: FloatArray
    total_known: BoolArray
    over: BoolArray
    reach: IntArray = field(default_factory=lambda: _NO_DAYS)
    total_until: IntArray = field(default_factory=lambda: _NO_DAYS)
    total_since: IntArray = field(default_factory=lambda: _NO_DAYS)

    def __post_init__(self) -> None:
        """Fill in what is not stated: where prices reach to, and when totals are known."""
        if len(self.reach) != len(self.over):
            object.__setattr__(self, "reach", self.last_day)
        if len(self.total_since) != len(self.over):
            until = np.where(self.total_known, _BEYOND, -_BEYOND)
            object.__setattr__(self, "total_until", until)
            object.__setattr__(self, "total_since", np.full(len(self.over), _BEYOND))

    def knows_total(self, instrument: IntArray, day: IntArray) -> BoolArray:
        """Return where total returns that end on a day are known by then, shape (n,)."""
        known: BoolArray = (day <= self.total_until[instrument]) | (
            day >= self.total_since[instrument]
        )
        return known

    @cached_property
    def _table(self) -> tuple[IntArray, IntArray, IntArray, IntArray]:
        """A dense table from day to position, one stretch an instrument.

        A cell holds four times the position of the last session by that day, plus 1 where
        the day is a session itself, or plus 2 where it is after the last one. Returns the
        table, and for each instrument what to add to a day to get its cell, and the first
        and last cell. The first cell stands for all days before the history, the last for
        all days after it.
        """
        starts, ends = self.offsets[:-1], self.offsets[1:]
        filled = np.flatnonzero(ends > starts)
        counts = np.ones(len(self.day), dtype=np.int64)
        counts[:-1] = np.diff(self.day)
        counts[ends[filled] - 1] = 1
        pads = 2 * np.arange(len(starts))
        cells = np.concatenate(([0], np.cumsum(counts)))
        first = cells[starts] + pads
        last = cells[ends] + pads + 1
        # half the bytes of an int64 keep twice as much of the table in the cache
        table = np.empty(cells[-1] + 2 * len(starts), dtype=np.int32)
        inner = np.ones(len(table), dtype=bool)
        inner[first] = inner[last] = False
        sessions = np.repeat(4 * np.arange(len(self.day)), counts)
        sessions[cells[:-1]] += 1
        table[inner] = sessions
        table[first] = 4 * (starts - 1)
        table[last] = 4 * (ends - 1) + 2
        # where there is no history every day is after it
        shift = np.full(len(starts), _BEYOND, dtype=np.int64)
        shift[filled] = first[filled] + 1 - self.day[starts[filled]]
        return table, shift, first, last

    @cached_property
    def longest_gap(self) -> int:
        """The most days from one session to the next in any history, 0 without any."""
        gaps = np.diff(self.day)
        inside = np.ones(len(self.day), dtype=bool)
        inside[self.offsets[:-1][np.diff(self.offsets) > 0]] = False
        return int(gaps[inside[1:]].max(initial=0))

    @cached_property
    def last_position(self) -> IntArray:
        """The position of each last session, before the first where there is none."""
        return self.offsets[1:] - 1

    @cached_property
    def last_day(self) -> IntArray:
        """The day of each instrument's last session, far in the past where it has none."""
        ends = self.offsets[1:]
        filled = ends > self.offsets[:-1]
        result = np.full(len(ends), np.iinfo(np.int32).min, dtype=np.int64)
        result[filled] = self.day[ends[filled] - 1]
        return result

    def calendar(self, instrument: IntArray) -> Calendar:
        """Return the calendars of these instruments, shape (n,), to look days up in."""
        table, shift, first, last = self._table
        # numbers are in range; to say so spares numpy the check
        own = (one.take(instrument, mode="clip") for one in (shift, first, last))
        return Calendar(table, *own)

    def at_or_before(self, instrument: IntArray, day: IntArray) -> IntArray:
        """Return the position of the last session on or before each day."""
        return self.calendar(instrument).look_up(day)[0]


@dataclass(frozen=True)
class Calendar:
    """The sessions of n instruments, one for each day that will be looked up."""

    table: IntArray
    shift: IntArray
    first: IntArray
    last: IntArray

    def look_up(self, day: IntArray) -> tuple[IntArray, IntArray, BoolArray]:
        """Return the last session on or before each day.

        Parameters
        ----------
        day : ndarray of int, shape (n,)
            Days since 1970-01-01.

        Returns
        -------
        position : ndarray of int, shape (n,)
            The position before the first where a history begins later or is empty.
        is_session : ndarray of int, shape (n,)
            1 where the day itself is a session, else 0.
        is_beyond : ndarray of bool, shape (n,)
            Whether the day is after the last session.
        """
        cell = day + self.shift
        np.minimum(cell, self.last, out=cell)
        np.maximum(cell, self.first, out=cell)
        found = self.table.take(cell, mode="clip")
        is_session, is_beyond = found & 1, (found & 2).astype(bool)
        found >>= 2
        return found.astype(np.int64), is_session.astype(np.int64), is_beyond


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
    legs : ndarray of int, shape (n, n_legs), or None
        Numbers of the other instruments that a claim names, -1 for none; None where no claim
        names any.
    until : ndarray of int, shape (n,), or None
        Day on which the other instruments are read; None where it is that of ``last``.
    """

    floor: IntArray
    reference: IntArray
    first: IntArray
    last: IntArray
    additive: BoolArray
    legs: IntArray | None = None
    until: IntArray | None = None

    def __len__(self) -> int:
        return len(self.reference)

    def take(self, rows: Any) -> Windows:  # noqa: ANN401 - any numpy index
        """Return the windows at ``rows`` (a slice, a mask or an index array)."""
        kept: dict[str, Any] = {}
        for one in fields(self):
            column = getattr(self, one.name)
            kept[one.name] = None if column is None else column[rows]
        return Windows(**kept)


def concatenate_bars(symbols: Sequence[str], columns: Sequence[dict[str, Any]]) -> Bars:
    """Return one ``Bars`` from a history per instrument.

    Parameters
    ----------
    symbols : sequence of str, length n
        Names, in order.
    columns : sequence of dict, length n
        Arrays ``day, high, low, close, has_range, factor, total`` of each instrument, and the
        flags ``total_known`` and ``over`` (false where it is missing); ``reach``,
        ``total_until`` and ``total_since`` where they are known for all of them.
    """
    lengths = [len(history["day"]) for history in columns]

    def flat(name: str, dtype: type) -> Any:  # noqa: ANN401 - dtype decides
        parts: list[Any] = [np.asarray(history[name], dtype=dtype) for history in columns]
        return np.concatenate(parts) if parts else np.zeros(0, dtype=dtype)

    def stated(name: str) -> IntArray:
        known = [history[name] for history in columns if name in history]
        return np.array(known if len(known) == len(columns) else [], dtype=np.int64)

    return Bars(
        symbols=tuple(symbols),
        offsets=np.concatenate(([0], np.cumsum(lengths, dtype=np.int64))).astype(np.int64),
        day=flat("day", np.int64),
        high=flat("high", np.float64),
        low=flat("low", np.float64),
        close=flat("close", np.float64),
        has_range=flat("has_range", np.bool_),
        factor=flat("factor", np.float64),
        total=flat("total", np.float64),
        total_known=np.array([bool(h["total_known"]) for h in columns], dtype=np.bool_),
        over=np.array([bool(h.get("over", False)) for h in columns], dtype=np.bool_),
        reach=stated("reach"),
        total_until=stated("total_until"),
        total_since=stated("total_since"),
    )
