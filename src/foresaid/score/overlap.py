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
        First and last session of each window, ``ends >= starts``; n may be 0. A window may
        begin on the session on which another ended: the close of one is the reference of
        the next.

    Returns
    -------
    int
        0 for no window.

    Raises
    ------
    ValueError
        If the arrays differ in length or a window ends before it starts.

    Notes
    -----
    Greedy choice of the earliest end, which is optimal. The loop runs once for each window
    chosen: the earliest end among windows that start late enough is a suffix minimum.

    References
    ----------
    .. [1] Interval scheduling: J. Kleinberg, E. Tardos (2006). Algorithm Design, section 4.1.

    Examples
    --------
    >>> disjoint_windows(np.array([0, 5, 10]), np.array([10, 15, 20]))
    2
    """
    starts, ends = np.asarray(starts, dtype=np.int64), np.asarray(ends, dtype=np.int64)
    if len(starts) != len(ends):
        raise ValueError(f"starts, ends have lengths {len(starts)}, {len(ends)}")
    if (ends < starts).any():
        raise ValueError("ends must not lie before starts")
    order = np.argsort(starts, kind="stable")
    by_start = starts[order]
    earliest_end = np.minimum.accumulate(ends[order][::-1])[::-1]
    count, at = 0, 0
    while at < len(by_start):
        end = earliest_end[at]
        count += 1
        # a window of one session must not be chosen again
        after = end + 1 if end == by_start[at] else end
        at = int(np.searchsorted(by_start, after))
    return count
