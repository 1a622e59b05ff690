"""Claims that compare instruments, against plain loops over two histories."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from foresaid.claims.registry import KINDS
from foresaid.market.histories import build_market
from foresaid.model.codebook import default_codebook
from foresaid.model.price_history import PriceHistory
from foresaid.model.records import Action, Instrument
from foresaid.settle.outcomes import CallClaims, settle_calls
from foresaid.settle.windows import CallTimes
from support.worlds import SmallWorld, worlds

BOOK = default_codebook()


def history(world):
    return PriceHistory(world.day, world.high, world.low, world.close)


def settle_pair(own, others, *, kind, size, said, due, actions=()):
    symbols = ["OWN", *(f"L{i}" for i in range(len(others)))]
    histories = dict(zip(symbols, map(history, [own, *others]), strict=True))
    last = max(int(w.day[-1]) for w in [own, *others])
    market = build_market(
        [Instrument(symbol, kind="share") for symbol in symbols],
        histories,
        list(actions),
        {},
        BOOK,
        as_of=np.datetime64(last, "D").astype(object),
    )
    one = np.zeros(1, dtype=np.int64)
    legs = np.arange(1, len(symbols), dtype=np.int64)[None, :]
    times = CallTimes(one, one + said, np.array([-1.0]), one + due, one, legs)
    values, units = np.array([[size, 0.0, 0.0]]), np.array([[1, 0, 0]])
    claims = CallClaims(np.array([kind], dtype=object), values, units, np.array([""], object))
    return settle_calls(times, claims, market, np.zeros(1, bool), BOOK.settlement), market


def close_by(world, day):
    known = world.close[world.day <= day]
    return None if not len(known) else float(known[-1])


def slow(own, others, *, kind, size, said, due):
    """Return what a reader with the two price lists would say, None for anything unusual."""
    reference = own.day[own.day >= said]
    last = own.day[own.day <= due]
    if not len(reference) or not len(last) or last[-1] <= reference[0]:
        return None
    if due > own.day[-1] or due - last[-1] > 10:
        return None
    begin, end = int(reference[0]), int(last[-1])
    returns = []
    for world in [own, *others]:
        start = close_by(world, begin)
        if start is None or world.day[-1] < end:
            return None
        returns.append(close_by(world, end) / start - 1)
    lead = returns[0] - max(returns[1:])
    if kind == "beats by":
        return lead > size / 100 - 1e-9
    if kind == "lags by":
        return -lead > size / 100 - 1e-9
    return lead > 1e-9 if kind in ("beats", "tops") else -lead > 1e-9


@settings(max_examples=400, deadline=None)
@given(st.data())
def test_returns_are_compared_over_the_same_days(data):
    own = data.draw(worlds(max_size=25))
    kind = data.draw(st.sampled_from(["beats", "beats by", "lags", "lags by", "tops"]))
    n = data.draw(st.integers(1, 3)) if kind == "tops" else 1
    others = [data.draw(worlds(max_size=25)) for _ in range(n)]
    said = data.draw(st.integers(int(own.day[0]), int(own.day[-1])))
    due = said + data.draw(st.integers(1, 30))
    size = data.draw(st.integers(1, 8))
    case = {"kind": kind, "size": size, "said": said, "due": due}
    expected = slow(own, others, **case)
    found, _ = settle_pair(own, others, **case)
    if expected is not None:
        assert found.result[0] == ("hit" if expected else "miss")
        assert found.alternates["price_return"][0] == expected


def flat(close):
    n = len(close)
    close = np.array(close, dtype=float)
    return SmallWorld(np.arange(16_000, 16_000 + n), close, close, close)


def dividend(symbol, day, amount):
    when = np.datetime64(16_000 + day, "D").astype(object)
    return Action(symbol, when, "dividend", amount=amount)


@pytest.mark.parametrize(
    ("paid", "result"),
    [
        # own 100 -> 103 (+3 %), other 100 -> 102 with 2 paid at 101: 102/100 x (1 + 2/101) - 1
        # = +4.02 %: by price the call is right, with dividends it is wrong
        ([dividend("L0", 1, 2.0), dividend("OWN", 0, 0.01)], "miss"),
        # dividends known for one leg only: price returns for both
        ([dividend("L0", 1, 2.0)], "hit"),
        ([], "hit"),
    ],
)
def test_total_returns_count_only_where_both_legs_have_them(paid, result):
    own, other = flat([100, 101, 103]), flat([100, 101, 102])
    case = {"kind": "beats", "size": 0, "said": 16_000, "due": 16_002}
    found, market = settle_pair(own, [other], **case, actions=paid)
    assert found.result[0] == result
    assert found.alternates["price_return"][0] == 1
    kernel = KINDS["beats"].kernel
    uses = kernel.uses_total(market.bars, found.resolved.windows)
    assert bool(uses[0]) == (len(paid) == 2)


def test_a_compared_instrument_that_stops_early_leaves_the_call_open():
    own, other = flat([100, 101, 103, 104]), flat([100, 101])
    found, _ = settle_pair(own, [other], kind="beats", size=0, said=16_000, due=16_003)
    assert found.result[0] == "open"
    assert found.reason[0] == "no price of a compared instrument at the deadline"
