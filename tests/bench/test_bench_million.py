"""A million calls over 2,000 instruments and 5,000 sessions, against the obvious pandas ways.

Run with ``python -m pytest tests/bench/test_bench_million.py --benchmark-only``. The ratios are
what counts; each test asserts equal answers first. Fast and slow ways take turns, so that a
busy machine slows both. The loops over calls are timed on a sample and extrapolated.
"""

import time
import tracemalloc
from dataclasses import fields

import numpy as np
import pandas as pd
import pytest

from foresaid.claims.binding import UNIT_CODES, bind
from foresaid.claims.registry import KINDS
from foresaid.market.histories import build_market
from foresaid.model.codebook import default_codebook
from foresaid.model.price_history import PriceHistory
from foresaid.model.records import Instrument
from foresaid.settle.outcomes import CHUNK, CallClaims, settle_calls
from foresaid.settle.windows import CallTimes, resolve_windows

BOOK = default_codebook()
TOLERANCE = BOOK.settlement.tolerance
N_INSTRUMENTS, N_SESSIONS, N_CALLS = 2_000, 5_000, 1_000_000
SAMPLE = 400
FALL = 10.0  # percent
KINDS_MIXED = ("ends higher", "ends above", "touches", "drawdown")


@pytest.fixture(scope="module")
def world():
    """Market, price histories, calls in ledger order, and levels for the calls.

    3 % of the sessions are missing in each history; horizons are 7 to 365 days.
    """
    rng = np.random.default_rng(20)
    calendar = np.arange(np.datetime64("2004-01-01"), np.datetime64("2024-12-31"))
    calendar = calendar[np.is_busday(calendar)][:N_SESSIONS].astype(np.int64)
    histories = [_history(calendar, rng) for _ in range(N_INSTRUMENTS)]
    symbols = [f"I{number}" for number in range(N_INSTRUMENTS)]
    as_of = np.datetime64(int(calendar[-1]), "D").astype(object)
    market = build_market(
        [Instrument(symbol) for symbol in symbols],
        dict(zip(symbols, histories, strict=True)),
        [],
        {},
        BOOK,
        as_of=as_of,
    )
    times = _times(calendar, rng)
    # derived once from the prices and kept with them, like the prices themselves
    market.bars.at_or_before(times.instrument[:1], times.said_day[:1])
    reference = resolve_windows(times, market, BOOK.settlement).windows.reference
    level = market.bars.close[reference] * rng.uniform(0.9, 1.1, N_CALLS)
    return market, histories, times, level


def _history(calendar, rng):
    day = calendar[rng.random(len(calendar)) > 0.03]
    close = np.round(100 * np.exp(np.cumsum(rng.normal(0, 0.012, len(day)))), 2)
    spread = np.abs(rng.normal(0, 0.006, len(day)))
    high, low = np.round(close * (1 + spread), 2), np.round(close * (1 - spread), 2)
    return PriceHistory(day, high, low, close)


def _times(calendar, rng):
    instrument = rng.integers(0, N_INSTRUMENTS, N_CALLS)
    said = rng.integers(calendar[30], calendar[-400], N_CALLS)
    order = np.lexsort((said, instrument))
    instrument, said = instrument[order], said[order]
    due = said + rng.integers(7, 366, N_CALLS)
    only_date = np.full(N_CALLS, -1.0)
    return CallTimes(instrument, said, only_date, due, np.zeros(N_CALLS, dtype=np.int64))


def _part(times, rows):
    """The calls at these rows."""
    columns = [getattr(times, field.name) for field in fields(times)]
    return CallTimes(*(None if column is None else column[rows] for column in columns))


# ------------------------------------------------------------------------------- fast ways
def _kernel_way(market, times, name, value):
    """Windows, marks and outcomes of calls of one kind, in chunks that fit the cache.

    ``value`` holds levels or one size in percent, None where the kind names neither.
    """
    kind, n = KINDS[name], len(times.instrument)
    hits = np.empty(n, dtype=bool)
    units = np.full((CHUNK, 1), UNIT_CODES["%"], dtype=np.int64)
    ones = np.ones(CHUNK)
    for begin in range(0, n, CHUNK):
        part = slice(begin, min(begin + CHUNK, n))
        windows = resolve_windows(_part(times, part), market, BOOK.settlement).windows
        size = len(windows)
        values = reference = ones[:size]
        if value is not None:
            reference = market.bars.close[windows.reference]
            values = value[part] if isinstance(value, np.ndarray) else np.full(size, value)
        marks = bind(
            kind,
            values[:, None],
            units[:size],
            reference=reference,
            level_factor=ones[:size],
            additive=windows.additive,
        )
        hits[part] = kind.kernel.hits(market.bars, windows, marks, TOLERANCE)
    return hits


