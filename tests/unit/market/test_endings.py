"""Instruments that end, settled through the whole of settlement."""

from datetime import date

import numpy as np
import pytest

from foresaid.market.histories import build_market
from foresaid.model.codebook import default_codebook
from foresaid.model.price_history import PriceHistory
from foresaid.model.records import Action, Instrument
from foresaid.settle.outcomes import CallClaims, settle_calls
from foresaid.settle.windows import CallTimes

BOOK = default_codebook()
FIRST = 18_000  # 2019-04-14


def day(number):
    return np.datetime64(FIRST + number, "D").astype(date)


def history(close, *, start=0):
    close = np.array(close, dtype=float)
    days = np.arange(FIRST + start, FIRST + start + len(close))
    return PriceHistory(days, close + 1, close - 1, close)


def market(histories, actions, *, as_of=60):
    instruments = [Instrument(symbol, kind="share") for symbol in histories]
    return build_market(instruments, histories, actions, {}, BOOK, as_of=day(as_of))


def settle(found, kind, value, *, due, said=0, sessions=0):
    one = np.zeros(1, dtype=np.int64)
    times = CallTimes(
        one, one + FIRST + said, np.array([-1.0]), one + FIRST + due, one + sessions
    )
    claims = CallClaims(
        np.array([kind], dtype=object),
        np.array([[value, 0.0, 0.0]]),
        np.zeros((1, 3), dtype=np.int64),
        np.array([""], dtype=object),
    )
    return settle_calls(times, claims, found, np.zeros(1, bool), BOOK.settlement)


def test_a_cash_takeover_settles_later_deadlines_at_its_amount():
    found = market(
        {"OLD": history([50, 51, 52])}, [Action("OLD", day(3), "cash-out", amount=60.0)]
    )
    assert found.is_over.tolist() == [True]
    late = settle(found, "ends above", 59.0, due=200)
    assert late.result[0] == "hit"
    assert late.value[0] == 60.0
    assert settle(found, "touches", 60.0, due=45).result[0] == "hit"
    assert settle(found, "ends above", 61.0, sessions=30, due=0).result[0] == "miss"
    # before the ending the file's prices count
    assert settle(found, "ends above", 52.5, due=2).result[0] == "miss"


def test_prices_from_the_ending_on_are_left_aside():
    found = market(
        {"OLD": history([50, 51, 52, 99, 99])},
        [Action("OLD", day(3), "cash-out", amount=60.0)],
    )
    assert settle(found, "ends above", 70.0, due=4).result[0] == "miss"


def test_an_ending_in_the_future_changes_nothing():
    found = market(
        {"OLD": history([50, 51, 52])},
        [Action("OLD", day(3), "cash-out", amount=60.0)],
        as_of=2,
    )
    assert found.is_over.tolist() == [False]
    assert settle(found, "ends above", 59.0, due=20).result[0] == "open"


def test_a_winding_up_at_nothing_is_worth_nothing():
    found = market(
        {"OLD": history([50, 51, 52])}, [Action("OLD", day(3), "wind-up", amount=0.0)]
    )
    ended = settle(found, "ends below", 1.0, due=30)
    assert (ended.result[0], ended.value[0]) == ("hit", 0.0)


@pytest.mark.parametrize(("level", "result"), [(57.9, "hit"), (58.1, "miss")])
def test_an_exchange_follows_the_new_share_with_cash(level, result):
    """2 new shares at 26.5 and 5 in cash: 2 x 26.5 + 5 = 58."""
    found = market(
        {"OLD": history([50, 51, 52]), "NEW": history([20, 21, 22, 24, 25, 26.5])},
        [Action("OLD", day(3), "merger", ratio=2.0, amount=5.0, into="NEW")],
    )
    assert settle(found, "ends above", level, due=5).result[0] == result
    # what it became trades on: nothing is certain before the deadline
    assert settle(found, "ends above", level, due=50).result[0] == "open"


def test_a_split_of_the_new_share_after_the_exchange_changes_nothing():
    """NEW splits 2 for 1 after the exchange: 13.25 then is 26.5 before."""
    found = market(
        {"OLD": history([50, 51, 52]), "NEW": history([20, 21, 22, 24, 25, 13.25])},
        [
            Action("OLD", day(3), "merger", ratio=2.0, amount=5.0, into="NEW"),
            Action("NEW", day(5), "split", ratio=2.0),
        ],
    )
    assert settle(found, "ends above", 57.9, due=5).result[0] == "hit"
    assert settle(found, "ends above", 58.1, due=5).result[0] == "miss"


def test_a_split_of_the_old_share_keeps_the_amount_in_its_own_units():
    """Split 2 for 1 on day 1, then 30 for each new share: 60 for each old one."""
    found = market(
        {"OLD": history([50, 25.5, 26])},
        [
            Action("OLD", day(1), "split", ratio=2.0),
            Action("OLD", day(3), "cash-out", amount=30.0),
        ],
    )
    assert settle(found, "ends above", 59.0, due=20).result[0] == "hit"
    assert settle(found, "ends above", 61.0, due=20).result[0] == "miss"


def test_a_chain_of_endings_is_followed_and_a_circle_is_not():
    found = market(
        {"A": history([50, 51]), "B": history([20, 21, 22, 23])},
        [
            Action("A", day(2), "merger", ratio=2.0, into="B"),
            Action("B", day(4), "cash-out", amount=40.0),
        ],
    )
    ended = settle(found, "ends at least", 80.0, due=40)
    assert (ended.result[0], ended.value[0]) == ("hit", 80.0)
    circle = market(
        {"A": history([50, 51]), "B": history([20, 21])},
        [
            Action("A", day(2), "merger", ratio=2.0, into="B"),
            Action("B", day(2), "merger", ratio=0.5, into="A"),
        ],
    )
    assert len(circle.bars.symbols) == 2
