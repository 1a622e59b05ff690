from dataclasses import replace

import numpy as np
import pytest

from foresaid.chance.base_rate import BaseRate, Starts, base_rates, disjoint_in_history
from foresaid.chance.per_call import chances, combine, expected_sessions
from foresaid.claims.registry import KINDS
from foresaid.model.codebook import default_codebook
from support.windows import TOLERANCE, bars_from

RULES = default_codebook().chance
CLOSE = [100.0, 101.0, 99.0, 102.0, 102.0, 103.0, 101.0, 104.0]


def starts(reference, span, *, in_sessions=True, mark=1.0, lag=1):
    reference = np.atleast_1d(np.asarray(reference, dtype=np.int64))
    n = len(reference)
    return Starts(
        instrument=np.zeros(n, dtype=np.int64),
        reference=reference,
        span=np.broadcast_to(np.asarray(span, dtype=np.int64), n).copy(),
        in_sessions=np.full(n, in_sessions),
        lag=np.full(n, lag),
        additive=np.zeros(n, dtype=bool),
        marks=np.column_stack((np.full(n, mark), np.full(n, np.nan))),
    )


def counted(windows, hits, disjoint):
    return BaseRate(*(np.atleast_1d(np.array(x)) for x in (windows, hits, disjoint)))


@pytest.mark.parametrize(
    ("windows", "hits", "disjoint", "modelled", "chance", "model"),
    [
        # history alone
        (100, 30, 10, 0.9, 0.30, "history"),
        (100, 30, 50, np.nan, 0.30, "history"),
        # half and half
        (50, 10, 5, 0.4, 0.5 * 0.2 + 0.5 * 0.4, "history and volatility"),
        (10, 5, 1, 0.2, 0.1 * 0.5 + 0.9 * 0.2, "history and volatility"),
        # Laplace at the ends
        (100, 0, 10, 0.5, 1 / 102, "history"),
        (100, 100, 10, 0.5, 101 / 102, "history"),
        (3, 0, 1, 0.2, 0.1 / 5 + 0.9 * 0.2, "history and volatility"),
        # no history, or none without overlap
        (0, 0, 0, 0.35, 0.35, "volatility"),
        (3, 2, 0, 0.35, 0.35, "volatility"),
        (0, 0, 12, 0.35, 0.35, "volatility"),
        # nothing to go by
        (0, 0, 0, np.nan, np.nan, "none"),
        (50, 10, 5, np.nan, np.nan, "none"),
    ],
)
def test_combine(windows, hits, disjoint, modelled, chance, model):
    found, words = combine(counted(windows, hits, disjoint), np.array([modelled]), enough=10)
    assert found[0] == pytest.approx(chance, nan_ok=True, rel=1e-14)
    assert words[0] == model


def test_counts_by_hand():
    # "ends higher" after 2 sessions, from each start whose window ends before session 7:
    # 100>99 no, 101>102 yes, 99>102 yes, 102>103 yes, 102>101 no
    found = base_rates(
        KINDS["ends higher"].kernel, 1, bars_from(CLOSE), starts(7, 2), TOLERANCE
    )
    assert (found.windows.tolist(), found.hits.tolist()) == ([5], [3])
    assert found.disjoint.tolist() == [3]


@pytest.mark.parametrize(
    ("reference", "windows", "hits"),
    [(0, 0, 0), (1, 0, 0), (2, 0, 0), (3, 1, 0), (4, 2, 1), (7, 5, 3)],
)
def test_only_windows_that_had_ended_count(reference, windows, hits):
    kernel = KINDS["ends higher"].kernel
    found = base_rates(kernel, 1, bars_from(CLOSE), starts(reference, 2), TOLERANCE)
    assert (found.windows[0], found.hits[0]) == (windows, hits)


