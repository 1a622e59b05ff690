"""One instrument's sessions: units, total returns, what is left aside."""

from datetime import date, timedelta

import numpy as np
import pytest

from foresaid.market.actions import factor_steps
from foresaid.market.closures import FAR, reach_of
from foresaid.market.lines import line_of, reinvested, without_query
from foresaid.model.price_history import PriceHistory
from foresaid.model.records import Action

EPOCH = date(1970, 1, 1)
NO_HALTS = np.zeros((0, 2), dtype=np.int64)


def act(kind, day, **terms):
    return Action("ABC", EPOCH + timedelta(days=day), kind, **terms)


def line(close, *, kind="raw", actions=(), halts=NO_HALTS, until=1_000, total=None, aside=()):
    close = np.array(close, dtype=float)
    nan = np.full(len(close), np.nan)
    history = PriceHistory(
        np.arange(10, 10 + len(close)),
        nan,
        nan,
        close,
        None if total is None else np.array(total, dtype=float),
        aside=np.array(aside, dtype=np.int64),
    )
    actions = list(actions)
    return line_of(history, factor_steps(actions), kind, actions, np.array(halts), until)


@pytest.mark.parametrize(
    ("halts", "aside"), [(NO_HALTS, ()), ([[12, FAR]], ()), (NO_HALTS, (12,))]
)
def test_an_adjusted_file_is_in_the_units_of_its_last_row(halts, aside):
    rows = [20, 21] if len(aside) else [20, 21, 21]
    found = line(
        rows,
        kind="split-adjusted",
        actions=[act("split", 12, ratio=2.0)],
        halts=halts,
        aside=aside,
    )
    assert found.close[:2].tolist() == [40.0, 42.0]
    assert found.known_day == 12


def test_a_total_return_series_is_as_it_is():
    found = line([20, 11], kind="total-return", actions=[act("split", 11, ratio=2.0)])
    assert found.close.tolist() == [20.0, 11.0]
    assert found.total_until == FAR


def test_rows_after_the_last_day_that_counts_tell_nothing():
    found = line([1, 2, 3, 4], until=11, aside=[11, 14])
    assert found.day.tolist() == [10, 11]
    assert (found.known_day, found.aside.tolist()) == (11, [11])


def test_total_returns_go_on_with_dividends_from_the_first_gap_on():
    paid = [act("dividend", 11, amount=5.0), act("dividend", 13, amount=2.0)]
    found = reinvested(line([10, 10, 10, 10], total=[100, 110, np.nan, 7], actions=paid))
    # 110 up to the gap, then 110 x 10/10, then with 2 on 10 besides
    assert found.total.tolist() == pytest.approx([100, 110, 110, 132])
    assert (found.total_until, found.total_since) == (11, 11)


def test_a_gap_in_the_first_row_leaves_the_dividends_alone():
    paid = [act("dividend", 11, amount=5.0), act("dividend", 12, amount=0.0)]
    found = reinvested(line([10, 10], total=[np.nan, 9], actions=paid))
    assert found.total.tolist() == [10.0, 15.0]
    assert (found.total_until, found.total_since) == (-FAR, 11)


def test_a_dividend_is_in_the_units_of_its_own_day():
    actions = [act("dividend", 11, amount=1.0), act("split", 12, ratio=2.0)]
    found = line([10, 6], actions=actions)
    moved = reinvested(found.take(np.array([True, False])))
    assert moved.total.tolist() == [10.0]
    assert found.paid.tolist() == [1.0]


def test_other_closes_carry_the_total_along():
    found = line([10, 20], total=[1, 3])
    clean = without_query(found, found.high, found.low, np.array([10.0, 10.0]))
    assert clean.total.tolist() == [1.0, 1.5]


@pytest.mark.parametrize(
    ("known", "halts", "weekends", "today", "reach"),
    [
        (0, NO_HALTS, False, 30, 0),  # 1970-01-01 was a Thursday
        (1, NO_HALTS, False, 30, 3),
        (1, NO_HALTS, True, 30, 1),
        (1, NO_HALTS, False, 2, 2),  # today is Saturday
        (0, [[1, 5]], False, 30, 4),
        (1, [[4, 9]], False, 30, 10),  # a weekend, a halt, the next weekend
        (1, [[4, FAR]], False, 30, 30),
        (0, [[4, 9]], False, 30, 0),  # Friday's row may still come
        (-FAR, NO_HALTS, False, 30, -FAR),
    ],
)
def test_how_far_prices_reach(known, halts, weekends, today, reach):
    found = reach_of(known, np.array(halts), weekends=weekends, today=today)
    assert found == reach
