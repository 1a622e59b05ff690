"""Properties that settlement must have whatever the prices and calls are."""

import dataclasses
import re

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from foresaid.settle.outcomes import settle_calls
from support.worlds import BOOK, SmallWorld, arrays_of, calls_in, market_of, worlds

FIELDS = ("result", "reason", "direction")


def settle(world, calls, *, as_of_day=None):
    market = market_of(world, as_of_day=as_of_day)
    times, claims = arrays_of(calls)
    inverse = np.zeros(len(calls), dtype=bool)
    return settle_calls(times, claims, market, inverse, BOOK.settlement), market


def same(a, b, row=0):
    assert a.result[row] == b.result[row]
    assert a.reason[row] == b.reason[row]
    assert a.direction[row] == b.direction[row]
    assert a.decided[row] == b.decided[row]
    for name, values in a.alternates.items():
        assert values[row] == b.alternates[name][row], name


@settings(max_examples=300, deadline=None)
@given(st.data())
def test_nothing_after_the_last_session_matters(data):
    world = data.draw(worlds())
    call = data.draw(calls_in(world))
    found, _ = settle(world, [call])
    if not found.resolved.matured[0]:
        return
    last = int(found.resolved.windows.last[0])
    n = len(world.day)
    factor = np.array(
        data.draw(st.lists(st.floats(0.2, 5.0), min_size=n, max_size=n)), dtype=float
    )
    factor[: last + 1] = 1.0
    other = SmallWorld(world.day, world.high * factor, world.low * factor, world.close * factor)
    changed, _ = settle(other, [call])
    same(found, changed)
    assert found.value[0] == changed.value[0] or np.isnan(found.value[0])


@settings(max_examples=200, deadline=None)
@given(st.data())
def test_an_earlier_day_of_settlement_never_contradicts_a_later_one(data):
    """What was settled stays settled as the same; only open calls change."""
    world = data.draw(worlds())
    call = data.draw(calls_in(world))
    day = data.draw(st.integers(int(world.day[0]), int(world.day[-1])))
    early, _ = settle(world, [call], as_of_day=day)
    late, _ = settle(world, [call])
    if early.result[0] in ("hit", "miss"):
        assert early.result[0] == late.result[0]
        assert early.decided[0] == late.decided[0]


@settings(max_examples=200, deadline=None)
@given(st.data(), st.sampled_from([0.5, 4.0, 1024.0]))
def test_scaling_all_prices_changes_nothing_where_no_level_is_named(data, scale):
    world = data.draw(worlds())
    call = data.draw(calls_in(world, levels=False).filter(lambda c: "pt" not in c.phrase))
    scaled = SmallWorld(world.day, world.high * scale, world.low * scale, world.close * scale)
    same(settle(world, [call])[0], settle(scaled, [call])[0])


@settings(max_examples=200, deadline=None)
@given(st.data(), st.sampled_from([2, 8, 64]))
def test_scaling_prices_and_levels_together_changes_nothing(data, scale):
    world = data.draw(worlds())
    call = data.draw(calls_in(world))
    # every number that is no percentage is a price
    phrase = re.sub(
        r"\d+(?![\d%])", lambda number: str(int(number.group()) * scale), call.phrase
    )
    scaled = SmallWorld(world.day, world.high * scale, world.low * scale, world.close * scale)
    other = dataclasses.replace(call, phrase=phrase)
    same(settle(world, [call])[0], settle(scaled, [other])[0])


@settings(max_examples=150, deadline=None)
@given(st.data())
def test_order_and_company_change_nothing(data):
    """A call alone has the outcome it has among others, in any order."""
    world = data.draw(worlds())
    calls = [data.draw(calls_in(world)) for _ in range(6)]
    together, _ = settle(world, calls[::-1])
    for row, call in enumerate(calls):
        alone, _ = settle(world, [call])
        back = len(calls) - 1 - row
        assert alone.result[0] == together.result[back]
        assert alone.decided[0] == together.decided[back]


@settings(max_examples=150, deadline=None)
@given(st.data())
def test_a_split_changes_no_outcome_of_a_call_made_before_it(data):
    """Raw prices with a split settle as the unsplit history does."""
    world = data.draw(worlds(splits=True))
    call = data.draw(calls_in(world))
    plain_factor = np.ones(len(world.day))
    for when, ratio in world.splits:
        plain_factor *= np.where(world.day >= when, ratio, 1.0)
    unsplit = SmallWorld(
        world.day,
        world.high * plain_factor,
        world.low * plain_factor,
        world.close * plain_factor,
    )
    if any(when <= call.said_day for when, _ in world.splits):
        return
    same(settle(world, [call])[0], settle(unsplit, [call])[0])
