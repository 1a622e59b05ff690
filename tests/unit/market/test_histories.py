from datetime import date, timedelta

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from foresaid.market.histories import build_market, minutes
from foresaid.model.codebook import default_codebook
from foresaid.model.price_history import PriceHistory
from foresaid.model.records import Action, Instrument

BOOK = default_codebook()
EPOCH = date(1970, 1, 1)
ABC = Instrument("ABC", kind="share", opens="09:00", closes="17:30")


def on(day):
    return EPOCH + timedelta(days=day)


def history(day, close, *, high=None, low=None):
    close = np.asarray(close, dtype=float)
    nan = np.full(len(close), np.nan)
    return PriceHistory(
        np.asarray(day, dtype=np.int64),
        nan if high is None else np.asarray(high, dtype=float),
        nan if low is None else np.asarray(low, dtype=float),
        close,
    )


def market(prices, *, actions=(), series="raw", as_of=1_000, instrument=ABC):
    return build_market(
        [instrument],
        {instrument.symbol: prices},
        list(actions),
        {instrument.symbol: series},
        BOOK,
        as_of=on(as_of),
    )


SPLIT = Action("ABC", on(12), "split", ratio=4.0)


def test_raw_prices_are_made_continuous():
    found = market(
        history(
            [10, 11, 12, 13], [80.0, 84.0, 21.5, 22.0], high=[81, 85, 22, 23], low=[80] * 4
        ),
        actions=[SPLIT],
    )
    assert found.bars.close.tolist() == [80.0, 84.0, 86.0, 88.0]
    assert found.bars.high.tolist() == [81.0, 85.0, 88.0, 92.0]
    assert found.bars.factor.tolist() == [1.0, 1.0, 4.0, 4.0]
    assert found.bars.has_range.all()


def test_adjusted_prices_have_the_factor_of_the_last_session():
    raw = market(history([10, 11, 12, 13], [80.0, 84.0, 21.5, 22.0]), actions=[SPLIT])
    adjusted = market(
        history([10, 11, 12, 13], [20.0, 21.0, 21.5, 22.0]),
        actions=[SPLIT],
        series="split-adjusted",
    )
    assert adjusted.bars.close.tolist() == raw.bars.close.tolist()
    assert adjusted.bars.factor.tolist() == [4.0] * 4
    # a level said on a day is in the units of that day, whatever the file is in
    day = np.array([11, 12])
    none = np.zeros(2, dtype=np.int64)
    for one in (raw, adjusted):
        assert one.level_factor(none, day).tolist() == [1.0, 4.0]


@pytest.mark.parametrize("series", ["raw", "split-adjusted"])
@pytest.mark.parametrize("as_of", [9, 10, 11, 12, 13, 40])
def test_what_is_known_by_a_day_does_not_depend_on_later_sessions(series, as_of):
    day, close = [10, 11, 13], [80.0, 84.0, 22.0]
    found = market(history(day, close), actions=[SPLIT], series=series, as_of=as_of).bars
    whole = market(history(day, close), actions=[SPLIT], series=series).bars
    known = sum(one <= as_of for one in day)
    assert found.day.tolist() == day[:known]
    assert found.close.tolist() == whole.close[:known].tolist()
    assert found.factor.tolist() == whole.factor[:known].tolist()


def test_missing_highs_and_lows_are_the_close():
    prices = history(
        [1, 2, 3], [5.0, 6.0, 7.0], high=[5.5, np.nan, 7.5], low=[4.5, 5.5, np.nan]
    )
    bars = market(prices).bars
    assert bars.has_range.tolist() == [True, False, False]
    assert bars.high.tolist() == [5.5, 6.0, 7.0]
    assert bars.low.tolist() == [4.5, 6.0, 7.0]


def test_instruments_keep_their_order_and_may_lack_prices():
    names = [Instrument("B"), Instrument("A", kind="yield"), Instrument("C", kind="coin")]
    found = build_market(
        names,
        {"C": history([5], [1.0]), "B": history([1, 2], [1.0, 2.0])},
        [],
        {"C": "total-return"},
        BOOK,
        as_of=on(99),
    )
    assert found.bars.symbols == ("B", "A", "C")
    assert found.bars.offsets.tolist() == [0, 2, 2, 3]
    assert found.venue.additive.tolist() == [False, True, False]
    assert found.venue.weekends.tolist() == [False, False, True]
    assert found.venue.total_return.tolist() == [False, False, True]
    assert found.as_of_day == 99


