"""Claims and phrases of every registered kind, and kinds that exist for one test only."""

from __future__ import annotations

import re
from contextlib import contextmanager

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
        if slot.startswith("instrument"):
            others += draw(names)[: 1 if slot == "instrument" else None]
        elif slot == "level":
            quantities.append(Quantity(draw(st.floats(**finite))))
        elif slot == "percent":
            high = 99.999 if kind.states_probability else 1e6
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