def _value_of(name, level):
    """What calls of a kind name: nothing, a level or a size."""
    return {"ends higher": None, "drawdown": FALL}.get(name, level)


def _mixed_claims(level):
    """The kinds in turn, with their numbers."""
    n = len(level)
    which = np.arange(n) % len(KINDS_MIXED)
    values = np.choose(which, [np.full(n, np.nan), level, level, np.full(n, FALL)])
    units = np.where(which == KINDS_MIXED.index("drawdown"), UNIT_CODES["%"], 0)
    return CallClaims(
        np.array(KINDS_MIXED, dtype=object)[which],
        values[:, None],
        units[:, None],
        np.full(n, "", dtype=object),
    )


def _product_way(market, times, claims):
    """All that is kept of calls: results, reasons, deciding sessions, alternates."""
    inverse = np.zeros(len(times.instrument), dtype=bool)
    return settle_calls(times, claims, market, inverse, BOOK.settlement)


# ------------------------------------------------------------------------------- slow ways
def _asof_frames(histories, times):
    prices = pd.concat(
        [
            pd.DataFrame({"instrument": number, "day": _dates(one.day), "close": one.close})
            for number, one in enumerate(histories)
        ]
    ).sort_values("day", ignore_index=True)
    calls = pd.DataFrame(
        {
            "instrument": times.instrument,
            "said": _dates(times.said_day),
            "due": _dates(times.deadline_day),
            "row": np.arange(len(times.instrument)),
        }
    )
    return prices, calls


def _dates(days):
    """Dates as a frame read from a file holds them."""
    return days.astype("datetime64[D]").astype("datetime64[us]")


def _two_asof_merges(prices, calls):
    """Both ways begin with calls in ledger order; a merge wants them in that of the day."""
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


def _indexed_frames(histories):
    return [
        pd.DataFrame({"high": one.high, "low": one.low, "close": one.close}, index=one.day)
        for one in histories
    ]


def _loop(frames, times, names, level, rows):
    """Answer calls one by one, as one would at a prompt."""
    answer = {
        "ends higher": _slow_end,
        "ends above": _slow_end,
        "touches": _slow_touch,
        "drawdown": _slow_drawdown,
    }
    found = []
    for row in rows:
        frame, said = frames[times.instrument[row]], times.said_day[row]
        name = names if isinstance(names, str) else names[row]
        bar = None if name == "ends higher" else level[row]
        found.append(bool(answer[name](frame, said, times.deadline_day[row], bar)))
    return np.array(found)


def _slow_end(frame, said, due, level):
    reference = frame[frame.index >= said]["close"].iloc[0]
    return frame[frame.index <= due]["close"].iloc[-1] > (reference if level is None else level)


def _slow_touch(frame, said, due, level):
    reference = frame[frame.index >= said]["close"].iloc[0]
    window = frame[(frame.index > said) & (frame.index <= due)]
    if level >= reference:
        return (window["high"] >= level).any()
    return (window["low"] <= level).any()


def _slow_drawdown(frame, said, due, level):
    del level
    close = frame["close"]
    start = close.index.searchsorted(said)
    end = close.index.searchsorted(due, side="right")
    piece = close.iloc[max(0, start - 252) : end]
    under = piece <= piece.cummax() * (1 - FALL / 100)
    new = under & ~under.shift(fill_value=False)
    return new[new.index > said].any()


# ---------------------------------------------------------------------------------- timing
def _in_turn(slow, fast, rounds, fast_repeats):
    """Return the shortest time and the answer of each way; both take turns."""
    best = [np.inf, np.inf]
    answers = [None, None]
    for _ in range(rounds):
        for way, (function, repeats) in enumerate(((slow, 1), (fast, fast_repeats))):
            for _ in range(repeats):
                begin = time.perf_counter()
                answers[way] = function()
                best[way] = min(best[way], time.perf_counter() - begin)
    return best[0], answers[0], best[1], answers[1]


def _demand(benchmark, ratio, least):
    benchmark.extra_info["ratio"] = round(ratio, 1)
    print(f"{ratio:.1f} times faster, {least} wanted")  # noqa: T201 - seen with -s
    assert ratio >= least, f"only {ratio:.1f} times faster"


