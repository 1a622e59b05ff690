"""How often the same words came true from earlier starts on the same instrument.

An earlier start is a session whose whole window had ended before the call was published. The
claim is carried to it through its marks, so that a level keeps its distance to the price.
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import TYPE_CHECKING, Any

import numpy as np

from foresaid.model.bars import Windows

if TYPE_CHECKING:
    from collections.abc import Iterator

    from foresaid.claims.kernels import Kernel
    from foresaid.model.bars import Bars, BoolArray, FloatArray, IntArray

CELLS = 4_000_000  # outcomes held at once


@dataclass(frozen=True)
class Starts:
    """What carries calls to other starts; arrays (n,), marks (n, n_marks).

    Attributes
    ----------
    instrument : ndarray of int
        Instrument number.
    reference : ndarray of int
        Position of the reference session: everything before it had closed at publication.
    span : ndarray of int
        From the reference session to the deadline, in days or in sessions, at least 1.
    in_sessions : ndarray of bool
        Which of the two ``span`` counts.
    lag : ndarray of int
        Sessions from the reference to the first of the path, 0 or 1.
    additive : ndarray of bool
        Whether prices are compared by difference.
    marks : ndarray of float
        Thresholds relative to the reference; NaN in columns the kind does not use.
    legs : ndarray of int, shape (n, n_legs), or None
        Numbers of the other instruments that a claim names, -1 for none.
    """

    instrument: IntArray
    reference: IntArray
    span: IntArray
    in_sessions: BoolArray
    lag: IntArray
    additive: BoolArray
    marks: FloatArray
    legs: IntArray | None = None

    def take(self, rows: IntArray | BoolArray) -> Starts:
        """Return the starts at ``rows``."""
        kept: dict[str, Any] = {}
        for field in fields(self):
            column = getattr(self, field.name)
            kept[field.name] = None if column is None else column[rows]
        return Starts(**kept)


@dataclass(frozen=True)
class BaseRate:
    """Counts over earlier starts; arrays (n,).

    Attributes
    ----------
    windows : ndarray of int
        Earlier starts whose window had ended before publication.
    hits : ndarray of int
        How many of them came true.
    disjoint : ndarray of int
        How many windows of that length fit into the history without overlap.
    """

    windows: IntArray
    hits: IntArray
    disjoint: IntArray


def base_rates(
    kernel: Kernel, n_marks: int, bars: Bars, starts: Starts, tolerance: float
) -> BaseRate:
    """Return the base-rate counts of calls of one kind.

    Parameters
    ----------
    kernel : Kernel
        The kernel that settles the calls.
    n_marks : int
        How many columns of marks the kind uses.
    bars : Bars
        Prices; only those before each call's reference are counted.
    starts : Starts
        The n calls.
    tolerance : float
        Two prices this near each other, as a part of their size, are equal.

    Returns
    -------
    BaseRate
        Counts of shape (n,).

    Notes
    -----
    Start ``t`` counts for a call with reference ``r`` when its nominal deadline (day ``t`` plus
    the span) is no later than session ``r - 1``, the last that had closed at publication,
    and the claim has a meaning there.
    """
    n = len(starts.reference)
    windows, hits = np.zeros(n, dtype=np.int64), np.zeros(n, dtype=np.int64)
    for rows in signatures(starts):
        earlier = earlier_windows(bars, starts, rows)
        if earlier is None:
            continue
        known = earlier.known(bars, starts, rows)
        marks, claim = distinct_rows(starts.marks[rows, :n_marks])
        block = max(1, CELLS // max(1, len(earlier.all)))
        for begin in range(0, len(marks), block):
            own = marks[begin : begin + block]
            fit = _fits(kernel, bars, earlier.all, own, tolerance)
            came_true = kernel.outcomes(bars, earlier.all, own, tolerance) & fit
            part = np.flatnonzero((claim >= begin) & (claim < begin + len(own)))
            at = claim[part] - begin, known[part]
            windows[rows[part]] = _counted(fit)[at]
            hits[rows[part]] = _counted(came_true)[at]
    return BaseRate(windows, hits, disjoint_in_history(bars, starts))


def distinct_rows(table: FloatArray) -> tuple[FloatArray, IntArray]:
    """Return the different rows of a table, and which of them each row is; NaN equals NaN."""
    filled = np.where(np.isnan(table), -np.inf, table)
    _, first, which = np.unique(filled, axis=0, return_index=True, return_inverse=True)
    return table[first], which.reshape(-1)


def _counted(flags: BoolArray) -> IntArray:
    """Return how many of the first k flags of each row are set, shape (m, n + 1)."""
    counts = np.zeros((flags.shape[0], flags.shape[1] + 1), dtype=np.int32)
    np.cumsum(flags, axis=1, dtype=np.int32, out=counts[:, 1:])
    return counts


def _fits(
    kernel: Kernel, bars: Bars, windows: Windows, marks: FloatArray, tolerance: float
) -> BoolArray:
    """Return at which windows each set of marks has a meaning, shape (m, n)."""
    fit = np.ones((len(marks), len(windows)), dtype=bool)
    if kernel.fits_anywhere:
        return fit
    for row, own in enumerate(marks):
        shared = np.broadcast_to(own, (len(windows), len(own)))
        for mask, *_ in kernel.unsound(bars, windows, shared, tolerance):
            fit[row] &= ~mask
    return fit


def disjoint_in_history(bars: Bars, starts: Starts) -> IntArray:
    """Return how many windows of each call's length fit before it without overlap."""
    floor = bars.offsets[starts.instrument]
    before = np.maximum(starts.reference - 1, floor)
    days = bars.day[before] - bars.day[floor]
    length = np.where(starts.in_sessions, before - floor, days)
    result: IntArray = length // np.maximum(starts.span, 1)
    return result


