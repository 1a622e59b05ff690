"""Settlement against the obvious pandas ways, in the same run.

Run with ``python -m pytest tests/bench --benchmark-only``. The ratios are what counts; each
test asserts equal answers first.
"""

import time

import numpy as np
import pandas as pd
import pytest

from foresaid.claims.binding import bind
from foresaid.claims.registry import KINDS
from foresaid.market.histories import build_market
from foresaid.model.codebook import default_codebook
from foresaid.model.price_history import PriceHistory
from foresaid.model.records import Instrument
from foresaid.settle.outcomes import CHUNK
from foresaid.settle.windows import CallTimes, resolve_windows

BOOK = default_codebook()
N_INSTRUMENTS, N_SESSIONS, N_CALLS = 500, 2_500, 100_000
SAMPLE = 400


@pytest.fixture(scope="module")
def setting():
    """500 instruments with 3 % of sessions missing, and 100,000 calls in ledger order."""
    rng = np.random.default_rng(20)
    histories = {}
    calendar = np.arange(np.datetime64("2014-01-01"), np.datetime64("2024-12-31"))
    calendar = calendar[np.is_busday(calendar)][:N_SESSIONS].astype(np.int64)
    for number in range(N_INSTRUMENTS):
        day = calendar[rng.random(N_SESSIONS) > 0.03]
        close = np.round(100 * np.exp(np.cumsum(rng.normal(0, 0.012, len(day)))), 2)
        spread = np.abs(rng.normal(0, 0.006, len(day)))
        histories[f"I{number}"] = PriceHistory(
            day, np.round(close * (1 + spread), 2), np.round(close * (1 - spread), 2), close
        )
    instruments = [Instrument(symbol) for symbol in histories]
    as_of = np.datetime64(int(calendar[-1]), "D").astype(object)
    market = build_market(instruments, histories, [], {}, BOOK, as_of=as_of)
    instrument = np.sort(rng.integers(0, N_INSTRUMENTS, N_CALLS))
    said = rng.integers(calendar[30], calendar[-400], N_CALLS)
    order = np.lexsort((said, instrument))
    said = said[order]
    times = CallTimes(
        instrument,
        said,
        np.full(N_CALLS, -1.0),
        said + rng.integers(7, 366, N_CALLS),
        np.zeros(N_CALLS, dtype=np.int64),
    )
    move = rng.uniform(0.9, 1.1, N_CALLS)
    return market, histories, times, move


def _kernel_way(setting, kind_name):
    """Windows, marks and outcomes of all calls, in cache-sized chunks."""
    market, _, times, move = setting
    kind = KINDS[kind_name]
    hits = np.empty(N_CALLS, dtype=bool)
    units = np.zeros((CHUNK, 2), dtype=np.int64)
    for begin in range(0, N_CALLS, CHUNK):
        part = slice(begin, min(begin + CHUNK, N_CALLS))
        own = CallTimes(
            times.instrument[part],
            times.said_day[part],
            times.said_minute[part],
            times.deadline_day[part],
            times.sessions[part],
        )
        windows = resolve_windows(own, market, BOOK.settlement).windows
        n = len(windows)
        reference = values = np.ones((n, 1))
        if kind.is_sized:
            reference = market.bars.close[windows.reference]
            values = (reference * move[part])[:, None]
        marks = bind(
            kind,
            values,
            units[:n],
            reference=reference.ravel(),
            level_factor=np.ones(n),
            additive=windows.additive,
        )
        hits[part] = kind.kernel.hits(market.bars, windows, marks, 1e-9)
    return hits


def _timed(function, repeats=3):
    best, result = np.inf, None
    for _ in range(repeats):
        begin = time.perf_counter()
        result = function()
        best = min(best, time.perf_counter() - begin)
    return best, result


def _dates(days):
    """Dates as a frame read from a file holds them."""
    return days.astype("datetime64[D]").astype("datetime64[us]")


