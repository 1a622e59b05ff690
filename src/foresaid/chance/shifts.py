"""Hits of every record under every circular shift of the calendar.

All records are moved along the calendar by the same number of sessions and settled again. What
overlaps still overlaps, who follows whom still does, the mix of claims stays: only the timing
is lost. There are no more shifts than sessions, so all of them are counted and none is drawn.
"""

from __future__ import annotations

from itertools import pairwise
from typing import TYPE_CHECKING, Any

import numpy as np

if TYPE_CHECKING:
    from foresaid.model.bars import BoolArray, IntArray

    Outcomes = np.ndarray[Any, np.dtype[np.uint8]] | BoolArray
    ByteArray = np.ndarray[Any, np.dtype[np.uint8]]
    CountArray = np.ndarray[Any, np.dtype[np.int32]]

_CELLS = 640_000  # bytes gathered at once: what a core keeps near
_HALF_BYTE = 15  # calls that half a byte can add up
_MOST_ROWS = 240  # calls that a byte can add up, in full half bytes
_TILE = 64  # signatures laid out at a time


class ShiftedHits:
    """Counts the hits of records under the shifts 0, 1, ..., ``n_shifts - 1``.

    Signatures come in blocks, each with the calls that use it, so the outcomes of all
    signatures are never held together. Counts are whole numbers: blocks may come in any order
    and be split in any way, also over several counters whose counts are then added.

    Parameters
    ----------
    n_records : int
        Forecasters or groups, at least 0.
    n_shifts : int
        Shifts, at least 1; as a rule the number of sessions of the calendar.

    Attributes
    ----------
    counts : ndarray of int32, shape (n_records, n_shifts)
        Hits so far; column 0 is the record itself.

    Raises
    ------
    ValueError
        If ``n_records`` or ``n_shifts`` is too small.

    Notes
    -----
    Call ``i`` with signature ``s``, made at position ``t``, has under shift ``k`` the outcome
    ``outcomes[s, low + (t - low + k) mod cycle]``. A row is laid out once as it goes round its
    cycle, and then the outcomes of a call under all shifts lie side by side and are added up
    as one piece. A byte holds two of them: shift k in its lower half, shift k + K/2 in its
    upper half. Half a byte adds up 15 calls, then the halves are parted and a byte goes on.

    Where every cycle is as long as there are shifts, the shifts are all the rotations of the
    calendar and form a group, on which the exactness of the test rests. A shorter cycle is
    passed through again, and where it does not divide the number of shifts some of its starts
    count once more than others. Signatures whose cycles differ much also lose step with one
    another, which makes the joint test of a field too lenient: give them one length, by data
    that run on past the calendar or by a calendar cut to the shortest cycle.

    References
    ----------
    .. [1] E. S. Edgington, P. Onghena (2007). Randomization Tests, fourth edition. Chapman and
       Hall/CRC.

    Examples
    --------
    >>> hits = ShiftedHits(n_records=1, n_shifts=4)
    >>> hits.add(
    ...     np.array([[1, 1, 0, 0]], dtype=np.uint8),
    ...     low=np.array([0]),
    ...     cycle=np.array([4]),
    ...     record=np.array([0, 0]),
    ...     signature=np.array([0, 0]),
    ...     start=np.array([0, 1]),
    ... )
    >>> hits.counts.tolist()
    [[2, 1, 0, 1]]
    """

    def __init__(self, n_records: int, n_shifts: int) -> None:
        if n_records < 0:
            raise ValueError(f"n_records={n_records!r} must be at least 0")
        if n_shifts < 1:
            raise ValueError(f"n_shifts={n_shifts!r} must be at least 1")
        self.counts: CountArray = np.zeros((n_records, n_shifts), dtype=np.int32)

    def add(
        self,
        outcomes: Outcomes,
        *,
        low: IntArray,
        cycle: IntArray,
        record: IntArray,
        signature: IntArray,
        start: IntArray,
    ) -> None:
        """Count the calls on one block of signatures.

        Parameters
        ----------
        outcomes : ndarray of uint8 or bool, shape (m, n_sessions)
            1 where the claim would have come true had it been made at that session.
        low, cycle : ndarray of int, shape (m,)
            First valid start of each signature, and how many follow one another from there,
            ``0 <= low``, ``0 <= cycle``, ``low + cycle <= n_sessions``. What ``outcomes``
            holds elsewhere is not looked at.
        record : ndarray of int, shape (c,)
            Record of each call.
        signature : ndarray of int, shape (c,)
            Row of each call in this block.
        start : ndarray of int, shape (c,)
            Session at which each call was made, among the valid starts of its signature.

        Raises
        ------
        ValueError
            If shapes do not fit, a number is out of its range, or a valid outcome of a
            signature in use is neither 0 nor 1.

        Notes
        -----
        Needs one and a half times the memory of ``outcomes`` besides. Quickest where a block
        holds many calls of the same record, as each record met costs a pass over its counts.
        """
        table = _checked_outcomes(outcomes)
        first = _whole("low", low, len(table))
        length = _whole("cycle", cycle, len(table))
        _check_cycles(first, length, table.shape[1])
        rows = _whole("signature", signature, None)
        who = _whole("record", record, len(rows))
        when = _whole("start", start, len(rows))
        _check_below("record", who, len(self.counts))
        _check_below("signature", rows, len(table))
        if not len(rows):
            return
        offset = when - first[rows]
        _check_starts(when, offset, length[rows])
        order = _used_by_cycle(rows, first, length)
        laid_out = _laid_out(table, order, first, length, self.counts.shape[1])
        place = np.zeros(len(table), dtype=np.int64)
        place[order] = np.arange(len(order))
        self._count(laid_out, who, place[rows] * laid_out.shape[1] + offset)

    def _count(self, laid_out: ByteArray, record: IntArray, begin: IntArray) -> None:
        """Add the stretch that begins at ``begin`` for each call."""
        n_records, n_shifts = self.counts.shape
        half = (n_shifts + 1) // 2
        stretches = np.lib.stride_tricks.sliding_window_view(laid_out.ravel(), half)
        nothing = laid_out.size - laid_out.shape[1]
        order = np.argsort(record.astype(np.min_scalar_type(n_records)), kind="stable")
        begin, owner = begin[order], record[order]
        edges = [0, *(np.flatnonzero(np.diff(owner)) + 1).tolist(), len(owner)]
        rows = max(1, min(_MOST_ROWS, _CELLS // half))
        for left, right in pairwise(edges):
            total = self.counts[owner[left]]
            for at in range(left, right, rows):
                part = _in_groups(begin[at : min(at + rows, right)], nothing)
                pairs = np.add.reduce(stretches[part], axis=1, dtype=np.uint8)
                total[:half] += np.add.reduce(pairs & 15, axis=0, dtype=np.uint8)
                pairs >>= 4
                total[half:] += np.add.reduce(pairs, axis=0, dtype=np.uint8)[: n_shifts - half]


def _in_groups(begin: IntArray, nothing: int) -> IntArray:
    """Return groups that half a byte can add up, one to a row, filled up with ``nothing``."""
    groups = -(-len(begin) // _HALF_BYTE)
    size = -(-len(begin) // groups)
    result = np.full(groups * size, nothing, dtype=np.int64)
    result[: len(begin)] = begin
    return result.reshape(groups, size)


def _used_by_cycle(rows: IntArray, low: IntArray, cycle: IntArray) -> IntArray:
    """Return the signatures that have calls, those with the same valid starts together."""
    used = np.flatnonzero(np.bincount(rows, minlength=len(low)))
    return used[np.lexsort((cycle[used], low[used]))]


def _laid_out(
    outcomes: ByteArray, order: IntArray, low: IntArray, cycle: IntArray, n_shifts: int
) -> ByteArray:
    """Return rows that go round their cycles, two shifts to a byte, and one of noughts."""
    first, length = low[order], cycle[order]
    half = (n_shifts + 1) // 2
    result = np.empty((len(order) + 1, int(length.max()) - 1 + half), dtype=np.uint8)
    result[-1] = 0
    changes = np.flatnonzero((np.diff(first) != 0) | (np.diff(length) != 0)) + 1
    for left, right in pairwise([0, *changes.tolist(), len(order)]):
        own = slice(int(first[left]), int(first[left] + length[left]))
        for at in range(left, right, _TILE):
            rows = order[at : min(at + _TILE, right)]
            _pair(outcomes[rows, own], half, result[at : at + len(rows)])
    return result


def _pair(rounds: ByteArray, half: int, out: ByteArray) -> None:
    """Write each start, and in the upper half byte the one ``half`` on, over and over."""
    if rounds.max() > 1:
        raise ValueError(f"outcomes holds {int(rounds.max())}, must be 0 or 1")
    cycle, width = rounds.shape[1], out.shape[1]
    once, turn = out[:, :cycle], half % cycle
    np.multiply(rounds[:, turn:], 16, out=once[:, : cycle - turn])
    np.multiply(rounds[:, :turn], 16, out=once[:, cycle - turn :])
    once |= rounds
    filled = cycle
    while filled < width:
        more = min(filled, width - filled)
        out[:, filled : filled + more] = out[:, :more]
        filled += more


def _checked_outcomes(outcomes: Outcomes) -> ByteArray:
    table = np.asarray(outcomes)
    if table.ndim != 2:
        raise ValueError(f"outcomes has shape {table.shape}, must have two dimensions")
    if table.dtype not in (np.uint8, np.bool_):
        raise ValueError(f"outcomes has dtype {table.dtype}, must be uint8 or bool")
    return table.view(np.uint8)


def _whole(name: str, values: IntArray, length: int | None) -> IntArray:
    result = np.asarray(values)
    if result.ndim != 1 or (length is not None and len(result) != length):
        wanted = "flat" if length is None else f"({length},)"
        raise ValueError(f"{name} has shape {result.shape}, must be {wanted}")
    if result.size and result.dtype.kind not in "iu":
        raise ValueError(f"{name} has dtype {result.dtype}, must hold whole numbers")
    return result.astype(np.int64, copy=False)


def _check_below(name: str, values: IntArray, end: int) -> None:
    outside = (values < 0) | (values >= end)
    if outside.any():
        at = int(np.argmax(outside))
        raise ValueError(f"{name}[{at}]={values[at]} must lie in [0, {end})")


def _check_cycles(low: IntArray, cycle: IntArray, n_sessions: int) -> None:
    outside = (low < 0) | (cycle < 0) | (low + cycle > n_sessions)
    if outside.any():
        at = int(np.argmax(outside))
        raise ValueError(
            f"low[{at}]={low[at]} and cycle[{at}]={cycle[at]} leave the {n_sessions} sessions"
        )


def _check_starts(start: IntArray, offset: IntArray, cycle: IntArray) -> None:
    outside = (offset < 0) | (offset >= cycle)
    if outside.any():
        at = int(np.argmax(outside))
        raise ValueError(f"start[{at}]={start[at]} is no valid start of its signature")
