import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from foresaid.model.bars import Windows, concatenate_bars


def bars_of(*histories):
    """Return bars with these sessions, closes counted from 1 across all of them."""
    columns, count = [], 0
    for days in histories:
        close = np.arange(count + 1, count + 1 + len(days), dtype=float)
        count += len(days)
        columns.append(
            {
                "day": np.array(days, dtype=np.int64),
                "high": close + 0.5,
                "low": close - 0.5,
                "close": close,
                "has_range": np.ones(len(days), dtype=bool),
                "factor": np.ones(len(days)),
                "total": close,
                "total_known": False,
            }
        )
    return concatenate_bars([f"S{i}" for i in range(len(histories))], columns)


def slow_look_up(bars, number, day):
    """Return position, whether it is a session, whether it is beyond, by looking at each."""
    own = range(int(bars.offsets[number]), int(bars.offsets[number + 1]))
    found = int(bars.offsets[number]) - 1
    for at in own:
        if bars.day[at] <= day:
            found = at
    is_session = any(bars.day[at] == day for at in own)
    is_beyond = not any(bars.day[at] >= day for at in own)
    return found, int(is_session), is_beyond


histories = st.lists(
    st.lists(st.integers(1, 9), max_size=12).flatmap(
        lambda gaps: st.integers(-30, 60).map(
            lambda start: [start + sum(gaps[:i]) for i in range(len(gaps))]
        )
    ),
    min_size=1,
    max_size=5,
)


@given(histories, st.data())
def test_look_up_against_a_loop(days, data):
    bars = bars_of(*days)
    n = data.draw(st.integers(0, 30))
    number = data.draw(st.lists(st.integers(0, len(days) - 1), min_size=n, max_size=n))
    wanted = data.draw(st.lists(st.integers(-60, 200), min_size=n, max_size=n))
    instrument = np.array(number, dtype=np.int64)
    found = bars.calendar(instrument).look_up(np.array(wanted, dtype=np.int64))
    slow = [slow_look_up(bars, *pair) for pair in zip(number, wanted, strict=True)]
    columns = [list(c) for c in zip(*slow, strict=True)] or [[], [], []]
    assert [column.tolist() for column in found] == columns


def test_look_up_agrees_with_searchsorted_on_a_long_history():
    rng = np.random.default_rng(5)
    day = 10_000 + np.cumsum(rng.integers(1, 12, size=5_000))
    bars = bars_of([3, 4], day, [])
    wanted = rng.integers(9_990, int(day[-1]) + 20, size=2_000)
    position, is_session, is_beyond = bars.calendar(np.ones(2_000, dtype=np.int64)).look_up(
        wanted
    )
    assert (position == 2 + np.searchsorted(day, wanted, side="right") - 1).all()
    assert (is_session == np.isin(wanted, day)).all()
    assert (is_beyond == (wanted > day[-1])).all()


@pytest.mark.parametrize("day", [-5, 0, 1, 16_000, 90_000])
def test_an_empty_history_has_nothing_on_or_after_any_day(day):
    # a long history before it: cells of the table far above the number of the day
    bars = bars_of(range(0, 40_000, 2), [], [7])
    at = bars.calendar(np.array([1])).look_up(np.array([day]))
    assert [column.tolist() for column in at] == [[19_999], [0], [True]]


def test_at_or_before():
    bars = bars_of([10, 12, 15], [11])
    instrument = np.array([0, 0, 0, 0, 0, 1, 1])
    day = np.array([9, 10, 11, 14, 99, 10, 11])
    assert bars.at_or_before(instrument, day).tolist() == [-1, 0, 0, 1, 2, 2, 3]


def test_last_positions_and_days():
    bars = bars_of([10, 12], [], [20])
    assert bars.last_position.tolist() == [1, 1, 2]
    assert bars.last_day.tolist() == [12, np.iinfo(np.int32).min, 20]


@pytest.mark.parametrize(
    ("days", "gap"),
    [
        ([], 0),
        ([[]], 0),
        ([[5]], 0),
        ([[5, 6, 9]], 3),
        ([[1, 2], [50, 54]], 4),
        ([[], [1, 2], [], [90, 92]], 2),
        ([[50, 51], [1, 8]], 7),
    ],
)
def test_longest_gap_stays_inside_histories(days, gap):
    assert bars_of(*days).longest_gap == gap


def test_no_instruments_at_all():
    bars = concatenate_bars([], [])
    assert bars.offsets.tolist() == [0]
    none = np.zeros(0, dtype=np.int64)
    assert [len(column) for column in bars.calendar(none).look_up(none)] == [0, 0, 0]


def test_concatenated_histories_lie_end_to_end():
    bars = bars_of([1, 2], [], [5])
    assert bars.symbols == ("S0", "S1", "S2")
    assert bars.offsets.tolist() == [0, 2, 2, 3]
    assert bars.day.tolist() == [1, 2, 5]
    assert bars.close.tolist() == [1.0, 2.0, 3.0]
    assert bars.has_range.dtype == bool


def test_windows_are_taken_by_slice_mask_and_index():
    whole = np.arange(4)
    windows = Windows(whole, whole + 1, whole + 2, whole + 3, whole % 2 == 0)
    assert len(windows) == 4
    assert windows.take(slice(1, 3)).reference.tolist() == [2, 3]
    assert windows.take(np.array([True, False, False, True])).last.tolist() == [3, 6]
    assert windows.take(np.array([2, 0])).additive.tolist() == [True, True]
