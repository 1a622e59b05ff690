from dataclasses import dataclass

import numpy as np
import pytest

from foresaid.chance.base_rate import Starts, base_rates
from foresaid.chance.per_call import chances
from foresaid.claims.kernels import Judged, Kernel
from foresaid.claims.kind import Kind, Mark
from foresaid.claims.phrases import legal_forms, parse_claim, print_claim
from foresaid.claims.registry import KINDS, NOT_A_CALL, register
from foresaid.settle.outcomes import settle_calls
from support.phrases import registered
from support.windows import bars_from, windows_from
from support.worlds import BOOK, OneCall, SmallWorld, arrays_of, market_of


@dataclass(frozen=True)
class CountKernel(Kernel):
    """True where at least two closes of the window lie at or above the mark."""

    def judge(self, bars, windows, marks, tolerance):
        limit = bars.close[windows.reference] * marks[:, 0] * (1.0 - tolerance)
        pairs = zip(windows.first, windows.last, limit, strict=True)
        above = [np.flatnonzero(bars.close[a : b + 1] >= x) + a for a, b, x in pairs]
        hit = np.array([len(found) >= 2 for found in above], dtype=bool)
        decided = np.where(
            hit, [found[1] if len(found) > 1 else 0 for found in above], windows.last
        ).astype(np.int64)
        value = bars.close[decided]
        move = value / bars.close[windows.reference] - 1.0
        return Judged(hit, decided, value, move, hit.copy(), np.zeros_like(hit))


TWICE = Kind(
    "closes twice up {size}",
    "two closes are above the reference by at least the size",
    (Mark("gain"),),
    CountKernel(),
    "up",
)
CLOSE = np.array([100.0, 102.0, 101.0, 103.0, 100.0, 100.0, 100.0, 102.0, 100.0, 100.0])


def world():
    day = 16_000 + np.arange(len(CLOSE))
    return SmallWorld(day, CLOSE, CLOSE, CLOSE)


def test_a_new_kind_needs_no_more_than_its_registration():
    before = list(KINDS)
    with registered(TWICE):
        claim = parse_claim("Closes twice UP 2.0 %")
        assert claim.kind == "closes twice up"
        assert print_claim(claim) == "closes twice up 2%"
        assert "closes twice up 5%" in legal_forms()
        market = market_of(world())
        times, claims = arrays_of(
            [
                OneCall("closes twice up 2%", 16_000, -1.0, 0, 3),
                OneCall("closes twice up 2%", 16_004, -1.0, 0, 4),
                OneCall("closes twice up 2%", 16_000, -1.0, 0, 50),
                OneCall("closes twice up 2%", 16_006, -1.0, 0, 50),
            ]
        )
        found = settle_calls(times, claims, market, np.zeros(4, dtype=bool), BOOK.settlement)
        assert found.result.tolist() == ["hit", "miss", "hit", "open"]
        assert found.decided.tolist() == [3, 8, 3, -1]
        assert found.is_early.tolist() == [False, False, True, False]
        assert found.direction.tolist() == ["up"] * 4
        starts = Starts(
            instrument=np.array([0]),
            reference=np.array([9]),
            span=np.array([3]),
            in_sessions=np.array([True]),
            lag=np.array([1]),
            additive=np.array([False]),
            marks=np.array([[1.02, np.nan]]),
        )
        rates = base_rates(TWICE.kernel, 1, market.bars, starts, 1e-9)
        # starts 0 to 5 end by session 8: from 0 closes 102 and 103, from the others at most one
        assert (rates.windows[0], rates.hits[0], rates.disjoint[0]) == (6, 1, 2)
        rows = [(TWICE, np.array([0]))]
        given = chances(rows, market.bars, starts, BOOK.chance, 1e-9)
        assert np.isnan(given.modelled[0])
        assert given.model[0] == "none"
    assert list(KINDS) == before
    with pytest.raises(ValueError, match="not understood"):
        parse_claim("closes twice up 2%")


def test_two_sizes_in_one_phrase_have_an_example():
    kind = Kind("swings {size} and {size}", "x", (Mark("gain"),), CountKernel(), "none")
    with registered(kind):
        assert "swings 5% and 10%" in legal_forms()


def test_a_name_is_registered_once():
    with pytest.raises(ValueError, match="'ends higher' is registered already"):
        register(KINDS["ends higher"])


def test_names_and_forms():
    assert NOT_A_CALL not in KINDS
    assert all(kind.name == name for name, kind in KINDS.items())
    assert len({kind.form for kind in KINDS.values()}) == len(KINDS)
    assert TWICE.slots == ("size",)
    assert TWICE.is_sized
    assert not KINDS["ends higher"].is_sized
    assert KINDS["low holds"].is_sized


@pytest.mark.parametrize("name", sorted(KINDS))
def test_every_registration_is_whole(name):
    kind = KINDS[name]
    assert kind.reads
    assert kind.reads[0].islower()
    n_bounds = len(kind.kernel.bounds)
    assert all(0 <= bound.mark < len(kind.marks) for bound in kind.kernel.bounds)
    assert all(mark.quantity < max(1, len(kind.slots_of(18))) for mark in kind.marks)
    assert n_bounds <= 2
    for kernel in kind.alternates.values():
        assert kernel != kind.kernel
    if any(bound.side == 0 for bound in kind.kernel.bounds):
        assert kind.direction == "by level"


def test_a_kernel_without_bounds_is_unsound_nowhere_by_default():
    bars, windows = bars_from(CLOSE), windows_from([0], [1], [3])
    assert CountKernel().unsound(bars, windows, np.ones((1, 1)), 0.0) == []
