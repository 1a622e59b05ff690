"""Claims and phrases of every registered kind, and kinds that exist for one test only."""

from __future__ import annotations

import re
from contextlib import contextmanager
from itertools import pairwise

from hypothesis import strategies as st

from foresaid.claims.claim import Claim, Quantity
from foresaid.claims.phrases import parse_claim
from foresaid.claims.registry import KINDS, register

UNITS = ("%", "pp", "bp", "pt")


def loses(kind):
    """Whether a size of the kind is taken off the price, so that it stays below 100%."""
    return any(mark.role.startswith("loss") for mark in kind.marks)


@st.composite
def claims(draw, kinds=None):
    """A legal claim of any registered kind, with any numbers it allows."""
    kind = KINDS[draw(st.sampled_from(sorted(kinds or KINDS)))]
    finite = {"allow_nan": False, "allow_infinity": False}
    quantities, others = [], []
    names = st.lists(st.sampled_from(["ABC", "DE.F", "G-7"]), min_size=1, unique=True)
    for slot in kind.slots:
        if slot in ("quantiles", "bins"):
            quantities += draw(distributions(bins=slot == "bins"))
        elif slot.startswith("instrument"):
            others += draw(names)[: 1 if slot == "instrument" else None]
        elif slot == "level":
            quantities.append(Quantity(draw(st.floats(**finite))))
        elif slot == "percent":
            high = 99.999 if kind.states else 1e6
            quantities.append(Quantity(draw(st.floats(1e-9, high)), "%"))
        else:
            unit = draw(st.sampled_from(UNITS))
            high = 99.999 if unit == "%" and loses(kind) else 1e12
            quantities.append(Quantity(draw(st.floats(1e-9, high)), unit))
    if kind.ascending:
        low, high, *rest = quantities
        if low.value == high.value:
            low, high = Quantity(-1.0), Quantity(1.0)
        quantities = [*sorted((low, high), key=lambda one: one.value), *rest]
    return Claim(kind.name, tuple(quantities), others=tuple(others))


@st.composite
def distributions(draw, *, bins):
    """The numbers of two to nine quantiles or bins, a percentage and a level in turn."""
    n = draw(st.integers(2, 9))
    steps = draw(st.lists(st.integers(1, 400), min_size=n, max_size=n))
    begin = draw(st.integers(-50, 5000))
    levels = [float(begin + sum(steps[: i + 1])) for i in range(n)]
    if bins:
        cuts = sorted(draw(st.lists(st.integers(0, 99), min_size=n - 1, max_size=n - 1)))
        ends = [0, *cuts, 100]
        shares = [float(b - a) for a, b in pairwise(ends)]
        shares = shares if max(shares) < 100.0 else [50.0, *[0.0] * (n - 2), 50.0]
    else:
        shares = sorted(draw(st.sets(st.integers(1, 99), min_size=n, max_size=n)))
    numbers = []
    for at, share in enumerate(shares):
        numbers.append(Quantity(float(share), "%"))
        if at < n - bins:
            numbers.append(Quantity(levels[at]))
    return numbers


def phrases_in(text):
    """Return what stands in backticks."""
    return re.findall(r"`([^`]*)`", text)


@contextmanager
def registered(kind):
    """Keep a kind in the registry for the length of a block."""
    register(kind)
    parse_claim.cache_clear()
    try:
        yield kind
    finally:
        del KINDS[kind.name]
        parse_claim.cache_clear()
