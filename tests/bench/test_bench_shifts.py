"""The exact shift tests against random draws of shifts, in the same run.

Run with ``python -m pytest tests/bench --benchmark-only``. The ratios are what counts. Random
draws only come near what counting all shifts gives exactly, so equality is asserted shift by
shift: a draw must find the hits that the table holds for its shift.
"""

import time

import numpy as np
import pytest

from foresaid.chance.field import field_test, timing_test
from foresaid.chance.shifts import ShiftedHits

N_SHIFTS, DRAWS = 5_000, 10_000


def _world(n_records, n_calls, n_signatures):
    """Calls of all records, each record's together as a ledger's index gives them."""
    rng = np.random.default_rng(n_records)
    signature = rng.integers(0, n_signatures, n_calls)
    return {
        "outcomes": (rng.random((n_signatures, N_SHIFTS)) < 0.55).view(np.uint8),
        "low": np.zeros(n_signatures, dtype=np.int64),
        "cycle": np.full(n_signatures, N_SHIFTS),
        "record": np.sort(rng.integers(0, n_records, n_calls)),
        "signature": signature,
        "start": rng.integers(0, N_SHIFTS, n_calls),
    }


def _exactly(n_records, given):
    """Hits under all shifts, moments, p-values and the joint extremes of both tails."""
    hits = ShiftedHits(n_records, N_SHIFTS)
    hits.add(
        given["outcomes"],
        low=given["low"],
        cycle=given["cycle"],
        record=given["record"],
        signature=given["signature"],
        start=given["start"],
    )
    timing = timing_test(hits.counts)
    return hits.counts, timing, field_test(hits.counts, timing)


def _by_draws(n_records, given, shifts):
    """The obvious loop: move all calls by one random number, settle them, count.

    Moments and the maximum would come on top; they are left out of its time.
    """
    outcomes, record = given["outcomes"], given["record"]
    signature, start = given["signature"], given["start"]
    kept = []
    for shift in shifts:
        right = outcomes[signature, (start + shift) % N_SHIFTS]
        kept.append(np.bincount(record, weights=right, minlength=n_records))
    return kept


def _seconds(function):
    begin = time.perf_counter()
    result = function()
    return time.perf_counter() - begin, result


def _ratio(n_records, given, *, sampled, repeats):
    """Return how many times faster, and our seconds; the draws are scaled up from a sample.

    Both ways are timed in turn and the median of the ratios is taken: the draws wait for
    memory, which other work on the machine slows down from one moment to the next.
    """
    rng, ratios, seconds = np.random.default_rng(1), [], []
    for _ in range(repeats):
        shifts = rng.integers(0, N_SHIFTS, sampled)
        slow, drawn = _seconds(lambda s=shifts: _by_draws(n_records, given, s))
        fast, (counts, timing, field) = _seconds(lambda: _exactly(n_records, given))
        ratios.append(slow * DRAWS / sampled / fast)
        seconds.append(fast)
    assert (np.array(drawn) == counts[:, shifts].T).all()
    z = (counts[:, shifts] - timing.mean[:, None]) / timing.deviation[:, None]
    assert field.maximum[shifts] == pytest.approx(z.max(axis=0), rel=1e-12)
    return float(np.median(ratios)), float(np.median(seconds))


def test_70_records_with_6600_calls(benchmark):
    given = _world(70, 6_600, 1_500)
    ratio, seconds = _ratio(70, given, sampled=200, repeats=15)
    benchmark.extra_info["ratio"] = ratio
    benchmark(_exactly, 70, given)
    assert ratio >= 120, f"only {ratio:.0f} times faster"
    assert seconds < 0.05, f"took {1000 * seconds:.0f} ms"


def test_10000_records_with_a_million_calls(benchmark):
    """The draws are extrapolated from 20 of 10,000."""
    given = _world(10_000, 1_000_000, 10_000)
    ratio, _ = _ratio(10_000, given, sampled=20, repeats=5)
    benchmark.extra_info["ratio"] = ratio
    benchmark.pedantic(_exactly, args=(10_000, given), rounds=1)
    assert ratio >= 200, f"only {ratio:.0f} times faster"
