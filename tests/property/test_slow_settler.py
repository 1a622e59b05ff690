"""The product against an independent slow settler, on random calls of every kind.

`support.slow_settler` is written from docs/settlement.md and docs/claims.md with plain loops.
Both settle the same random worlds: several instruments with actions, halts, stale rows, gaps and
prices in query, venues in several zones, other currencies, conditions. The product goes through
a real ledger: files are imported, settled and listed. Where the two differ, the smallest world
found is printed.
"""

from collections import Counter

import pytest
from hypothesis import HealthCheck, given, note, settings
from hypothesis import strategies as st

from foresaid.claims.phrases import parse_claim
from foresaid.claims.registry import KINDS
from foresaid.model.codebook import default_codebook
from support import slow_settler
from support.random_worlds import (
    FEW_GAPS,
    GAPS,
    Bench,
    Drawn,
    Seeded,
    described,
    differences,
    reduced,
    world,
)

N_CALLS = 20_000
CALLS_OF_A_WORLD = 250
# chances are not compared here, so few walks will do
BOOK = default_codebook().source.replace("walks = 2000", "walks = 100")
REASONS = {
    value
    for name, value in vars(slow_settler).items()
    if name.isupper() and isinstance(value, str)
}


@pytest.fixture(scope="module")
def bench(tmp_path_factory):
    made = Bench(tmp_path_factory.mktemp("worlds"), BOOK)
    yield made
    made.close()


def _smallest(bench, one, ref):
    """Return the smallest world found with the difference of one call, in words."""

    def differs(candidate):
        return ref in differences(candidate, bench.listed(candidate))

    small = reduced(one, ref, differs)
    return described(small, differences(small, bench.listed(small)))


def test_both_say_the_same_of_twenty_thousand_calls(bench):
    seen, n, off, seed = Counter(), 0, 0, 0
    first = None
    while n < N_CALLS:
        one = world(
            Seeded(seed),
            sizes=(60, 300),
            n_calls=CALLS_OF_A_WORLD,
            gaps=GAPS if seed % 2 else FEW_GAPS,
        )
        listed = bench.listed(one)
        found = differences(one, listed)
        seen.update(_sorts(one, listed))
        n, off, seed = n + len(one.calls), off + len(found), seed + 1
        if found and first is None:
            first = one, min(found)
    assert first is None, f"{off} of {n} calls differ\n{_smallest(bench, *first)}"
    assert not _unseen(seen)


def _sorts(one, listed):
    """Yield what the calls of a world are instances of."""
    for call in one.calls:
        row = listed[call.ref]
        yield row["reason"] or (row["outcome"], parse_claim(call.claim).kind)


def _unseen(seen):
    """Return the reasons and the results of each kind that no call came to."""
    wanted = REASONS | {(result, kind) for result in ("hit", "miss") for kind in KINDS}
    return wanted - set(seen) - {slow_settler.NOT_ABOVE_ZERO}


@settings(
    max_examples=150, deadline=None, suppress_health_check=[HealthCheck.too_slow, *HealthCheck]
)
@given(st.data())
def test_both_say_the_same_in_small_worlds(bench, data):
    one = world(Drawn(data), sizes=(3, 12), n_calls=3)
    found = differences(one, bench.listed(one))
    if found:
        note(described(one, found))
    assert not found
