import numpy as np
import pytest

from foresaid.chance.simulation import LOOK_BACK, draw_steps, simulated_chance
from foresaid.chance.volatility import modelled_chance
from foresaid.claims.registry import KINDS


def steps(sessions, paths=2_000):
    return draw_steps(np.random.default_rng(7), paths=paths, sessions=sessions)


def simulated(name, marks, *, sessions, length=None, deviation=0.01):
    marks = np.atleast_2d(np.asarray(marks, dtype=float))
    return simulated_chance(
        KINDS[name].kernel,
        marks,
        additive=np.zeros(len(marks), dtype=bool),
        deviation=np.broadcast_to(deviation, len(marks)),
        n_sessions=np.full(len(marks), float(sessions)),
        steps=steps(length or sessions),
    )


def test_longer_walks_begin_as_shorter_ones_do():
    short, long = steps(5, paths=50), steps(40, paths=50)
    assert short.shape == (50, LOOK_BACK + 5)
    assert (long[:, : LOOK_BACK + 5] == short).all()


@pytest.mark.parametrize("name", ["ends above", "rises", "drawdown"])
def test_a_chance_does_not_depend_on_the_longest_call(name):
    mark = 0.97 if name == "drawdown" else 1.02
    alone = simulated(name, [mark], sessions=10)
    beside = simulated(name, [mark], sessions=10, length=60)
    assert alone.tolist() == beside.tolist()


@pytest.mark.parametrize(
    ("name", "marks"), [("ends above", [1.02]), ("ends between and", [0.98, 1.03])]
)
def test_simulation_agrees_with_the_closed_form(name, marks):
    kind = KINDS[name]
    closed = modelled_chance(
        kind.kernel.bounds,
        np.array([marks]),
        additive=np.array([False]),
        deviation=np.array([0.01]),
        n_sessions=np.array([10.0]),
        has_range=np.array([False]),
    )
    assert simulated(name, marks, sessions=10)[0] == pytest.approx(closed[0], abs=0.035)


def test_unknown_deviations_have_no_chance():
    found = simulated("ends above", [[1.01]] * 3, sessions=5, deviation=[np.nan, 0.0, 0.01])
    assert np.isnan(found[:2]).all()
    assert 0 < found[2] < 1


def test_a_claim_without_meaning_on_most_walks_has_no_chance():
    # one move gives no volatility
    assert np.isnan(simulated("volatility above", [0.1], sessions=1)).all()
    assert not np.isnan(simulated("volatility above", [0.1], sessions=5)).any()
