import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import optimize, stats
from statsmodels.stats.meta_analysis import combine_effects

from foresaid.score.shrinkage import shrunken_ranks


def found(values, errors, *, seed=1, **more):
    return shrunken_ranks(
        np.array(values), np.array(errors), np.random.default_rng(seed), **more
    )


@settings(max_examples=100, deadline=None)
@given(st.integers(0, 2**32 - 1), st.integers(2, 30), st.floats(0.01, 2.0))
def test_the_spread_solves_its_equation(seed, m, spread):
    rng = np.random.default_rng(seed)
    errors = rng.uniform(0.05, 0.5, m)
    values = rng.normal(0.1, spread, m) + rng.normal(0, errors)
    result = found(values, errors, draws=100)

    def excess(between):
        weight = 1 / (errors**2 + between)
        mean = (weight * values).sum() / weight.sum()
        return (weight * (values - mean) ** 2).sum() - (m - 1)

    root = optimize.brentq(excess, 0.0, 1e4, xtol=1e-14) if excess(0.0) > 0 else 0.0
    assert result.spread**2 == pytest.approx(root, rel=1e-8, abs=1e-10)
    if result.spread:
        kept = result.spread**2 / (result.spread**2 + errors**2)
        np.testing.assert_allclose(result.value, result.mean + kept * (values - result.mean))
        # a record that says less is pulled further
        pull = np.abs(result.value - values) / np.maximum(np.abs(values - result.mean), 1e-12)
        assert (np.diff(pull[np.argsort(errors)]) > -1e-6).all()


def test_the_spread_is_that_of_a_library():
    values = np.array([0.3, 0.05, -0.2, 0.41, 0.0, 0.12, -0.33, 0.27])
    errors = np.array([0.1, 0.05, 0.12, 0.2, 0.08, 0.1, 0.15, 0.11])
    library = combine_effects(values, errors**2, method_re="iterated", atol=1e-12, maxiter=5000)
    result = found(values, errors)
    assert result.spread**2 == pytest.approx(library.tau2, rel=1e-5)
    assert result.mean == pytest.approx(library.mean_effect_re, rel=1e-5)


def test_chances_and_ranks_of_two_in_closed_form():
    result = found([0.5, 0.1], [0.1, 0.2], draws=200_000)
    gap = (result.value[0] - result.value[1]) / np.hypot(*result.deviation)
    assert result.p_best[0] == pytest.approx(stats.norm.cdf(gap), abs=0.005)
    assert result.p_best.sum() == pytest.approx(1.0)
    assert result.rank[0] == pytest.approx(2.0 - stats.norm.cdf(gap), abs=0.005)
    assert result.rank.sum() == pytest.approx(3.0)


def test_ranks_by_a_loop_over_grids():
    """The chance of being best by numbers: the density times how often the others are below."""
    values, errors = [0.3, 0.2, 0.0, -0.1, 0.25], [0.05, 0.2, 0.05, 0.1, 0.3]
    result = found(values, errors, draws=100_000)
    grid = np.linspace(-2, 2, 4001)
    for i in range(5):
        density = stats.norm.pdf(grid, result.value[i], result.deviation[i])
        below = np.ones_like(grid)
        above = np.zeros_like(grid)
        for j in range(5):
            if j != i:
                share = stats.norm.cdf(grid, result.value[j], result.deviation[j])
                below *= share
                above += 1 - share
        assert result.p_best[i] == pytest.approx(np.trapezoid(density * below, grid), abs=0.006)
        rank = 1 + np.trapezoid(density * above, grid)
        assert result.rank[i] == pytest.approx(rank, abs=0.02)
        assert result.rank_low[i] <= rank <= result.rank_high[i]


def test_noise_alone_ranks_nobody():
    result = found([0.1, 0.0, -0.1, 0.05], [0.3, 0.3, 0.3, 0.3])
    assert result.spread == 0.0
    assert result.p_best.tolist() == [0.25] * 4
    assert result.rank.tolist() == [2.5] * 4
    assert (result.rank_low.tolist(), result.rank_high.tolist()) == ([1.0] * 4, [4.0] * 4)
    np.testing.assert_allclose(result.value, result.mean)


def test_one_record_and_none():
    alone = found([0.4], [0.1])
    assert alone.value[0] == pytest.approx(0.4)
    assert (alone.p_best[0], alone.rank[0]) == (1.0, 1.0)
    assert found([], []) is None


def test_rank_intervals_hold_the_truth_as_often_as_they_say():
    rng = np.random.default_rng(7)
    inside = total = 0
    for seed in range(60):
        truth = rng.normal(0, 0.3, 25)
        errors = rng.uniform(0.05, 0.4, 25)
        result = found(truth + rng.normal(0, errors), errors, seed=seed, draws=400)
        ranks = stats.rankdata(-truth)
        inside += int(((result.rank_low <= ranks) & (ranks <= result.rank_high)).sum())
        total += 25
    assert 0.85 < inside / total < 0.97


@pytest.mark.parametrize(
    ("values", "errors", "more", "told"),
    [
        ([0.1, 0.2], [0.1], {}, "length 2"),
        ([0.1], [0.0], {}, r"errors\[0\]"),
        ([np.nan], [0.1], {}, "values holds nan"),
        ([[0.1]], [0.1], {}, "must be flat"),
        ([0.1], [0.1], {"draws": 5}, "draws"),
        ([0.1], [0.1], {"coverage": 1.0}, "coverage"),
    ],
)
def test_faults_of_the_caller(values, errors, more, told):
    with pytest.raises(ValueError, match=told):
        found(values, errors, **more)
