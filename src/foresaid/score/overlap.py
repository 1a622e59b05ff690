"""How many windows of a record do not overlap."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from foresaid.model.bars import IntArray


def disjoint_windows(starts: IntArray, ends: IntArray) -> int:
    """Return the largest number of windows that can be chosen without overlap.

    Parameters
    ----------
    starts, ends : ndarray of int, shape (n,)
        First and last session of each window, ``ends >= starts``, in any order; n may be 0.

    Returns
    -------
    int
        0 for no window, at least 1 otherwise.

    Raises
    ------
    ValueError
        If an array is not flat or not of whole numbers, the arrays differ in length, or a
        window ends before it starts.

    Notes
    -----
    Two windows are disjoint if one starts at or after the end of the other: the close that
    ends a window may be the reference of the next. A window that starts and ends on the same
    session may stand between two that meet there, but another one just like it overlaps it.

    Greedy choice of the earliest end, which is optimal. The earliest end among windows that
    start late enough is a suffix minimum, so the loop runs once for each window chosen.

    References
    ----------
    .. [1] J. Kleinberg, E. Tardos (2006). Algorithm Design, section 4.1 (interval
       scheduling).

    Examples
    --------
    >>> disjoint_windows(np.array([0, 5, 10]), np.array([10, 15, 20]))
    2
    """
    first, last = _checked("starts", starts), _checked("ends", ends)
    if len(first) != len(last):
        raise ValueError(f"starts has length {len(first)}, ends {len(last)}")
    if (last < first).any():
        row = int(np.argmax(last < first))
        raise ValueError(f"ends[{row}]={last[row]} lies before starts[{row}]={first[row]}")
    # on doubled sessions a window of no length gets one, which holds off only its like
    is_point = first == last
    begin, finish = 2 * first + ~is_point, 2 * last + is_point
    order = np.argsort(begin)
    earliest_finish = np.minimum.accumulate(finish[order][::-1])[::-1]
    following = np.searchsorted(begin[order], earliest_finish)
    count, at = 0, 0
    while at < len(following):
        at = int(following[at])
        count += 1
    return count


def _checked(name: str, sessions: IntArray) -> IntArray:
    values = np.asarray(sessions)
    if values.ndim != 1:
        raise ValueError(f"{name} has shape {values.shape}, must be flat")
    if values.size and values.dtype.kind not in "iu":
        raise ValueError(f"{name} has dtype {values.dtype}, must hold whole numbers")
    return values.astype(np.int64)
