"""Prices in query, against plain loops over the words of docs/settlement.md."""

import math
import statistics
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from foresaid.market.doubts import find_doubts
from foresaid.model.bars import concatenate_bars
from foresaid.model.codebook import default_codebook

RULES = default_codebook().settlement
NO_ONE = np.zeros(0, dtype=np.int64)


def bars_of(*histories):
    columns = []
    for close, high, low in histories:
        n = len(close)
        columns.append(
            {
                "day": np.arange(n),
                "close": np.array(close, dtype=float),
                "high": np.array(high, dtype=float),
                "low": np.array(low, dtype=float),
                "has_range": np.ones(n, dtype=bool),
                "factor": np.ones(n),
                "total": 2.0 * np.array(close, dtype=float),
                "total_known": True,
            }
        )
    return concatenate_bars([f"S{i}" for i in range(len(columns))], columns)


def by_loop(close, high, low, *, additive):
    """Return (close, high, low) flags of every session and the three cleaned series."""

    def scale(price):
        return price if additive else math.log(price)

    flags, clean = [], []
    for t in range(len(close)):
        moves = [abs(scale(close[s]) - scale(close[s - 1])) for s in range(max(1, t - 63), t)]
        least = RULES.query_points if additive else math.log(1 + RULES.query_part)
        wide = RULES.query_points_short if additive else math.log(1 + RULES.query_part_short)
        limit = max(20 * statistics.median(moves), least) if len(moves) >= 20 else wide
        if t < 2:
            flags.append((False, False, False))
            clean.append((close[t], high[t], low[t]))
            continue
        before = close[t - 1]
        of_close = all(abs(scale(close[t]) - scale(close[s])) > limit for s in (t - 1, t - 2))
        own = [before] if of_close else [before, close[t]]
        of_high = scale(high[t]) - scale(max(own)) > limit
        of_low = scale(min(own)) - scale(low[t]) > limit
        flags.append((of_close, of_high, of_low))
        top = max(own) if of_high else max(high[t], before) if of_close else high[t]
        bottom = min(own) if of_low else min(low[t], before) if of_close else low[t]
        clean.append((before if of_close else close[t], top, bottom))
    return flags, clean


@st.composite
def spiky(draw):
    n = draw(st.integers(1, 90))
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    close = 100.0 * np.exp(
        np.cumsum(rng.normal(0, draw(st.sampled_from([0.001, 0.01, 0.03])), n))
    )
    high, low = close * (1 + rng.random(n) / 50), close * (1 - rng.random(n) / 50)
    for _ in range(draw(st.integers(0, 6))):
        t, size = int(rng.integers(n)), float(rng.choice([0.5, 0.7, 1.15, 1.4, 2.0]))
        which = rng.integers(4)
        if which == 0:
            close[t] *= size
        elif which == 1:
            high[t] *= max(size, 1.0)
        elif which == 2:
            low[t] *= min(size, 1.0)
        else:
            close[t:] *= size
            high[t:] *= size
            low[t:] *= size
    return close, np.maximum(high, close), np.minimum(low, close)


@settings(max_examples=300, deadline=None)
@given(spiky(), spiky(), st.booleans())
def test_queries_are_those_of_a_loop(one, two, additive):
    bars = bars_of(one, two)
    found = find_doubts(bars, np.full(2, additive), NO_ONE, RULES)
    flags, clean = [], []
    for history in (one, two):
        own_flags, own_clean = by_loop(*history, additive=additive)
        flags += own_flags
        clean += own_clean
    if found is None:
        assert not any(any(row) for row in flags)
        return
    assert np.column_stack([found.close, found.high, found.low]).tolist() == [
        list(f) for f in flags
    ]
    without = np.column_stack([found.bars.close, found.bars.high, found.bars.low])
    np.testing.assert_allclose(without, clean, rtol=1e-12)
    np.testing.assert_allclose(found.bars.total, 2.0 * found.bars.close, rtol=1e-12)


@settings(max_examples=100, deadline=None)
@given(spiky(), st.data())
def test_later_prices_change_no_query(one, data):
    bars = bars_of(one)
    cut = data.draw(st.integers(0, len(one[0])))
    close, high, low = (column.copy() for column in one)
    close[cut:], high[cut:], low[cut:] = 55.0, 56.0, 54.0
    changed = bars_of((close, high, low))
    additive = np.zeros(1, dtype=bool)
    for name in ("close", "high", "low"):
        first, second = (
            np.zeros(len(close), bool) if f is None else getattr(f, name)
            for f in (find_doubts(b, additive, NO_ONE, RULES) for b in (bars, changed))
        )
        assert first[:cut].tolist() == second[:cut].tolist()


def test_a_confirmed_session_is_in_no_query():
    close = [100, 101] * 15 + [150, 101]
    bars = bars_of((close, close, close))
    additive = np.zeros(1, dtype=bool)
    found = find_doubts(bars, additive, NO_ONE, RULES)
    assert np.flatnonzero(found.any).tolist() == [30]
    assert find_doubts(bars, additive, np.array([30]), RULES) is None


@pytest.mark.parametrize(("moves", "queried"), [(1.0, True), (1e6, False)])
def test_the_limit_is_the_codebooks(moves, queried):
    close = [100, 101] * 15 + [150, 101]
    rules = replace(RULES, query_moves=moves)
    found = find_doubts(bars_of((close, close, close)), np.zeros(1, bool), NO_ONE, rules)
    assert (found is not None) == queried


def test_no_bars_hold_no_query():
    assert find_doubts(bars_of(), np.zeros(0, bool), NO_ONE, RULES) is None
    assert find_doubts(bars_of(([], [], [])), np.zeros(1, bool), NO_ONE, RULES) is None
