from datetime import date

import numpy as np
import pytest

from foresaid.market.closures import FAR, days_in, halts_of, without_stale
from foresaid.model.days import day_number
from foresaid.model.price_history import PriceHistory
from foresaid.model.records import Action

NAN = np.nan


def history(close, volume, *, high=None, low=None):
    n = len(close)
    close = np.array(close, dtype=float)
    return PriceHistory(
        100 + np.arange(n),
        np.full(n, NAN) if high is None else np.array(high, dtype=float),
        np.full(n, NAN) if low is None else np.array(low, dtype=float),
        close,
        volume=np.array(volume, dtype=float),
    )


def kept(found):
    return (found.day - 100).tolist(), (found.aside - 100).tolist()


@pytest.mark.parametrize(
    ("close", "volume", "aside"),
    [
        ([10, 10, 10, 11], [5, 0, 0, 3], [1, 2]),
        ([10, 10, 10, 11], [0, 0, 0, 0], []),  # a file that knows no volumes
        ([10, 10, 10, 11], [0, 0, 5, 0], []),  # none was known before
        ([10, 11, 11, 11], [5, 0, 0, NAN], [2]),  # the first 11 is new, the last unknown
        ([10, 10, 10], [NAN, NAN, NAN], []),
        ([10, 10], [5, 7], []),
        ([10], [0], []),
        ([], [], []),
    ],
)
def test_a_repeat_without_volume_is_no_session(close, volume, aside):
    days, left = kept(without_stale(history(close, volume)))
    assert left == aside
    assert days == [i for i in range(len(close)) if i not in aside]


def test_a_row_with_a_range_was_traded():
    ranged = history([10, 10, 10], [5, 0, 0], high=[10, 10.5, 10], low=[10, 10, 10])
    assert kept(without_stale(ranged)) == ([0, 1], [2])


def test_all_columns_lose_the_same_rows():
    one = PriceHistory(
        np.arange(3),
        *np.full((2, 3), NAN),
        np.array([1.0, 1.0, 2.0]),
        np.arange(3.0),
        np.array([1.0, 0.0, 1.0]),
    )
    found = without_stale(one)
    assert found.close.tolist() == [1.0, 2.0]
    assert found.total.tolist() == [0.0, 2.0]
    assert found.volume.tolist() == [1.0, 1.0]


def action(kind, day):
    return Action("ABC", date(2025, 3, day), kind)


def day(number):
    return day_number(date(2025, 3, number))


@pytest.mark.parametrize(
    ("actions", "spans"),
    [
        ([("halt", 3), ("resume", 6)], [(3, 6)]),
        ([("resume", 6), ("halt", 3)], [(3, 6)]),  # in any order
        ([("halt", 3)], [(3, None)]),
        ([("halt", 3), ("halt", 4), ("resume", 6), ("resume", 7)], [(3, 6)]),
        ([("resume", 2), ("halt", 3), ("resume", 5), ("halt", 8)], [(3, 5), (8, None)]),
        ([("halt", 3), ("resume", 12)], [(3, None)]),  # not resumed yet on the 10th
        ([("halt", 12)], []),
        ([("split", 3)], []),
    ],
)
def test_halts_known_by_a_day(actions, spans):
    found = halts_of([action(*one) for one in actions], today=day(10))
    wanted = [[day(a), FAR if b is None else day(b)] for a, b in spans]
    assert found.tolist() == wanted


def test_days_in_spans():
    spans = np.array([[3, 6], [8, FAR]])
    inside = days_in(spans, np.arange(1, 11))
    assert inside.tolist() == [False, False, True, True, True, False, False, True, True, True]
    assert not days_in(np.zeros((0, 2), dtype=np.int64), np.arange(3)).any()