def _frames(setting):
    _, histories, times, _ = setting
    prices = pd.concat(
        [
            pd.DataFrame({"instrument": number, "day": _dates(h.day), "close": h.close})
            for number, h in enumerate(histories.values())
        ]
    ).sort_values("day", ignore_index=True)
    calls = pd.DataFrame(
        {
            "instrument": times.instrument,
            "said": _dates(times.said_day),
            "due": _dates(times.deadline_day),
            "row": np.arange(N_CALLS),
        }
    )
    return prices, calls


def test_ends_against_two_asof_merges(benchmark, setting):
    prices, calls = _frames(setting)

    def obvious():
        start = pd.merge_asof(
            calls.sort_values("said"),
            prices,
            left_on="said",
            right_on="day",
            by="instrument",
            direction="forward",
        )
        end = pd.merge_asof(
            calls.sort_values("due"), prices, left_on="due", right_on="day", by="instrument"
        )
        first = start.set_index("row")["close"].sort_index()
        last = end.set_index("row")["close"].sort_index()
        return (last > first).to_numpy()

    slow, expected = _timed(obvious, repeats=5)
    fast, hits = _timed(lambda: _kernel_way(setting, "ends higher"), repeats=40)
    assert (hits == expected).all()
    benchmark.extra_info["ratio"] = slow / fast
    benchmark(_kernel_way, setting, "ends higher")
    assert slow / fast >= 15, f"only {slow / fast:.1f} times faster"


def test_touches_against_a_loop_over_calls(benchmark, setting):
    _, histories, times, move = setting
    frames = [
        pd.DataFrame({"high": h.high, "low": h.low, "close": h.close}, index=h.day)
        for h in histories.values()
    ]
    rows = np.random.default_rng(3).choice(N_CALLS, SAMPLE, replace=False)

    def obvious():
        found = []
        for row in rows:
            frame = frames[times.instrument[row]]
            after = frame[frame.index >= times.said_day[row]]
            level = after["close"].iloc[0] * move[row]
            begin = times.said_day[row] + 1
            window = frame[(frame.index >= begin) & (frame.index <= times.deadline_day[row])]
            if level >= after["close"].iloc[0]:
                found.append((window["high"] >= level).any())
            else:
                found.append((window["low"] <= level).any())
        return np.array(found)

    sampled, expected = _timed(obvious, repeats=2)
    slow = sampled * N_CALLS / SAMPLE
    fast, hits = _timed(lambda: _kernel_way(setting, "touches"), repeats=5)
    assert (hits[rows] == expected).all()
    benchmark.extra_info["ratio"] = slow / fast
    benchmark(_kernel_way, setting, "touches")
    assert slow / fast >= 500, f"only {slow / fast:.1f} times faster"


def test_drawdowns_against_a_loop_over_calls(benchmark, setting):
    """Falls of 10 % from the running peak, newly crossed in the window."""
    market, histories, times, _ = setting
    kind = KINDS["drawdown"]
    rows = np.random.default_rng(4).choice(N_CALLS, SAMPLE, replace=False)
    closes = [pd.Series(h.close, index=h.day) for h in histories.values()]
    windows = resolve_windows(times, market, BOOK.settlement).windows
    marks = np.full((N_CALLS, 1), 0.9)

    def obvious():
        found = []
        for row in rows:
            close = closes[times.instrument[row]]
            start = close.index.searchsorted(times.said_day[row])
            end = close.index.searchsorted(times.deadline_day[row], side="right")
            piece = close.iloc[max(0, start - 252) : end]
            under = piece <= piece.cummax() * 0.9
            new = under & ~under.shift(fill_value=False)
            begin = times.said_day[row] + 1
            found.append(bool(new[new.index >= begin].any()))
        return np.array(found)

    def ours():
        hits = np.empty(N_CALLS, dtype=bool)
        for begin in range(0, N_CALLS, CHUNK):
            part = slice(begin, begin + CHUNK)
            hits[part] = kind.kernel.hits(market.bars, windows.take(part), marks[part], 1e-9)
        return hits

    sampled, expected = _timed(obvious, repeats=2)
    slow = sampled * N_CALLS / SAMPLE
    fast, hits = _timed(ours, repeats=5)
    assert (hits[rows] == expected).all()
    benchmark.extra_info["ratio"] = slow / fast
    benchmark(ours)
    assert slow / fast >= 150, f"only {slow / fast:.1f} times faster"
