"""Calls split into streams without overlap, and the weighted sum of what the streams hold."""

from __future__ import annotations

import heapq
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from foresaid.model.bars import FloatArray, IntArray


def split_into_streams(starts: IntArray, ends: IntArray) -> IntArray:
    """Return the stream of each window, so that no two windows of a stream overlap.

    Parameters
    ----------
    starts, ends : ndarray of int, shape (n,)
        First and last day of each window, ``ends > starts``, in any order; n may be 0.

    Returns
    -------
    ndarray of int, shape (n,)
        Number of the stream from 0 on, in the order of the arguments.

    Raises
    ------
    ValueError
        If an array is not flat or not of whole numbers, the arrays differ in length, or a
        window does not end after it starts.

    Notes
    -----
    The windows are taken in order of start, then position. Each goes to the first stream whose
    last window ended at or before its start; where there is none, a new stream opens. So a
    window may start on the day on which another one of its stream ends. The stream of a window
    depends on nothing that happens after its start: on no window that starts later, nor on
    when those that are open end.

    There are as many streams as the largest number of windows that overlap on one day.

    References
    ----------
    .. [1] J. Kleinberg, E. Tardos (2006). Algorithm Design, section 4.1 (scheduling all
       intervals).

    Examples
    --------
    >>> split_into_streams(np.array([0, 2, 5, 6]), np.array([5, 6, 9, 9])).tolist()
    [0, 1, 0, 1]
    """
    first, last = _checked("starts", starts), _checked("ends", ends)
    if len(first) != len(last):
        raise ValueError(f"starts has length {len(first)}, ends {len(last)}")
    if (last <= first).any():
        row = int(np.argmax(last <= first))
        raise ValueError(f"ends[{row}]={last[row]} must lie after starts[{row}]={first[row]}")
    stream = np.zeros(len(first), dtype=np.int64)
    busy: list[tuple[int, int]] = []  # the last end of a stream, and its number
    free: list[int] = []
    for row in np.argsort(first, kind="stable").tolist():
        while busy and busy[0][0] <= first[row]:
            heapq.heappush(free, heapq.heappop(busy)[1])
        stream[row] = heapq.heappop(free) if free else len(busy)
        heapq.heappush(busy, (int(last[row]), int(stream[row])))
    return stream


def log_sum_after_each(stream: IntArray, values: FloatArray, idle: FloatArray) -> FloatArray:
    r"""Return the logarithm of the sum over streams after each change of one of them.

    Parameters
    ----------
    stream : ndarray of int, shape (m,)
        Stream that changes, in order of time, from 0 to ``n_streams - 1``; m may be 0.
    values : ndarray of float, shape (m,)
        Logarithm of what that stream holds from then on.
    idle : ndarray of float, shape (n_streams,)
        Logarithm of what each stream holds before its first change; at least one stream.

    Returns
    -------
    ndarray of float, shape (m,)
        Logarithm of the sum over all streams.

    Raises
    ------
    ValueError
        If the arrays are not flat, ``stream`` and ``values`` differ in length, a stream is
        outside its range, or there is no stream.

    Notes
    -----
    Streams are added in pairs, then pairs in pairs, and so on: a pair changes whenever one of
    its two does, so every round handles each change once. Nothing is subtracted, so a sum that
    falls from a great height keeps its digits. Work is of order
    :math:`m \log m \log n\_streams`.

    References
    ----------
    .. [1] P. Blanchard, D. J. Higham, N. J. Higham (2021). Accurately computing the
       log-sum-exp and softmax functions. IMA Journal of Numerical Analysis 41(4), 2311-2330.
       doi:10.1093/imanum/draa038

    Examples
    --------
    >>> sums = log_sum_after_each(np.array([0, 1]), np.log([2.0, 3.0]), np.log([1.0, 1.0]))
    >>> np.exp(sums).round(9).tolist()
    [3.0, 5.0]
    """
    node, held = _check_changes(stream, values, idle)
    time, before = np.arange(len(node)), np.asarray(idle, dtype=np.float64)
    while len(before) > 1:
        before = np.append(before, [-np.inf] * (len(before) % 2))
        order = np.lexsort((time, node // 2))
        node, held, time = node[order], held[order], time[order]
        held = np.logaddexp(*(_latest(node, held, before, side) for side in (0, 1)))
        before = np.logaddexp(before[0::2], before[1::2])
        node //= 2
    return held


def _latest(node: IntArray, held: FloatArray, before: FloatArray, side: int) -> FloatArray:
    """Return what one of the two of each pair holds at each change of the pair."""
    pair, at = node // 2, np.arange(len(node))
    last = np.maximum.accumulate(np.where(node % 2 == side, at, -1))
    changed = last >= np.searchsorted(pair, pair)
    return np.where(changed, held[last], before[2 * pair + side])


def _check_changes(
    stream: IntArray, values: FloatArray, idle: FloatArray
) -> tuple[IntArray, FloatArray]:
    node, held = _checked("stream", stream), np.asarray(values, dtype=np.float64)
    if held.shape != node.shape:
        raise ValueError(f"values has shape {held.shape}, stream {node.shape}")
    if np.ndim(idle) != 1 or not len(idle):
        raise ValueError(f"idle has shape {np.shape(idle)}, must be flat with a stream or more")
    outside = (node < 0) | (node >= len(idle))
    if outside.any():
        raise ValueError(f"stream holds {node[outside][0]}, must lie in [0, {len(idle) - 1}]")
    return node, held


def _checked(name: str, whole: IntArray) -> IntArray:
    values = np.asarray(whole)
    if values.ndim != 1:
        raise ValueError(f"{name} has shape {values.shape}, must be flat")
    if values.size and values.dtype.kind not in "iu":
        raise ValueError(f"{name} has dtype {values.dtype}, must hold whole numbers")
    return values.astype(np.int64)