def test_calls_do_not_depend_on_their_company():
    kernel, bars = KINDS["ends higher"].kernel, bars_from(CLOSE)
    together = base_rates(kernel, 1, bars, starts([7, 3, 5, 6], [2, 2, 1, 3]), TOLERANCE)
    for row, (reference, span) in enumerate([(7, 2), (3, 2), (5, 1), (6, 3)]):
        alone = base_rates(kernel, 1, bars, starts(reference, span), TOLERANCE)
        for name in ("windows", "hits", "disjoint"):
            assert getattr(together, name)[row] == getattr(alone, name)[0]


def test_later_prices_change_nothing():
    kernel, call = KINDS["ends higher"].kernel, starts(5, 2)
    changed = [*CLOSE[:5], 1.0, 500.0, 2.0]
    before, after = (
        base_rates(kernel, 1, bars_from(close), call, TOLERANCE) for close in (CLOSE, changed)
    )
    assert vars(before).keys() == vars(after).keys()
    assert all((getattr(before, k) == getattr(after, k)).all() for k in vars(before))


def test_spans_in_days_end_on_the_last_session_by_then():
    day = [0, 1, 2, 3, 4, 7, 8, 9]
    bars = bars_from(CLOSE, day=day)
    kernel = KINDS["ends higher"].kernel
    found = base_rates(kernel, 1, bars, starts(7, 3, in_sessions=False), TOLERANCE)
    # windows [0,3] [1,4] [2,5->4] [3,6->4] [4,7] had ended by day 8; [5 (day 7), 10] had not:
    # 100>102 yes, 101>102 yes, 99>102 yes, 102>102 no, 102>103 yes
    assert (found.windows[0], found.hits[0]) == (5, 4)
    assert disjoint_in_history(bars, starts(7, 3, in_sessions=False)).tolist() == [2]


@pytest.mark.parametrize(
    ("reference", "span", "in_sessions", "expected"),
    [(7, 4, True, 4.0), (7, 8, False, 6.0), (0, 10, False, 10.0), (7, 1, False, 1.0)],
)
def test_expected_sessions(reference, span, in_sessions, expected):
    bars = bars_from(CLOSE, day=[0, 1, 2, 3, 4, 7, 8, 9])
    call = starts(reference, span, in_sessions=in_sessions)
    assert expected_sessions(bars, call)[0] == pytest.approx(expected)


def test_chances_of_a_tiny_example():
    rules = replace(RULES, volatility_minimum=3, volatility_sessions=5, enough_windows=6)
    bars = bars_from(CLOSE)
    call = starts([7, 7], [2, 2])
    found = chances([(KINDS["ends higher"], np.array([0]))], bars, call, rules, TOLERANCE)
    moves = np.diff(np.log(CLOSE[:7]))[-5:]
    assert found.deviation[0] == pytest.approx(np.std(moves, ddof=1))
    assert found.modelled[0] == pytest.approx(0.5)
    assert found.chance[0] == pytest.approx(0.5 * 0.6 + 0.5 * 0.5)
    assert found.model.tolist() == ["history and volatility", "none"]
    assert np.isnan(found.chance[1])
    assert (found.windows[0], found.hits[0], found.disjoint[0]) == (5, 3, 3)


def test_the_model_is_kept_off_nought_and_one():
    rules = replace(RULES, volatility_minimum=3, volatility_sessions=5)
    call = starts([2 + 4, 2 + 4], 5, mark=50.0)
    found = chances(
        [(KINDS["ends above"], np.array([0])), (KINDS["ends below"], np.array([1]))],
        bars_from(CLOSE),
        call,
        rules,
        TOLERANCE,
    )
    assert found.modelled.tolist() == pytest.approx([0.001, 0.999])


def test_a_first_session_has_no_chance():
    found = chances(
        [(KINDS["ends higher"], np.array([0]))],
        bars_from(CLOSE),
        starts(0, 2),
        RULES,
        TOLERANCE,
    )
    assert np.isnan(found.chance[0])
    assert found.model[0] == "none"


def test_no_calls():
    none = starts(np.zeros(0, dtype=np.int64), 1)
    found = chances([], bars_from(CLOSE), none, RULES, TOLERANCE)
    assert len(found.chance) == 0
