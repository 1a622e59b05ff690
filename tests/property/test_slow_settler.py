"""An independent slow settler, written from docs/settlement.md with plain loops."""

import math
import re
import statistics
from functools import partial
from itertools import pairwise

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
    if head in SPECIAL:
        extra = {"size": moves[0] / price} if head == "drawdown" else {}
        return SPECIAL[head](
            world=world,
            reference=reference,
            window=window,
            last=last,
            price=price,
            amounts=amounts,
            **extra,
        )
    if head == "targets":
        if near(amounts[0], price):
            return "void", None
        head = "ends at least" if amounts[0] > price else "ends at most"
    if head == "range to at":
        head = "ends between and"
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


def drawdown(*, world, reference, window, last, amounts, size=None, **_):
    """A close at or under the running peak less the size, newly so within the window."""
    begin = max(0, reference - 252)
    keep = 1 - (size if size is not None else amounts[0] / 100)

    def under(day):
        peak = max(world.close[begin : day + 1])
        return below(world.close[day], peak * keep, strict=False)

    for i in window:
        was = under(i - 1) if i - 1 >= begin else False
        if under(i) and not was:
            return "hit", i
    return ("open", None) if last is None else ("miss", last)


def old_extreme(*, world, reference, window, last, side, **_):
    begin = max(0, reference - 252)
    before = world.close[begin:reference]
    if not len(before):
        return "void", None
    level = min(before) if side > 0 else max(before)
    for i in window:
        if (below if side > 0 else above)(world.close[i], level, strict=True):
            return "miss", i
    return ("open", None) if last is None else ("hit", last)


def volatility(*, world, reference, window, last, amounts, side, **_):
    if last is None:
        end = window[-1] if len(window) else None
        return ("void", None) if end is not None and end - reference < 2 else ("open", None)
    if last - reference < 2:
        return "void", None
    closes = [float(x) for x in world.close[reference : last + 1]]
    moves = [math.log(b / a) for a, b in pairwise(closes)]
    mark = amounts[0] / 100
    found = statistics.stdev(moves) * math.sqrt(252)
    good = above(found, mark, strict=True) if side > 0 else below(found, mark, strict=True)
    return ("hit" if good else "miss"), last


def race(*, world, window, last, price, amounts, **_):
    if any(near(level, price) for level in amounts):
        return "void", None
    for i in window:
        touched = [
            above(world.high[i], level, strict=False)
            if level > price
            else below(world.low[i], level, strict=False)
            for level in amounts
        ]
        if all(touched):
            return "void", None
        if any(touched):
            return ("hit" if touched[0] else "miss"), i
    return ("open", None) if last is None else ("miss", last)


SPECIAL = {
    "drawdown": drawdown,
    "low holds": partial(old_extreme, side=1),
    "high holds": partial(old_extreme, side=-1),
    "volatility above": partial(volatility, side=1),
    "volatility below": partial(volatility, side=-1),
    "touches before": race,
}


@settings(max_examples=3000, deadline=None)
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
