"""Sessions missing from a file although the market was open."""

from datetime import date

import numpy as np
import pytest

from foresaid.market.histories import build_market
from foresaid.model.codebook import default_codebook
from foresaid.model.price_history import PriceHistory
from foresaid.model.records import Instrument
from foresaid.settle.outcomes import CallClaims, settle_calls
from foresaid.settle.windows import LACKS, REASONS, CallTimes

BOOK = default_codebook()
MISSING = REASONS[LACKS]
FIRST = int(np.datetime64("2024-03-04").astype(np.int64))  # a Monday


def history(days):
    close = 100.0 + np.array(days, dtype=float)
    return PriceHistory(FIRST + np.array(days), close, close, close)


def settle(own, other, *, codes=("XONE", "XONE"), said=0, due=4, sessions=0):
    instruments = [
        Instrument("OWN", market=codes[0]),
        Instrument("OTHER", market=codes[1]),
    ]
    histories = {"OWN": history(own), "OTHER": history(other)}
    as_of = date(2024, 4, 30)
    market = build_market(instruments, histories, [], {}, BOOK, as_of=as_of)
    zero = np.zeros(1, dtype=np.int64)
    times = CallTimes(
        zero, zero + FIRST + said, np.array([-1.0]), zero + FIRST + due, zero + sessions
    )
    claims = CallClaims(
        np.array(["ends higher"], dtype=object),
        np.zeros((1, 3)),
        np.zeros((1, 3), dtype=np.int64),
        np.array([""], dtype=object),
    )
    found = settle_calls(times, claims, market, np.zeros(1, bool), BOOK.settlement)
    return found.result[0], found.reason[0]


WEEK = [0, 1, 2, 3, 4, 7, 8]


@pytest.mark.parametrize(
    ("own", "other", "said", "expected"),
    [
        (WEEK, WEEK, 0, ("hit", "")),
        # the deadline's row is missing, its neighbour traded
        ([0, 1, 2, 3, 7, 8], WEEK, 0, ("open", MISSING)),
        # neither traded: a holiday, rolled back
        ([0, 1, 2, 3, 7, 8], [0, 1, 2, 3, 7, 8], 0, ("hit", "")),
        # the reference's row is missing
        ([1, 2, 3, 4, 7, 8], WEEK, 0, ("open", MISSING)),
        # a hole in the middle of the window is not one the call needs
        ([0, 1, 3, 4, 7, 8], WEEK, 0, ("hit", "")),
    ],
)
def test_a_hole_where_the_market_traded_leaves_the_call_open(own, other, said, expected):
    assert settle(own, other, said=said) == expected


def test_other_markets_and_unknown_ones_do_not_count():
    hole = [0, 1, 2, 3, 7, 8]
    assert settle(hole, WEEK, codes=("XONE", "XTWO"))[0] == "hit"
    assert settle(hole, WEEK, codes=("", ""))[0] == "hit"


def test_a_horizon_in_sessions_needs_no_day_of_its_own():
    assert settle([0, 1, 2, 3, 7, 8], WEEK, sessions=4, due=0)[0] == "hit"
