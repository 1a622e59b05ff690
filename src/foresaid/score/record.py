"""The matured calls of one group, and what can be said of them before any outcome."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from foresaid.score.overlap import disjoint_windows

if TYPE_CHECKING:
    from foresaid.model.bars import BoolArray, FloatArray, IntArray
    from foresaid.model.codebook import Codebook


@dataclass(frozen=True)
class Record:
    """The matured calls of one group; arrays (n,).

    Attributes
    ----------
    came_true : ndarray of bool
        Whether the claim as written came true.
    leans_against : ndarray of bool
        Whether the stated probability lies below one half, so that the forecaster was right
        when the claim failed.
    chance : ndarray of float
        The chance of the claim as written, NaN where there is none.
    probability_low, probability_high : ndarray of float
        The stated probability or a word's band, NaN where none was stated.
    instrument, start, end : ndarray of int
        What the window is on, and its first and last day.
    direction : ndarray of int
        1 up, -1 down, 0 neither.
    went : ndarray of int
        1 where the price rose from reference to deadline, -1 where it fell, 0 if unchanged.
    weight : ndarray of float
        Class weights, all 1 unless weights were asked for.
    """

    came_true: BoolArray
    leans_against: BoolArray
    chance: FloatArray
    probability_low: FloatArray
    probability_high: FloatArray
    instrument: IntArray
    start: IntArray
    end: IntArray
    direction: IntArray
    went: IntArray
    weight: FloatArray

    @property
    def right(self) -> BoolArray:
        """Whether the forecaster was right."""
        return np.not_equal(self.came_true, self.leans_against)

    @property
    def chance_right(self) -> FloatArray:
        """The chance of being right with no skill, NaN where there is none."""
        return np.where(self.leans_against, 1.0 - self.chance, self.chance)


def empty_record() -> Record:
    """Return a record without calls."""
    floats, whole, flags = np.zeros(0), np.zeros(0, dtype=np.int64), np.zeros(0, dtype=bool)
    return Record(
        flags, flags, floats, floats, floats, whole, whole, whole, whole, whole, floats
    )


def effective_n(record: Record) -> int:
    """Return how many windows do not overlap, counted for each instrument apart.

    Parameters
    ----------
    record : Record
        The n calls, n may be 0.

    Returns
    -------
    int

    Raises
    ------
    ValueError
        If a window ends before it starts.

    References
    ----------
    See ``disjoint_windows``.

    Examples
    --------
    >>> effective_n(empty_record())
    0
    """
    total = 0
    for number in np.unique(record.instrument):
        own = record.instrument == number
        total += disjoint_windows(record.start[own], record.end[own])
    return total


def is_one_sided(record: Record) -> bool:
    """Return whether every call points the same way.

    Parameters
    ----------
    record : Record
        The n calls; False for none.

    Returns
    -------
    bool
        A call that leans against its claim points the other way; one without direction
        keeps a record from being one-sided.

    Raises
    ------
    ValueError
        Never; the columns are those of a record.

    References
    ----------
    Common practice, no source.

    Examples
    --------
    >>> is_one_sided(empty_record())
    False
    """
    way = pointing(record)
    return len(way) > 0 and (bool((way > 0).all()) or bool((way < 0).all()))


def pointing(record: Record) -> IntArray:
    """Return which way each forecaster's call points.

    Parameters
    ----------
    record : Record
        The n calls.

    Returns
    -------
    ndarray of int, shape (n,)
        1 up, -1 down, 0 neither; a call that leans against its claim points the other way.

    Raises
    ------
    ValueError
        Never; the columns are those of a record.

    References
    ----------
    Common practice, no source.

    Examples
    --------
    >>> pointing(empty_record()).tolist()
    []
    """
    return np.where(record.leans_against, -record.direction, record.direction)


def is_long_enough(record: Record, codebook: Codebook) -> bool:
    """Return whether a record may be judged and ranked at all.

    Parameters
    ----------
    record : Record
        The n calls.
    codebook : Codebook
        The minimum record.

    Returns
    -------
    bool
        It depends on which calls were made, never on how they came out.

    Raises
    ------
    ValueError
        If a window ends before it starts.

    References
    ----------
    The minimum record is common practice, no source.

    Examples
    --------
    >>> from foresaid.model.codebook import default_codebook
    >>> is_long_enough(empty_record(), default_codebook())
    False
    """
    rules = codebook.verdict
    enough = min(len(record.came_true), int(np.isfinite(record.chance).sum()))
    return enough >= rules.minimum_matured and effective_n(record) >= rules.minimum_disjoint
