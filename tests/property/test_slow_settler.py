"""An independent slow settler, written from docs/settlement.md with plain loops."""

import re

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from foresaid.settle.outcomes import settle_calls

from support.worlds import BOOK, arrays_of, calls_in, market_of, worlds

OPENS, CLOSES = 540, 1050
TOLERANCE = 1e-9


def near(a, b):
    return abs(a - b) <= TOLERANCE * max(abs(a), abs(b))


def above(a, b, *, strict):
    return (a > b and not near(a, b)) if strict else (a > b or near(a, b))


def below(a, b, *, strict):
    return above(b, a, strict=strict)


def slow_settle(world, call):
    """Return result and the index of the deciding session, None where there is none."""
    days = world.day.tolist()
    after_close = call.said_minute > CLOSES
    reference = None
    for i, day in enumerate(days):
        if day > call.said_day or (day == call.said_day and not after_close):
            reference = i
            break
    if reference is None:
        due = 0 < call.deadline_day <= days[-1]
        return ("void", None) if due and not call.sessions else ("open", None)
    first = None
    for i, day in enumerate(days):
        opens_after = day > call.said_day or (
            day == call.said_day and 0 <= call.said_minute < OPENS
        )
        if opens_after:
            first = i
            break
    if call.sessions:
        last, matured = reference + call.sessions, reference + call.sessions < len(days)
    else:
        matured = call.deadline_day <= days[-1]
        last = max((i for i, day in enumerate(days) if day <= call.deadline_day), default=-1)
    if matured and last <= reference:
        return "void", None
    if matured and not call.sessions and call.deadline_day - days[last] > 10:
        return "open", None
    window = range(first if first is not None else len(days), min(last, len(days) - 1) + 1)
    return judge(world, call, reference, window, last if matured else None)


def judge(world, call, reference, window, last):
    price = world.close[reference]
    words = call.phrase.split()
    numbers = [re.fullmatch(r"(\d+)(%|pt)?", w) for w in words if w[0].isdigit()]
    amounts = [float(m[1]) for m in numbers]
    moves = [
        price * float(m[1]) / 100 if m[2] == "%" else float(m[1]) if m[2] else None
        for m in numbers
    ]
    head = " ".join(w for w in words if not w[0].isdigit())
    close, high, low = world.close, world.high, world.low
    if head.startswith(("ends", "strengthens", "weakens")):
        if last is None:
            return "open", None
        at = close[last]
        good = {
            "ends higher": lambda: above(at, price, strict=True),
            "strengthens": lambda: above(at, price, strict=True),
            "ends lower": lambda: below(at, price, strict=True),
            "weakens": lambda: below(at, price, strict=True),
            "ends higher by": lambda: above(at, price + moves[0], strict=False),
            "strengthens by": lambda: above(at, price + moves[0], strict=False),
            "ends lower by": lambda: below(at, price - moves[0], strict=False),
            "weakens by": lambda: below(at, price - moves[0], strict=False),
            "ends within": lambda: (
                above(at, price - moves[0], strict=False)
                and below(at, price + moves[0], strict=False)
            ),
            "ends above": lambda: above(at, amounts[0], strict=True),
            "ends below": lambda: below(at, amounts[0], strict=True),
            "ends at least": lambda: above(at, amounts[0], strict=False),
            "ends at most": lambda: below(at, amounts[0], strict=False),
            "ends between and": lambda: (
                above(at, amounts[0], strict=False) and below(at, amounts[1], strict=False)
            ),
        }[head]()
        return ("hit" if good else "miss"), last
    if head == "touches" and near(amounts[0], price):
        return "void", None
    for i in window:
        if head.startswith("stays"):
            bad = {
                "stays above": lambda i=i: below(low[i], amounts[0], strict=True),
                "stays below": lambda i=i: above(high[i], amounts[0], strict=True),
                "stays between and": lambda i=i: (
                    below(low[i], amounts[0], strict=True)
                    or above(high[i], amounts[1], strict=True)
                ),
            }[head]()
            if bad:
                return "miss", i
            continue
        reached = {
            "closes above": lambda i=i: above(close[i], amounts[0], strict=True),
            "closes below": lambda i=i: below(close[i], amounts[0], strict=True),
            "trades above": lambda i=i: above(high[i], amounts[0], strict=True),
            "trades below": lambda i=i: below(low[i], amounts[0], strict=True),
            "touches": lambda i=i: (
                above(high[i], amounts[0], strict=False)
                if amounts[0] > price
                else below(low[i], amounts[0], strict=False)
            ),
            "rises": lambda i=i: above(close[i], price + moves[0], strict=False),
            "falls": lambda i=i: below(close[i], price - moves[0], strict=False),
        }[head]()
        if reached:
            return "hit", i
    if last is None:
        return "open", None
    return ("hit" if head.startswith("stays") else "miss"), last


@settings(max_examples=1500, deadline=None)
@given(st.data())
def test_slow_settler_agrees(data):
    world = data.draw(worlds())
    call = data.draw(calls_in(world))
    times, claims = arrays_of([call])
    market = market_of(world)
    found = settle_calls(times, claims, market, np.zeros(1, dtype=bool), BOOK.settlement)
    result, decided = slow_settle(world, call)
    assert found.result[0] == result, (call, found.reason[0])
    assert (None if found.decided[0] < 0 else int(found.decided[0])) == decided