# ------------------------------------------------------------------------------ the ratios
def test_deadline_calls_against_two_asof_merges(benchmark, world):
    market, histories, times, _ = world
    frames = _asof_frames(histories, times)

    def fast():
        return _kernel_way(market, times, "ends higher", None)

    slow, expected, ours, hits = _in_turn(lambda: _two_asof_merges(*frames), fast, 6, 12)
    assert (hits == expected).all()
    benchmark.pedantic(fast, rounds=3)
    _demand(benchmark, slow / ours, 20)


@pytest.mark.parametrize(
    ("name", "rounds", "repeats", "least"), [("touches", 3, 4, 1_500), ("drawdown", 2, 1, 150)]
)
def test_path_calls_against_a_loop_over_calls(benchmark, world, name, rounds, repeats, least):
    market, histories, times, level = world
    frames = _indexed_frames(histories)
    rows = np.random.default_rng(3).choice(N_CALLS, SAMPLE, replace=False)
    value = _value_of(name, level)

    def slow():
        return _loop(frames, times, name, level, rows)

    def fast():
        return _kernel_way(market, times, name, value)

    sampled, expected, ours, hits = _in_turn(slow, fast, rounds, repeats)
    assert (hits[rows] == expected).all()
    assert 0 < expected.sum() < SAMPLE
    benchmark.pedantic(fast, rounds=1)
    _demand(benchmark, sampled * (N_CALLS / SAMPLE) / ours, least)


def test_mixed_calls_with_all_that_is_kept_against_a_loop(benchmark, world):
    """The loop answers hit or miss alone; settling keeps alternates and the deciding price."""
    market, histories, times, level = world
    claims, frames = _mixed_claims(level), _indexed_frames(histories)
    rows = np.random.default_rng(5).choice(N_CALLS, SAMPLE, replace=False)

    def slow():
        return _loop(frames, times, claims.kind, level, rows)

    def fast():
        return _product_way(market, times, claims)

    sampled, expected, ours, outcomes = _in_turn(slow, fast, 2, 1)
    hits = outcomes.result == "hit"
    assert (hits | (outcomes.result == "miss")).all()
    assert (hits[rows] == expected).all()
    for name in KINDS_MIXED:
        own = np.flatnonzero(claims.kind == name)
        value = _value_of(name, level[own])
        assert (hits[own] == _kernel_way(market, _part(times, own), name, value)).all()
    benchmark.pedantic(fast, rounds=1)
    _demand(benchmark, sampled * (N_CALLS / SAMPLE) / ours, 40)


# ---------------------------------------------------------------------------------- memory
def _extra_memory(function):
    """Return the bytes that a call needs at its peak beside what it returns."""
    tracemalloc.start()
    try:
        before, _ = tracemalloc.get_traced_memory()
        tracemalloc.reset_peak()
        answer = function()
        after, peak = tracemalloc.get_traced_memory()
    finally:
        tracemalloc.stop()
    assert answer is not None
    return peak - after, after - before


@pytest.mark.parametrize("name", ["ends higher", "touches", "drawdown", "mixed"])
def test_memory_beside_the_answers_does_not_grow_with_the_calls(benchmark, world, name):
    market, _, times, level = world
    extra, kept = {}, {}
    for n in (N_CALLS // 10, N_CALLS):
        own = _part(times, slice(None, None, N_CALLS // n))
        bar = level[:: N_CALLS // n]
        if name == "mixed":
            claims = _mixed_claims(bar)
            extra[n], kept[n] = _extra_memory(lambda: _product_way(market, own, claims))  # noqa: B023 - called at once
        else:
            value = _value_of(name, bar)
            extra[n], kept[n] = _extra_memory(lambda: _kernel_way(market, own, name, value))  # noqa: B023 - called at once
    few, many = extra
    benchmark.extra_info["extra megabytes"] = [round(one / 1e6, 2) for one in extra.values()]
    benchmark.extra_info["bytes kept per call"] = round(kept[many] / many, 1)
    print(name, benchmark.extra_info)  # noqa: T201 - seen with -s
    benchmark.pedantic(lambda: None, rounds=1)
    # the answers alone may grow: a fifth more than with a tenth of the calls is noise
    assert extra[many] <= 1.2 * extra[few] + 1e6
    assert kept[many] / many <= 1.05 * kept[few] / few
