"""Base rates against plain loops, and the property that no window reaches publication."""

import re

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from foresaid.chance.base_rate import Starts, base_rates
from foresaid.claims.registry import KINDS
from foresaid.settle.outcomes import settle_calls
from support.worlds import BOOK, OneCall, SmallWorld, arrays_of, calls_in, market_of, worlds


def starts_of(found, times, bars):
    windows = found.resolved.windows
    span = np.where(
        times.sessions > 0, times.sessions, times.deadline_day - bars.day[windows.reference]
    )
    return Starts(
        times.instrument,
        windows.reference,
        np.maximum(span, 1),
        times.sessions > 0,
        windows.first - windows.reference,
        windows.additive,
        found.marks,
    )


def counts(world, call):
    """Return (windows, hits, reference) of one call by the program, None where it has none."""
    market = market_of(world)
    times, claims = arrays_of([call])
    found = settle_calls(times, claims, market, np.zeros(1, dtype=bool), BOOK.settlement)
    if not found.resolved.matured[0] or found.result[0] == "void":
        return None
    kind = KINDS[claims.kind[0]]
    starts = starts_of(found, times, market.bars)
    rate = base_rates(kind.kernel, len(kind.marks), market.bars, starts, 1e-9)
    return int(rate.windows[0]), int(rate.hits[0]), int(starts.reference[0])


def slow_counts(world, call, reference):
    """Settle the same words from each earlier start in a history cut off before publication.

    Levels are carried as ratios to the reference price: the words are said anew with the
    level moved along.
    """
    span = call.deadline_day - int(world.day[reference]) if not call.sessions else None
    market = market_of(world)
    times, claims = arrays_of([call])
    own = settle_calls(times, claims, market, np.zeros(1, dtype=bool), BOOK.settlement)
    lag = int(own.resolved.windows.first[0]) - reference
    known = SmallWorld(
        *(x[:reference] for x in (world.day, world.high, world.low, world.close))
    )
    windows = hits = 0
    for t in range(reference):
        day = int(world.day[t])
        due = day + span if span is not None else 0
        if span is not None and due > int(known.day[-1]):
            continue
        # said before the opening of its reference session, or during it
        minute = 480.0 if lag == 0 else 720.0
        carried = carry(call.phrase, world.close[t] / world.close[reference])
        other = OneCall(carried, day, minute, due, call.sessions)
        times, claims = arrays_of([other])
        found = settle_calls(
            times, claims, market_of(known), np.zeros(1, dtype=bool), BOOK.settlement
        )
        if found.resolved.matured[0] and found.result[0] != "void":
            windows += 1
            hits += found.result[0] == "hit"
    return windows, hits


def carry(phrase, ratio):
    """Move the levels and point sizes of a phrase by a ratio, at full precision."""

    def moved(number):
        return np.format_float_positional(float(number.group()) * ratio, trim="-")

    return re.sub(r"\d+(?![\d%])", moved, phrase)


@settings(max_examples=150, deadline=None)
@given(st.data())
def test_counts_are_those_of_settling_at_every_earlier_start(data):
    world = data.draw(worlds(max_size=30))
    call = data.draw(calls_in(world).filter(lambda c: "touches" not in c.phrase))
    found = counts(world, call)
    if found is None:
        return
    windows, hits, reference = found
    assert (windows, hits) == slow_counts(world, call, reference)


@settings(max_examples=200, deadline=None)
@given(st.data())
def test_prices_from_the_reference_on_change_no_base_rate(data):
    world = data.draw(worlds())
    call = data.draw(calls_in(world, levels=False).filter(lambda c: "pt" not in c.phrase))
    found = counts(world, call)
    if found is None:
        return
    reference = found[2]
    n = len(world.day)
    factor = np.array(data.draw(st.lists(st.floats(0.2, 5.0), min_size=n, max_size=n)))
    factor[:reference] = 1.0
    other = SmallWorld(world.day, world.high * factor, world.low * factor, world.close * factor)
    assert counts(other, call)[:2] == found[:2]