@pytest.mark.parametrize(
    ("opens", "closes", "known", "found"),
    [
        ("09:00", "17:30", True, (540, 1050)),
        ("", "", False, (0, 1440)),
        ("18:00", "17:00", True, (1080, 1020)),
    ],
)
def test_hours(opens, closes, known, found):
    venue = market(
        history([1], [1.0]), instrument=Instrument("ABC", opens=opens, closes=closes)
    ).venue
    assert venue.hours_known.tolist() == [known]
    assert (int(venue.opens[0]), int(venue.closes[0])) == found


@pytest.mark.parametrize(("clock", "count"), [("00:00", 0), ("09:05", 545), ("24:00", 1440)])
def test_minutes(clock, count):
    assert minutes(clock) == count


@given(
    st.lists(st.decimals(min_value="0.0001", max_value="99999", places=4), min_size=1),
    st.lists(st.sampled_from([2.0, 3.0, 7.0, 0.1, 1.0 / 3.0, 1.5]), max_size=3),
)
def test_prices_come_back_as_they_stand_in_the_file(prices, ratios):
    close = np.array([float(one) for one in prices])
    day = np.arange(len(close))
    splits = [Action("ABC", on(i), "split", ratio=ratio) for i, ratio in enumerate(ratios)]
    found = market(history(day, close), actions=splits)
    back = found.in_file_units(found.bars.close, day)
    assert back.tolist() == close.tolist()


def test_unsplit_prices_come_back_to_the_last_digit():
    close = np.array([np.pi * 1e5, 1 / 3, 0.0, -0.5])
    yields = Instrument("ABC", kind="yield")
    found = market(history(range(4), close), instrument=yields)
    assert found.in_file_units(found.bars.close, np.arange(4)).tolist() == close.tolist()


def test_zero_and_unknown_prices_come_back_as_such_after_a_split():
    found = market(history([10, 12], [80.0, 20.0]), actions=[SPLIT])
    price = np.array([0.0, np.nan])
    back = found.in_file_units(price, np.array([1, 1]))
    assert back[0] == 0.0
    assert np.isnan(back[1])


def dividend(day, amount):
    return Action("ABC", on(day), "dividend", amount=amount)


def test_dividends_are_reinvested_at_the_close_of_their_session():
    prices = history([10, 11, 13, 14], [100.0, 50.0, 40.0, 44.0])
    bars = market(prices, actions=[dividend(12, 4.0), dividend(99, 1.0)]).bars
    assert bars.total.tolist() == pytest.approx([100.0, 50.0, 44.0, 48.4])
    assert bars.total_known.tolist() == [True]


def test_total_return_is_the_same_from_raw_and_from_adjusted_prices():
    paid = [SPLIT, dividend(11, 4.0), dividend(13, 1.0)]
    raw = market(history([10, 11, 12, 13], [80.0, 84.0, 21.5, 22.0]), actions=paid)
    adjusted = market(
        history([10, 11, 12, 13], [20.0, 21.0, 21.5, 22.0]),
        actions=paid,
        series="split-adjusted",
    )
    assert adjusted.bars.total.tolist() == pytest.approx(raw.bars.total.tolist())


def test_a_dividend_is_not_known_before_its_day():
    bars = market(history([10, 11, 12], [80.0] * 3), actions=[dividend(12, 1.0)]).bars
    none = np.zeros(3, dtype=np.int64)
    assert bars.knows_total(none, np.array([10, 11, 12])).tolist() == [False, False, True]


def test_without_dividends_the_total_is_not_known():
    bars = market(history([10, 11], [80.0, 84.0])).bars
    assert bars.total.tolist() == [80.0, 84.0]
    assert bars.total_known.tolist() == [False]
    own = market(history([10, 11], [80.0, 84.0]), series="total-return").bars
    assert own.total_known.tolist() == [True]
