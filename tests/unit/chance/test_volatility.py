from dataclasses import replace

import numpy as np
import pytest

from foresaid.chance.volatility import modelled_chance, rolling_volatility
from foresaid.claims.bounds import BoundKernel
from foresaid.claims.kernels import On, Over
from foresaid.claims.registry import KINDS
from foresaid.model.bars import concatenate_bars
from support.windows import bars_from, windows_from

DEVIATION, SESSIONS, WALKS, FINE = 0.01, 20, 4_000, 32
BOUNDED = sorted(name for name, kind in KINDS.items() if isinstance(kind.kernel, BoundKernel))


def test_deviation_by_hand():
    close = np.array([100.0, 101.0, 99.0, 102.0, 104.0])
    found = rolling_volatility(
        bars_from(close), np.array([False]), sessions=3, minimum=2
    ).tolist()
    moves = np.diff(np.log(close))
    assert np.isnan(found[:2]).all()
    assert found[2] == pytest.approx(np.std(moves[:2], ddof=1))
    assert found[3] == pytest.approx(np.std(moves[:3], ddof=1))
    assert found[4] == pytest.approx(np.std(moves[1:4], ddof=1))


def test_differences_of_quotes_that_may_be_negative():
    close = np.array([0.1, -0.1, 0.2, 0.0])
    found = rolling_volatility(bars_from(close), np.array([True]), sessions=9, minimum=2)
    assert found[3] == pytest.approx(np.std(np.diff(close), ddof=1))


def test_each_instrument_by_itself():
    close = np.array([100.0, 101.0, 99.0])
    one = {
        "day": np.arange(3),
        "high": close,
        "low": close,
        "close": close,
        "has_range": np.zeros(3, dtype=bool),
        "factor": np.ones(3),
        "total": close,
        "total_known": False,
    }
    empty = dict.fromkeys(one, np.zeros(0)) | {"total_known": False}
    bars = concatenate_bars(["A", "B", "C"], [one, empty, one | {"close": 10 * close}])
    found = rolling_volatility(bars, np.zeros(3, dtype=bool), sessions=9, minimum=2)
    assert np.isnan(found[[0, 1, 3, 4]]).all()
    assert found[2] == pytest.approx(found[5])


def model(bounds, marks, *, deviation=DEVIATION, additive=False, has_range=True, n=SESSIONS):
    marks = np.atleast_2d(np.asarray(marks, dtype=float))
    m = len(marks)
    return modelled_chance(
        bounds,
        marks,
        additive=np.full(m, additive),
        deviation=np.full(m, deviation),
        n_sessions=np.full(m, float(n)),
        has_range=np.full(m, has_range),
    )


@pytest.fixture(scope="module")
def walks():
    """Driftless log walks with highs and lows of many steps inside each session."""
    rng = np.random.default_rng(11)
    steps = rng.standard_normal((WALKS, SESSIONS, FINE)) * DEVIATION / np.sqrt(FINE)
    path = np.cumsum(steps.reshape(WALKS, -1), axis=1).reshape(WALKS, SESSIONS, FINE)
    start = np.zeros((WALKS, 1))
    close, high, low = (
        np.exp(np.hstack((start, one))).ravel()
        for one in (path[:, :, -1], path.max(axis=2), path.min(axis=2))
    )
    bars = bars_from(close, high=np.maximum(high, close), low=np.minimum(low, close))
    first = np.arange(WALKS) * (SESSIONS + 1)
    return bars, windows_from(first, first + 1, first + SESSIONS)


@pytest.mark.parametrize("name", BOUNDED)
def test_the_model_against_walks(name, walks):
    kind, (bars, windows) = KINDS[name], walks
    spread = DEVIATION * np.sqrt(SESSIONS)
    (bound, *rest) = kind.kernel.bounds
    if rest:
        distances = [(-0.8, 0.9), (-1.5, 1.2)]
    elif bound.over is Over.END:
        distances = [(-1.0,), (0.0,), (0.7,)]
    else:
        # where the level lies on the side from which it is to be reached or kept
        ahead = {1: 1, -1: -1, 0: 1}[bound.side] * (-1 if bound.over is Over.ALL else 1)
        distances = [(0.5 * ahead,), (1.2 * ahead,)] + ([(-0.7,)] if bound.side == 0 else [])
    for distance in distances:
        marks = np.exp(spread * np.array(distance))[None, : len(kind.marks)]
        share = kind.kernel.outcomes(bars, windows, marks, 1e-9).mean()
        found = model(kind.kernel.bounds, marks)[0]
        assert found == pytest.approx(share, abs=0.035), (name, distance)


@pytest.mark.parametrize("name", ["closes above", "closes below", "rises", "falls"])
def test_watching_closes_alone_is_less_likely_than_watching_all(name):
    (bound,) = KINDS[name].kernel.bounds
    mark = np.exp(0.03 * (bound.side or 1))
    assert bound.on is On.CLOSE
    closes = model((bound,), [mark])[0]
    at_any_time = (replace(bound, on=On.RANGE),)
    assert closes < model(at_any_time, [mark])[0]
    # without highs and lows a path is watched at its closes, too
    assert model(at_any_time, [mark], has_range=False)[0] == closes


@pytest.mark.parametrize("deviation", [0.0, np.nan, -0.01])
def test_no_deviation_no_model(deviation):
    bounds = KINDS["ends higher"].kernel.bounds
    assert np.isnan(model(bounds, [1.0], deviation=deviation)).all()


def test_no_bounds_no_model():
    assert np.isnan(model((), [1.0])).all()


@pytest.mark.parametrize(
    ("name", "mark", "chance"),
    [
        ("ends above", 0.0, 1.0),
        ("ends below", 0.0, 0.0),
        ("ends above", -0.5, 1.0),
        ("trades below", 0.0, 0.0),
        ("stays above", 0.0, 1.0),
    ],
)
def test_a_price_never_reaches_nought(name, mark, chance):
    assert model(KINDS[name].kernel.bounds, [mark])[0] == pytest.approx(chance, abs=1e-12)


def test_differences_use_the_mark_as_it_is():
    bounds = KINDS["ends above"].kernel.bounds
    spread = 0.05 * np.sqrt(SESSIONS)
    found = model(bounds, [[spread], [-spread]], deviation=0.05, additive=True)
    assert found.tolist() == pytest.approx([0.158655, 0.841345], abs=1e-6)


def test_a_band_that_leaves_out_the_reference_cannot_be_kept():
    bounds = KINDS["stays between and"].kernel.bounds
    found = model(bounds, [[1.01, 1.05], [0.95, 0.99], [0.9, 1.1]])
    assert found[:2].tolist() == [0.0, 0.0]
    assert found[2] > 0.9
