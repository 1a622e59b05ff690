"""All shifts of a record, against plain loops that settle every call anew."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from foresaid.chance.base_rate import Starts
from foresaid.chance.null_worlds import Field, ShiftRules, null_worlds
from foresaid.claims.registry import KINDS
from foresaid.model.bars import concatenate_bars

TOLERANCE = 1e-9
PHRASES = {
    "ends higher": (1.0,),
    "ends lower by": (0.99,),
    "touches": (1.02,),
    "stays above": (0.97,),
    "ends between and": (0.98, 1.02),
    "drawdown": (0.96,),
}


def history(rng, first_day, n):
    day = first_day + np.cumsum(rng.choice([1, 1, 1, 2, 3], n))
    close = np.round(100 * np.exp(np.cumsum(rng.normal(0, 0.01, n))), 1)
    spread = np.round(rng.random(n), 1)
    return {
        "day": day,
        "close": close,
        "high": close + spread,
        "low": close - spread,
        "has_range": np.ones(n, dtype=bool),
        "factor": np.ones(n),
        "total": close,
        "total_known": False,
    }


def slow_outcome(bars, number, at, span, in_sessions, lag, name, marks):
    """Return whether a claim made at session ``at`` came true, None where it is unknown."""
    begin, end = bars.offsets[number], bars.offsets[number + 1]
    day, close = bars.day[begin:end], bars.close[begin:end]
    high, low = bars.high[begin:end], bars.low[begin:end]
    if in_sessions:
        last = at + span
        if last >= len(day):
            return None
    else:
        due = day[at] + span
        if due > day[-1]:
            return None
        last = max(i for i in range(len(day)) if day[i] <= due)
    if last <= at:
        return None
    path, reference, ended = range(at + lag, last + 1), close[at], close[last]
    levels = [reference * mark for mark in marks]
    eps = 1e-7
    if name == "ends higher":
        return ended > levels[0] + eps
    if name == "ends lower by":
        return ended <= levels[0] + eps
    if name == "touches":
        return any(high[i] >= levels[0] - eps for i in path)
    if name == "stays above":
        return all(low[i] >= levels[0] - eps for i in path)
    if name == "ends between and":
        return levels[0] - eps <= ended <= levels[1] + eps
    for i in path:
        peak = max(close[max(0, at - 252) : i + 1])
        if close[i] <= peak * levels[0] / reference + eps:
            was = False
            if i - 1 >= max(0, at - 252):
                was = close[i - 1] <= max(close[max(0, at - 252) : i]) * marks[0] + eps
            if not was:
                return True
    return False


def slow_counts(bars, field, kinds, marks, span_rule):
    """Return hits of every record under every shift, one call and one shift at a time."""
    starts, n = field.starts, len(field.right)
    used = sorted({int(x) for x in starts.instrument})
    days = sorted(
        {int(d) for i in used for d in bars.day[bars.offsets[i] : bars.offsets[i + 1]]}
    )
    made = [int(bars.day[r]) for r in starts.reference]
    if span_rule == "record":
        days = [d for d in days if min(made) <= d <= max(made)]
    rows = []
    for i in range(n):
        number = int(starts.instrument[i])
        own = bars.day[bars.offsets[number] : bars.offsets[number + 1]].tolist()
        row = []
        for d in days:
            later = [j for j, s in enumerate(own) if s >= d]
            known = later and d >= own[0]
            row.append(
                slow_outcome(
                    bars, number, later[0], int(starts.span[i]), bool(starts.in_sessions[i]),
                    int(starts.lag[i]), kinds[i], marks[i],
                )
                if known
                else None
            )  # fmt: skip
        valid = [t for t, x in enumerate(row) if x is not None]
        for t in reversed(range(valid[0], valid[-1])):
            row[t] = row[t + 1] if row[t] is None else row[t]
        rows.append((days.index(made[i]), valid[0], valid[-1], row))
    # the calendar that leaves most calls in: first its end, then its beginning
    left = {e: [r for r in rows if r[0] <= e <= r[2]] for e in range(len(days))}
    end = max(left, key=lambda e: (len(left[e]), e))
    kept = {b: [r for r in left[end] if r[1] <= b <= r[0]] for b in range(end + 1)}
    begin = max(kept, key=lambda b: (len(kept[b]), -b))
    size = end - begin + 1
    counts = np.zeros((int(field.record.max()) + 1, size), dtype=np.int64)
    n_calls = [0] * len(counts)
    for i, (t0, low, high, row) in enumerate(rows):
        if low <= begin <= t0 <= end <= high:
            n_calls[field.record[i]] += 1
            for k in range(size):
                t = begin + (t0 - begin + k) % size
                counts[field.record[i], k] += row[t] != field.turned[i]
    return counts, n_calls


@st.composite
def fields(draw):
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    bars = concatenate_bars(
        ["A", "B"], [history(rng, 100, 40), history(rng, 100 + int(rng.integers(12)), 36)]
    )
    rows = []
    for _ in range(draw(st.integers(1, 12))):
        number = int(rng.integers(2))
        in_sessions, span = bool(rng.integers(2)), int(rng.integers(2, 9))
        lag = int(rng.integers(2))
        name = str(rng.choice(sorted(PHRASES)))
        at = int(rng.integers(0, 24))
        found = slow_outcome(bars, number, at, span, in_sessions, lag, name, PHRASES[name])
        if found is not None:
            rows.append(
                (number, at, span, in_sessions, lag, name, found, bool(rng.integers(2)))
            )
    if not rows:
        return draw(fields())
    record = rng.integers(0, 3, len(rows))
    record[0] = 2
    return bars, rows, record


def arrays(bars, rows, record):
    columns = list(zip(*rows, strict=True))
    number = np.array(columns[0])
    marks = np.full((len(rows), 2), np.nan)
    for i, name in enumerate(columns[5]):
        marks[i, : len(PHRASES[name])] = PHRASES[name]
    starts = Starts(
        instrument=number,
        reference=bars.offsets[number] + np.array(columns[1]),
        span=np.array(columns[2]),
        in_sessions=np.array(columns[3]),
        lag=np.array(columns[4]),
        additive=np.zeros(len(rows), dtype=bool),
        marks=marks,
    )
    turned = np.array(columns[7])
    return Field(starts, np.array(columns[6]) ^ turned, turned, record), columns[5]


def grouped(kinds):
    kinds = np.array(kinds)
    return [(KINDS[name], np.flatnonzero(kinds == name)) for name in sorted(set(kinds))]


@settings(max_examples=120, deadline=None)
@given(fields(), st.sampled_from(["record", "history"]))
def test_all_shifts_are_those_of_a_slow_loop(drawn, span):
    bars, rows, record = drawn
    field, kinds = arrays(bars, rows, record)
    found = null_worlds(grouped(kinds), bars, field, ShiftRules(TOLERANCE, span))
    marks = [PHRASES[name] for name in kinds]
    slow, n_calls = slow_counts(bars, field, kinds, marks, span)
    assert found.counts.tolist() == slow.tolist()
    assert found.n_calls.tolist() == n_calls
    own = np.bincount(record[found.takes_part], field.right[found.takes_part], 3)
    assert found.counts[:, 0].tolist() == own.tolist()


def test_a_call_that_the_calendar_settles_otherwise_takes_no_part():
    rng = np.random.default_rng(1)
    bars = concatenate_bars(["A"], [history(rng, 100, 40)])
    rows = [(0, at, 3, True, 1, "ends higher", True, False) for at in (2, 9, 30)]
    field, kinds = arrays(bars, rows, np.zeros(3, dtype=np.int64))
    came = [bars.close[at + 3] > bars.close[at] for at in (2, 9, 30)]
    found = null_worlds(grouped(kinds), bars, field, ShiftRules(TOLERANCE))
    assert found.n_calls.tolist() == [sum(came)]
    assert found.counts[0, 0] == sum(came)


def test_no_call_leaves_one_empty_shift():
    bars = concatenate_bars(["A"], [history(np.random.default_rng(2), 100, 10)])
    field, _ = arrays(bars, [(0, 1, 2, True, 1, "ends higher", True, False)], np.array([0]))
    nothing = Field(field.starts.take([]), field.right[:0], field.turned[:0], field.record[:0])
    found = null_worlds([], bars, nothing, ShiftRules(TOLERANCE))
    assert found.counts.shape == (0, 1)
    assert (found.first_day, found.last_day, found.n_shifts) == (0, -1, 1)


@pytest.mark.parametrize("name", ["ends lower by", "touches", "ends between and"])
def test_distances_scaled_by_volatility(name):
    rng = np.random.default_rng(3)
    bars = concatenate_bars(["A"], [history(rng, 100, 60)])
    rows = [(0, 20, 4, True, 1, name, False, False), (0, 45, 4, True, 1, name, False, False)]
    rows = [
        (*row[:6], slow_outcome(bars, 0, row[1], 4, True, 1, name, PHRASES[name]), False)
        for row in rows
    ]
    field, kinds = arrays(bars, rows, np.array([0, 1]))
    volatility = 0.01 * np.exp(rng.normal(0, 0.5, 60))
    rules = ShiftRules(TOLERANCE, "record", volatility)
    found = null_worlds(grouped(kinds), bars, field, rules)
    days = range(20, 46)
    for i, t0 in enumerate((20, 45)):
        for k in range(26):
            t = 20 + (t0 - 20 + k) % 26
            scale = volatility[t - 1] / volatility[t0 - 1]
            marks = [mark**scale for mark in PHRASES[name]]
            assert found.counts[i, k] == slow_outcome(bars, 0, t, 4, True, 1, name, marks)
    assert found.n_shifts == len(days)
