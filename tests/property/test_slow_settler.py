"""The product against an independent slow settler, on random calls of every kind.

`support.slow_settler` is written from docs/settlement.md and docs/claims.md with plain loops.
Both settle the same random worlds: several instruments with actions, halts, stale rows, gaps
and prices in query, venues in several zones, other currencies, conditions. The product goes
through a real ledger: files are imported, settled and listed. Where they differ, the smallest
world found is printed.
"""

from collections import Counter
from dataclasses import replace
from datetime import date

import pytest
from hypothesis import HealthCheck, Phase, given, note, settings
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


def _as_of(one, day):
    """Return a world as it was on an earlier day."""
    said = [call for call in one.calls if date.fromisoformat(call.at[:10]).toordinal() <= day]
    return replace(one, calls=tuple(said), as_of=day)


SETTLED = ("outcome", "reason", "reference_session", "decided_session", "decided_price")
ONCE_MATURED = ("matured", "deadline_session", "measured", "move_frac")
ONCE_MATURED += tuple(f"alt_{name}" for name in ("any_time", "closes", "deadline"))
ONCE_MATURED += ("alt_price_return", "alt_close_before")


@pytest.mark.parametrize("seed", range(400, 406))
def test_what_is_settled_is_never_opened_again(bench, seed):
    """Hits, misses and voids stay what they are as days go by; what matured stays whole."""
    one = world(Seeded(seed), sizes=(60, 300), n_calls=150, gaps=GAPS if seed % 2 else FEW_GAPS)
    first = min(thing.rows[0].day for thing in one.things)
    last = max(thing.rows[-1].day for thing in one.things)
    n = 0
    for part in (0.3, 0.7):
        day = int(first + part * (last - first))
        before = bench.listed(_as_of(one, day))
        settled = {ref: row for ref, row in before.items() if row["outcome"] != "open"}
        for later in (day + 4, day + 15, last + 3):
            after = bench.listed(_as_of(one, later))
            for ref, row in settled.items():
                is_void = row["outcome"] == "void"
                names = SETTLED[: 2 if is_void else None]
                names += ONCE_MATURED if row["matured"] else ()
                changed = {x: (row[x], after[ref][x]) for x in names if row[x] != after[ref][x]}
                assert not changed, (ref, day, later)
                n += 1
    assert n > 50


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
    max_examples=400,
    deadline=None,
    phases=(Phase.explicit, Phase.reuse, Phase.generate, Phase.shrink),
    suppress_health_check=[HealthCheck.too_slow, HealthCheck.data_too_large],
)
@given(st.data())
def test_both_say_the_same_in_small_worlds(bench, data):
    one = world(Drawn(data), sizes=(3, 9), n_calls=1)
    found = differences(one, bench.listed(one))
    if found:
        note(described(one, found))
    assert not found
