"""Publication times in the venue's zone, through the tz database."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

if TYPE_CHECKING:
    from collections.abc import Sequence

    from foresaid.model.bars import FloatArray, IntArray

DATE_ONLY = -1.0


def local_times(said_at: Sequence[str], zones: Sequence[str]) -> tuple[IntArray, FloatArray]:
    """Return the local date and minute at which statements were published.

    Parameters
    ----------
    said_at : sequence of str, length n
        ``YYYY-MM-DD``, or RFC 3339 with an offset.
    zones : sequence of str, length n
        The venue's tz database name; empty leaves the time as it was written.

    Returns
    -------
    day : ndarray of int, shape (n,)
        Local date in days since 1970-01-01.
    minute : ndarray of float, shape (n,)
        Minutes after local midnight, ``DATE_ONLY`` where no time was given.

    Examples
    --------
    >>> day, minute = local_times(["2025-03-14T23:30-04:00"], ["Europe/Vienna"])
    >>> np.datetime64(int(day[0]), "D"), float(minute[0])
    (np.datetime64('2025-03-15'), 270.0)
    """
    texts = np.array(said_at, dtype=object)
    dates = np.array([text[:10] for text in said_at], dtype="datetime64[D]")
    day = dates.astype(np.int64)
    minute = np.full(len(texts), DATE_ONLY)
    timed = np.array([len(text) > 10 for text in said_at], dtype=bool)
    where = np.array(zones, dtype=object)
    for zone in dict.fromkeys(zones):
        rows = np.flatnonzero(timed & (where == zone))
        if len(rows):
            local = _naive(texts[rows].tolist(), zone)
            day[rows] = local.astype("datetime64[D]").astype(np.int64)
            seconds = (local - local.astype("datetime64[D]")).astype("timedelta64[s]")
            minute[rows] = seconds.astype(np.int64) / 60.0
    return day, minute


def _naive(texts: list[str], zone: str) -> np.ndarray[tuple[int], np.dtype[np.datetime64]]:
    """Return wall-clock times in ``zone``, or as written where it is empty."""
    if zone:
        instants = pd.to_datetime(texts, utc=True, format="ISO8601")
        return instants.tz_convert(zone).tz_localize(None).to_numpy(dtype="datetime64[s]")
    clock = [text[:19] if text[16:17] == ":" else text[:16] for text in texts]
    return np.array(clock, dtype="datetime64[s]")
