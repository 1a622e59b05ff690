import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from foresaid.score.overlap import disjoint_windows
from foresaid.score.streams import log_sum_after_each, split_into_streams

WINDOWS = st.lists(st.tuples(st.integers(-5, 12), st.integers(1, 6)), max_size=12).map(
    lambda drawn: [(start, start + length) for start, length in drawn]
)


def split(windows):
    starts, ends = np.array(windows, dtype=np.int64).reshape(-1, 2).T
    return split_into_streams(starts, ends).tolist()


def slow_split(windows):
    """Look through all streams for each window."""
    last_ends, found = [], [0] * len(windows)
    for row in sorted(range(len(windows)), key=lambda i: (windows[i][0], i)):
        start, end = windows[row]
        fits = [j for j, last in enumerate(last_ends) if last <= start]
        found[row] = fits[0] if fits else len(last_ends)
        last_ends[found[row] : found[row] + 1] = [end]
    return found


@given(WINDOWS)
def test_each_window_goes_to_the_first_stream_that_has_ended(windows):
    assert split(windows) == slow_split(windows)


@given(WINDOWS)
def test_windows_of_a_stream_do_not_overlap_and_no_stream_is_wasted(windows):
    found = split(windows)
    for j in set(found):
        own = [window for window, where in zip(windows, found, strict=True) if where == j]
        starts, ends = np.array(own).T
        assert disjoint_windows(starts, ends) == len(own)
    deepest = max((sum(s <= day < e for s, e in windows) for day in range(-5, 20)), default=0)
    assert max(found, default=-1) + 1 == deepest


@given(WINDOWS, st.integers(-6, 13))
def test_a_later_window_moves_no_earlier_one(windows, day):
    early = [window for window in windows if window[0] <= day]
    found = split(windows)
    kept = [where for window, where in zip(windows, found, strict=True) if window[0] <= day]
    assert split(early) == kept


@given(WINDOWS, st.integers(-6, 13))
def test_the_end_of_an_open_window_does_not_matter(windows, day):
    early = [window for window in windows if window[0] <= day]
    assert split(early) == split([(start, min(end, day + 1)) for start, end in early])


@pytest.mark.parametrize(
    ("windows", "expected"),
    [
        ([], []),
        ([(3, 4)], [0]),
        ([(0, 5), (5, 10), (10, 15)], [0, 0, 0]),
        ([(0, 5), (4, 10), (5, 6)], [0, 1, 0]),
        ([(0, 5), (0, 3), (3, 9)], [0, 1, 1]),
        ([(0, 9), (0, 9), (0, 9)], [0, 1, 2]),
        ([(10, 15), (0, 10), (1, 2), (2, 3)], [0, 0, 1, 1]),
    ],
)
def test_cases(windows, expected):
    assert split(windows) == expected


@pytest.mark.parametrize(
    ("starts", "ends", "named"),
    [
        ([0, 1], [1], "starts has length 2, ends 1"),
        ([0, 5], [1, 5], r"ends\[1\]=5 must lie after starts\[1\]=5"),
        ([0.5], [1], "starts has dtype float64"),
        ([0], [np.nan], "ends has dtype float64"),
        ([[0]], [[1]], "starts has shape"),
    ],
)
def test_bad_windows_are_named(starts, ends, named):
    with pytest.raises(ValueError, match=named):
        split_into_streams(np.array(starts), np.array(ends))


@given(st.data(), st.integers(1, 9))
def test_sums_are_those_of_a_slow_loop(data, n_streams):
    logs = st.floats(-30, 30)
    idle = data.draw(st.lists(logs, min_size=n_streams, max_size=n_streams))
    changes = data.draw(st.lists(st.tuples(st.integers(0, n_streams - 1), logs), max_size=25))
    held, expected = list(idle), []
    for where, value in changes:
        held[where] = value
        expected.append(math.log(math.fsum(map(math.exp, held))))
    stream, values = np.array(changes).reshape(-1, 2).T
    found = log_sum_after_each(stream.astype(np.int64), values, np.array(idle))
    assert found.tolist() == pytest.approx(expected, rel=1e-13, abs=1e-13)


def test_a_sum_that_falls_from_a_great_height_keeps_its_digits():
    stream, values = np.array([2, 0, 2]), np.array([5000.0, -3.0, -9000.0])
    found = log_sum_after_each(stream, values, np.log([0.5, 0.25, 0.25]))
    assert found.tolist() == pytest.approx(
        [5000.0, 5000.0, math.log(math.exp(-3) + 0.25)], rel=1e-15
    )


@pytest.mark.parametrize(
    ("stream", "values", "idle", "named"),
    [
        ([0, 2], [0.0, 0.0], [0.0, 0.0], r"stream holds 2, must lie in \[0, 1\]"),
        ([-1], [0.0], [0.0], "stream holds -1"),
        ([0], [0.0, 1.0], [0.0], r"values has shape \(2,\), stream \(1,\)"),
        ([0], [0.0], [], "idle has shape"),
        ([0.5], [0.0], [0.0], "stream has dtype float64"),
    ],
)
def test_bad_changes_are_named(stream, values, idle, named):
    with pytest.raises(ValueError, match=named):
        log_sum_after_each(np.array(stream), np.array(values), np.array(idle))
