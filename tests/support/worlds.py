"""Random small markets and calls for property tests, and an independent slow settler.

The slow settler is written from docs/settlement.md with plain loops and shares no code with
src/ but the records it is handed.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from hypothesis import strategies as st

from foresaid.claims.binding import quantity_arrays
from foresaid.claims.phrases import parse_claim
from foresaid.claims.registry import KINDS
from foresaid.market.histories import build_market
from foresaid.model.codebook import default_codebook
from foresaid.model.price_history import PriceHistory
from foresaid.model.records import Action, Instrument
from foresaid.settle.outcomes import CallClaims
from foresaid.settle.windows import CallTimes

BOOK = default_codebook()
DAY0 = 16_000  # 2013-10-22


@dataclass(frozen=True)
class OneCall:
    """A call on the only instrument of a small world."""

    phrase: str
    said_day: int
    said_minute: float
    deadline_day: int
    sessions: int


@dataclass(frozen=True)
class SmallWorld:
    """Prices of one share with hours 09:00 to 17:30, and its splits."""

    day: np.ndarray
    high: np.ndarray
    low: np.ndarray
    close: np.ndarray
    splits: tuple[tuple[int, float], ...] = ()


def instrument():
    return Instrument("ABC", kind="share", zone="Europe/Vienna", opens="09:00", closes="17:30")


def market_of(world, *, as_of_day=None):
    """Build the market of a small world."""
    actions = [
        Action("ABC", np.datetime64(int(day), "D").astype(object), "split", ratio=ratio)
        for day, ratio in world.splits
    ]
    as_of = np.datetime64(int(as_of_day if as_of_day is not None else world.day[-1]), "D")
    history = PriceHistory(world.day, world.high, world.low, world.close)
    return build_market(
        [instrument()], {"ABC": history}, actions, {}, BOOK, as_of=as_of.astype(object)
    )


def arrays_of(calls):
    """Return the arrays that settlement reads."""
    n = len(calls)
    parsed = [parse_claim(call.phrase) for call in calls]
    values, units = quantity_arrays(parsed)
    times = CallTimes(
        np.zeros(n, dtype=np.int64),
        np.array([call.said_day for call in calls], dtype=np.int64),
        np.array([call.said_minute for call in calls], dtype=float),
        np.array([call.deadline_day for call in calls], dtype=np.int64),
        np.array([call.sessions for call in calls], dtype=np.int64),
    )
    kinds = np.array([claim.kind for claim in parsed], dtype=object)
    return times, CallClaims(kinds, values, units, np.full(n, "", dtype=object))


@st.composite
def worlds(draw, *, min_size=8, max_size=60, splits=False):
    """A share's history with gaps, coarse prices (so that ties occur) and maybe splits."""
    n = draw(st.integers(min_size, max_size))
    gaps = draw(st.lists(st.sampled_from([1, 1, 1, 1, 2, 3, 4]), min_size=n, max_size=n))
    day = DAY0 + np.cumsum(gaps)
    steps = draw(st.lists(st.integers(-3, 3), min_size=n, max_size=n))
    close = 100.0 + np.cumsum(steps)
    close = np.maximum(close, 20.0)
    spread = np.array(draw(st.lists(st.integers(0, 3), min_size=n, max_size=n)), dtype=float)
    cuts = ()
    if splits:
        at = draw(st.lists(st.integers(1, n - 1), max_size=2, unique=True))
        cuts = tuple((int(day[i]), draw(st.sampled_from([2.0, 3.0, 0.5]))) for i in sorted(at))
    high, low = close + spread, close - spread
    for when, ratio in cuts:
        after = day >= when
        high, low, close = (np.where(after, x / ratio, x) for x in (high, low, close))
    return SmallWorld(day.astype(np.int64), high, low, close, cuts)


@st.composite
def distribution_texts(draw, lowest, *, bins):
    """Quantiles or bins whose levels begin near the lowest price of a world."""
    n = draw(st.integers(2, 4))
    levels = sorted(draw(st.sets(st.integers(lowest, lowest + 30), min_size=n, max_size=n)))
    if not bins:
        shares = sorted(draw(st.sets(st.integers(1, 99), min_size=n, max_size=n)))
        return ", ".join(f"{p}%={x}" for p, x in zip(shares, levels, strict=True))
    levels = levels[1:]
    names = [f"<{levels[0]}", *(f"{a} to {b}" for a, b in pairwise(levels)), f">{levels[-1]}"]
    cuts = sorted(draw(st.sets(st.integers(1, 99), min_size=n - 1, max_size=n - 1)))
    shares = [b - a for a, b in pairwise([0, *cuts, 100])]
    return ", ".join(f"{name}: {p}%" for name, p in zip(names, shares, strict=True))


@st.composite
def calls_in(draw, world, *, levels=True):
    """A call said somewhere in the history, of any registered kind."""
    alone = [k for k in KINDS.values() if not k.kernel.needs_legs]
    kinds = [k for k in alone if levels or not {"level", "quantiles", "bins"} & {*k.slots}]
    kind = draw(st.sampled_from(kinds))
    low = float(np.min(world.low))
    slots = []
    for slot in kind.slots:
        if slot in ("quantiles", "bins"):
            slots.append(draw(distribution_texts(max(1, int(low) - 2), bins=slot == "bins")))
        elif slot == "percent":
            slots.append(f"{draw(st.integers(1, 99))}%")
        elif slot == "size":
            slots.append(f"{draw(st.integers(1, 12))}{draw(st.sampled_from(['%', 'pt']))}")
        else:
            slots.append(draw(st.integers(max(1, int(low) - 2), int(low) + 30)))
    if kind.ascending and slots[0] >= slots[1]:
        slots[1] = slots[0] + 1
    texts = iter(str(one) for one in slots)
    phrase = " ".join(next(texts) if "{" in word else word for word in kind.form.split())
    first, last = int(world.day[0]), int(world.day[-1])
    said = draw(st.integers(first - 1, last + 1))
    minute = draw(st.sampled_from([-1.0, 480.0, 720.0, 1050.0, 1051.0, 1200.0]))
    if draw(st.booleans()):
        return OneCall(phrase, said, minute, 0, draw(st.integers(1, 15)))
    return OneCall(phrase, said, minute, said + draw(st.integers(0, 30)), 0)
