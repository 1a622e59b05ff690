from itertools import combinations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from foresaid.score.overlap import disjoint_windows

WINDOWS = st.lists(st.tuples(st.integers(0, 12), st.integers(0, 6)), max_size=9).map(
    lambda drawn: [(start, start + length) for start, length in drawn]
)


def count(windows):
    starts, ends = np.array(windows, dtype=np.int64).reshape(-1, 2).T
    return disjoint_windows(starts, ends)


def are_disjoint(one, other):
    if one == other and one[0] == one[1]:
        return False
    return one[0] >= other[1] or other[0] >= one[1]


def largest_by_trying_all(windows):
    for size in range(len(windows), 0, -1):
        for chosen in combinations(windows, size):
            if all(are_disjoint(*pair) for pair in combinations(chosen, 2)):
                return size
    return 0


@given(WINDOWS)
def test_no_choice_of_windows_is_larger(windows):
    assert count(windows) == largest_by_trying_all(windows)


@given(WINDOWS, st.integers(-(10**9), 10**9), st.randoms(use_true_random=False))
def test_order_place_and_direction_do_not_matter(windows, move, random):
    shuffled = [(start + move, end + move) for start, end in windows]
    random.shuffle(shuffled)
    assert count(shuffled) == count(windows)
    assert count([(-end, -start) for start, end in windows]) == count(windows)


@given(WINDOWS)
def test_entering_every_window_twice_adds_nothing(windows):
    long = [window for window in windows if window[0] < window[1]]
    assert count(windows + windows) == count(windows)
    assert count(long + long) == count(long)


@pytest.mark.parametrize(
    ("windows", "expected"),
    [
        ([], 0),
        ([(3, 3)], 1),
        ([(3, 3), (3, 3)], 1),
        ([(0, 5), (5, 10), (10, 15)], 3),
        ([(0, 5), (4, 10)], 1),
        ([(0, 5), (5, 5), (5, 10)], 3),
        ([(0, 10), (5, 5)], 1),
        ([(0, 100), (1, 2), (3, 4)], 2),
    ],
)
def test_cases(windows, expected):
    assert count(windows) == expected


def test_a_daily_record_of_yearly_windows():
    starts = np.arange(250 * 40)
    assert disjoint_windows(starts, starts + 250) == 40
    assert disjoint_windows(starts.astype(np.int32), (starts + 250).astype(np.int32)) == 40


def test_a_million_windows_that_all_overlap_take_one_step():
    starts = np.zeros(1_000_000, dtype=np.int64)
    assert disjoint_windows(starts, starts + 5) == 1


@pytest.mark.parametrize(
    ("starts", "ends", "named"),
    [
        ([0, 1], [1], "starts has length 2, ends 1"),
        ([0, 5], [1, 4], r"ends\[1\]=4 lies before starts\[1\]=5"),
        ([0.5], [1], "starts has dtype float64"),
        ([0], [np.nan], "ends has dtype float64"),
        ([[0]], [[1]], "starts has shape"),
    ],
)
def test_bad_windows_are_named(starts, ends, named):
    with pytest.raises(ValueError, match=named):
        disjoint_windows(np.array(starts), np.array(ends))
