import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from foresaid.claims.paths import window_volatility
from foresaid.claims.registry import KINDS
from support.windows import TOLERANCE, bars_from, coarse_bars, windows_from, windows_in


def judged(name, close, mark, *, reference=0, last=None, high=None, low=None):
    """Judge one window that starts the session after its reference."""
    bars = bars_from(close, high=high, low=low)
    windows = windows_from([reference], [reference + 1], [last or len(close) - 1])
    marks = np.atleast_2d(np.asarray(mark, dtype=float))
    kernel = KINDS[name].kernel
    unfit = [one.reason for one in kernel.unsound(bars, windows, marks, TOLERANCE) if one.rows]
    if unfit:
        return unfit[0]
    found = kernel.judge(bars, windows, marks, TOLERANCE)
    return bool(found.hit[0]), int(found.decided[0]), float(found.measured[0])


@pytest.mark.parametrize(
    ("close", "reference", "hit", "decided", "deepest"),
    [
        # a tenth under the running peak, not under the reference
        ([100, 110, 99, 120], 0, True, 2, 0.1),
        ([100, 110, 99.1, 120], 0, False, 3, 1 - 99.1 / 110),
        # the peak may lie before the reference
        ([120, 100, 110, 107], 1, True, 3, 1 - 107 / 120),
        ([120, 110, 110, 109], 1, False, 3, 1 - 109 / 120),
        # under it already: it has to come back before it can cross anew
        ([120, 100, 101, 102], 1, False, 3, 1 - 101 / 120),
        ([120, 100, 115, 100], 1, True, 3, 1 - 100 / 120),
        ([100, 101, 102, 103], 0, False, 3, 0.0),
    ],
)
def test_a_drawdown_is_from_the_running_peak(close, reference, hit, decided, deepest):
    found = judged("drawdown", close, 0.9, reference=reference)
    assert found == (hit, decided, pytest.approx(deepest))


@given(st.data())
@settings(max_examples=60)
def test_drawdowns_against_a_loop(data):
    bars = data.draw(coarse_bars())
    windows = data.draw(windows_in(bars))
    keep = data.draw(st.sampled_from([0.99, 0.97, 0.95, 0.9]))
    marks = np.full((len(windows), 1), keep)
    found = KINDS["drawdown"].kernel.judge(bars, windows, marks, TOLERANCE)
    for i in range(len(windows)):
        start = max(0, int(windows.reference[i]) - 252)
        first, last = int(windows.first[i]), int(windows.last[i])

        def is_under(at, start=start):
            if at < start:
                return False
            peak = bars.close[start : at + 1].max()
            return bars.close[at] <= peak * keep * (1 + TOLERANCE)

        crossed = [t for t in range(first, last + 1) if is_under(t) and not is_under(t - 1)]
        assert bool(found.hit[i]) == bool(crossed)
        assert int(found.decided[i]) == (crossed[0] if crossed else last)


@pytest.mark.parametrize(
    ("name", "close", "expected"),
    [
        ("low holds", [95, 99, 100, 97, 95], (True, 4, 0.0)),
        ("low holds", [95, 99, 100, 94, 97], (False, 3, 94 / 95 - 1)),
        ("high holds", [105, 99, 100, 105, 101], (True, 4, 101 / 105 - 1)),
        ("high holds", [105, 99, 100, 106, 101], (False, 3, 106 / 105 - 1)),
        # the reference itself is no session before the call
        ("low holds", [99, 98, 95, 96, 97], (False, 3, 96 / 98 - 1)),
    ],
)
def test_old_extremes(name, close, expected):
    hit, decided, measured = expected
    found = judged(name, close, 1.0, reference=2)
    assert found == (hit, decided, pytest.approx(measured, abs=1e-15))


def test_an_old_extreme_needs_a_session_before():
    assert judged("low holds", [100, 101, 102], 1.0) == "no price before the call"


@pytest.mark.parametrize(
    ("high", "low", "expected"),
    [
        ([100, 104, 106], [100, 99, 99], (True, 2)),
        ([100, 104, 106], [100, 95, 99], (False, 1)),
        ([100, 104, 104], [100, 99, 99], (False, 2)),
        ([100, 106, 104], [100, 99, 90], (True, 1)),
        ([100, 106, 104], [100, 95, 99], "both levels were touched in one session"),
    ],
)
def test_a_race(high, low, expected):
    found = judged("touches before", [100, 100, 100], [1.05, 0.95], high=high, low=low)
    assert (found if isinstance(found, str) else found[:2]) == expected


def test_a_race_from_the_level():
    found = judged("touches before", [100, 101], [1.0, 1.1])
    assert found == "the level is the reference price"


@given(st.data())
@settings(max_examples=60)
def test_volatility_against_the_plain_formula(data):
    bars = data.draw(coarse_bars())
    windows = data.draw(windows_in(bars))
    found = window_volatility(bars, windows)
    for i in range(len(windows)):
        first, last = int(windows.reference[i]), int(windows.last[i])
        moves = np.diff(np.log(bars.close[first : last + 1]))
        if len(moves) < 2:
            assert np.isnan(found[i])
        else:
            expected = np.std(moves, ddof=1) * np.sqrt(252)
            assert found[i] == pytest.approx(expected, rel=1e-7, abs=1e-7)


def test_volatility_needs_two_moves_and_prices_above_nought():
    few = judged("volatility above", [100, 101], 0.2)
    assert few == "too few sessions for a volatility"
    found = judged("volatility above", [100, 101, 0.0], 0.2)
    assert found == "a price at or below zero has no volatility"