@dataclass(frozen=True)
class Earlier:
    """All windows of one signature, by start, with the last day each one needs."""

    all: Windows
    needs: IntArray

    def known(self, bars: Bars, starts: Starts, rows: IntArray) -> IntArray:
        """Return how many of the windows had ended before each call."""
        before = starts.reference[rows] - 1
        have = np.where(starts.in_sessions[rows], before, bars.day[before])
        return np.searchsorted(self.needs, have, side="right")


def signatures(starts: Starts) -> Iterator[IntArray]:
    """Yield the rows that share instruments, window length and lag."""
    keys = np.stack(
        [
            starts.instrument,
            starts.span,
            starts.in_sessions,
            starts.lag,
            starts.additive,
            *(() if starts.legs is None else starts.legs.T),
        ]
    )
    if keys.shape[1]:
        order = np.lexsort(keys)
        steps = np.flatnonzero((np.diff(keys[:, order]) != 0).any(axis=0)) + 1
        yield from np.split(order, steps)


def earlier_windows(bars: Bars, starts: Starts, rows: IntArray) -> Earlier | None:
    """Return every window that had ended before the latest of these calls."""
    one = rows[0]
    number, span = int(starts.instrument[one]), int(starts.span[one])
    floor = int(bars.offsets[number])
    latest = int(starts.reference[rows].max())
    at = np.arange(floor, latest, dtype=np.int64)
    if starts.in_sessions[one]:
        last = at + span
        needs = last
        ended = needs <= latest - 1
    else:
        needs = bars.day[at] + span
        ended = needs <= bars.day[latest - 1] if len(at) else np.zeros(0, dtype=bool)
        last = bars.at_or_before(np.full(len(at), number), needs)
    sound = ended & (last > at)
    if not sound.any():
        return None
    at, last = at[sound], last[sound]
    additive = np.full(len(at), bool(starts.additive[one]))
    legs = None
    if starts.legs is not None:
        legs = np.broadcast_to(starts.legs[one], (len(at), starts.legs.shape[1]))
    lag = int(starts.lag[one])
    windows = Windows(np.full(len(at), floor), at, at + lag, last, additive, legs)
    return Earlier(windows, needs[sound])
