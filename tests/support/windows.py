"""Bars and windows made at random, for kernels."""

from __future__ import annotations

import numpy as np
from hypothesis import strategies as st

from foresaid.claims.binding import UNIT_CODES, bind
from foresaid.claims.phrases import parse_claim
from foresaid.model.bars import Windows, concatenate_bars

TOLERANCE = 1e-9


def bars_from(close, *, high=None, low=None, day=None):
    """Return the bars of one instrument."""
    close = np.asarray(close, dtype=float)
    n = len(close)
    history = {
        "day": np.arange(n) if day is None else np.asarray(day),
        "high": close if high is None else np.asarray(high, dtype=float),
        "low": close if low is None else np.asarray(low, dtype=float),
        "close": close,
        "has_range": np.full(n, high is not None),
        "factor": np.ones(n),
        "total": close,
        "total_known": False,
    }
    return concatenate_bars(["ABC"], [history])


def windows_from(reference, first, last, *, additive=False):
    """Return windows of the first instrument."""
    columns = [np.atleast_1d(np.asarray(c, dtype=np.int64)) for c in (reference, first, last)]
    n = len(columns[0])
    return Windows(np.zeros(n, dtype=np.int64), *columns, np.full(n, additive))


@st.composite
def coarse_bars(draw, *, min_size=3, max_size=40):
    """Prices in whole numbers, so that ties are common, with highs and lows around them."""
    n = draw(st.integers(min_size, max_size))
    steps = draw(st.lists(st.integers(-3, 3), min_size=n, max_size=n))
    close = np.maximum(100.0 + np.cumsum(steps), 10.0)
    spread = draw(st.lists(st.integers(0, 2), min_size=n, max_size=n))
    return bars_from(close, high=close + spread, low=close - spread)


@st.composite
def windows_in(draw, bars, *, additive=False, max_windows=20):
    """Windows with at least one session after the reference."""
    n_bars = len(bars.day)
    count = draw(st.integers(1, max_windows))
    reference = draw(st.lists(st.integers(0, n_bars - 2), min_size=count, max_size=count))
    lags = draw(st.lists(st.integers(0, 1), min_size=count, max_size=count))
    first = [r + lag for r, lag in zip(reference, lags, strict=True)]
    last = [draw(st.integers(r + 1, n_bars - 1)) for r in reference]
    return windows_from(reference, first, last, additive=additive)


def marks_of(kind, phrase, bars, windows):
    """Return the marks of one phrase at each window."""
    claim, n = parse_claim(phrase), len(windows)
    width = max(1, len(claim.quantities))
    values, units = np.zeros((n, width)), np.zeros((n, width), dtype=np.int64)
    for column, quantity in enumerate(claim.quantities):
        values[:, column] = quantity.value
        units[:, column] = UNIT_CODES[quantity.unit]
    return bind(
        kind,
        values,
        units,
        reference=bars.close[windows.reference],
        level_factor=np.ones(n),
        additive=windows.additive,
    )
