import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats
from statsmodels.regression.linear_model import OLS
from statsmodels.stats.contingency_tables import mcnemar

from foresaid.score.equal_accuracy import diebold_mariano, paired_test

flags = st.lists(st.tuples(st.booleans(), st.booleans()), max_size=80)


def columns(pairs):
    table = np.array(pairs, dtype=bool).reshape(len(pairs), 2)
    return table[:, 0], table[:, 1]


@given(flags)
def test_only_calls_on_which_they_differ_count(pairs):
    first, second = columns(pairs)
    found = paired_test(first, second)
    a = sum(x and not y for x, y in pairs)
    b = sum(y and not x for x, y in pairs)
    assert (found.only_first, found.only_second) == (a, b)
    if a + b == 0:
        assert found.p_two_sided == found.p_first == found.p_second == 1.0
        return
    assert found.p_two_sided == pytest.approx(stats.binomtest(a, a + b).pvalue)
    assert found.p_two_sided == pytest.approx(mcnemar([[0, a], [b, 0]], exact=True).pvalue)
    assert found.p_first == pytest.approx(stats.binom.sf(a - 1, a + b, 0.5))
    assert found.p_second == pytest.approx(stats.binom.sf(b - 1, a + b, 0.5))
    other = paired_test(second, first)
    # the two tails come from different functions, which agree to about twelve digits
    swapped = (found.p_second, found.p_first, found.p_two_sided)
    assert (other.p_first, other.p_second, other.p_two_sided) == pytest.approx(
        swapped, rel=1e-11, abs=0
    )
    # who is wrong where the other is right: the same calls count, for the other one
    assert paired_test(~first, ~second) == other
    assert paired_test(first.astype(int), second.astype(float)) == found


@pytest.mark.parametrize(
    ("first", "second", "told"),
    [
        ([True, False], [True], "first has length 2, second 1"),
        ([[True]], [True], "must be flat"),
        ([math.nan], [True], "first holds nan, must be true or false"),
        ([True], [0.5], "second holds 0.5, must be true or false"),
        ([True], ["no"], "second holds 'no', must be true or false"),
    ],
)
def test_flags_that_are_none(first, second, told):
    with pytest.raises(ValueError, match=told):
        paired_test(np.array(first), np.array(second))


def test_the_level_of_the_paired_test():
    """Two forecasters of the same skill, 60 % right; the test is exact, so below its level."""
    rng = np.random.default_rng(8)
    found = [paired_test(*(rng.random((2, 80)) < 0.6)) for _ in range(500)]
    for name in ("p_first", "p_second", "p_two_sided"):
        alarms = sum(getattr(one, name) <= 0.05 for one in found)
        assert 0 < alarms <= stats.binom.isf(1e-4, 500, 0.05)


def test_a_far_tail_of_the_paired_test():
    first = np.arange(900) < 899
    found = paired_test(first, ~first)
    assert found.p_first == pytest.approx(901 / 2**900, rel=1e-12, abs=0)
    assert found.p_two_sided == pytest.approx(901 / 2**899, rel=1e-12, abs=0)


def slow(first, second, horizon):
    """Return the statistic with plain loops."""
    d = [a - b for a, b in zip(first, second, strict=True)]
    n, mean = len(d), sum(d) / len(d)
    total = 0.0
    for k in range(horizon):
        gamma = sum((d[i] - mean) * (d[i - k] - mean) for i in range(k, n)) / n
        total += gamma if k == 0 else 2 * gamma
    if total <= 1e-12:
        return None
    factor = (n + 1 - 2 * horizon + horizon * (horizon - 1) / n) / n
    return mean / math.sqrt(total / n) * math.sqrt(factor)


@settings(max_examples=300, deadline=None)
@given(st.integers(0, 2**32 - 1), st.integers(8, 60), st.integers(1, 6))
def test_the_statistic_by_plain_loops(seed, n, horizon):
    rng = np.random.default_rng(seed)
    first, second = rng.normal(size=n), rng.normal(size=n)
    found, expected = (
        diebold_mariano(first, second, horizon=horizon),
        slow(first, second, horizon),
    )
    if found is None or expected is None:
        assert (found is None) == (expected is None)
        return
    assert found.t == pytest.approx(expected, rel=1e-9)
    assert found.p_two_sided == pytest.approx(2 * stats.t.sf(abs(expected), n - 1), rel=1e-9)
    assert found.difference == pytest.approx(first.mean() - second.mean())
    turned = diebold_mariano(second, first, horizon=horizon)
    assert (turned.t, turned.p_two_sided) == pytest.approx((-found.t, found.p_two_sided))
    # the same in cents, with a loss that both share, and backwards in time
    moved = diebold_mariano(100 * first + 7, 100 * second + 7, horizon=float(horizon))
    assert moved.t == pytest.approx(found.t, rel=1e-6)
    assert (moved.n, moved.horizon) == (n, horizon)
    back = diebold_mariano(first[::-1], second[::-1], horizon=horizon)
    assert back.t == pytest.approx(found.t, rel=1e-9)


@pytest.mark.parametrize("horizon", [1, 2, 3, 5])
def test_the_statistic_is_a_regression_on_a_constant(horizon):
    """statsmodels with the uniform kernel; its own test of this name has Bartlett weights."""
    rng = np.random.default_rng(7)
    n, noise = 60, rng.normal(size=(2, 64))
    first, second = (np.convolve(row, np.ones(5), "valid") for row in noise)
    options = {"maxlags": horizon - 1, "kernel": "uniform", "use_correction": False}
    fit = OLS(first - second, np.ones(n)).fit(cov_type="HAC", cov_kwds=options)
    factor = (n + 1 - 2 * horizon + horizon * (horizon - 1) / n) / n
    found = diebold_mariano(first, second, horizon=horizon)
    assert found.t == pytest.approx(fit.tvalues[0] * math.sqrt(factor), rel=1e-10)


def test_one_step_ahead_is_students_test():
    """With h = 1 the corrected statistic is the paired t test (divisors n and n - 1 cancel)."""
    rng = np.random.default_rng(3)
    first, second = rng.normal(size=30), rng.normal(0.3, 1.0, size=30)
    found = diebold_mariano(first, second)
    reference = stats.ttest_rel(first, second)
    assert found.t == pytest.approx(reference.statistic, rel=1e-12)
    assert found.p_two_sided == pytest.approx(reference.pvalue, rel=1e-10)


@pytest.mark.parametrize(
    ("n", "horizon", "same"), [(7, 1, False), (20, 20, False), (20, 25, False), (20, 1, True)]
)
def test_too_little_is_an_answer(n, horizon, same):
    rng = np.random.default_rng(4)
    first = rng.normal(size=n)
    second = first - 1.0 if same else rng.normal(size=n)
    assert diebold_mariano(first, second, horizon=horizon) is None


def test_as_little_as_is_enough():
    first, second = np.random.default_rng(4).normal(size=(2, 8))
    assert diebold_mariano(first, second).n == 8


def test_a_variance_below_nought_is_an_answer():
    """Losses that alternate: the covariance of neighbours outweighs the variance."""
    first = np.tile([1.0, 0.0], 10)
    assert slow(first, np.zeros(20), 2) is None
    assert diebold_mariano(first, np.zeros(20), horizon=2) is None
    assert diebold_mariano(first, np.zeros(20), horizon=1) is not None


@pytest.mark.parametrize(
    ("first", "second", "horizon", "told"),
    [
        (np.ones(9), np.ones(8), 1, "length 9"),
        (np.ones((2, 4)), np.ones(8), 1, "must be flat"),
        (np.full(9, np.nan), np.ones(9), 1, "first holds nan"),
        (np.ones(9), np.full(9, np.inf), 1, "second holds inf"),
        (np.ones(9), np.ones(9), 0, "horizon=0"),
        (np.ones(9), np.ones(9), 1.5, "horizon=1.5"),
    ],
)
def test_faults_of_the_caller(first, second, horizon, told):
    with pytest.raises(ValueError, match=told):
        diebold_mariano(first, second, horizon=horizon)


def test_the_level_on_independent_losses():
    """Differences are normal, so with h = 1 the level is exact."""
    rng = np.random.default_rng(9)
    found = [diebold_mariano(*rng.normal(size=(2, 40))) for _ in range(500)]
    alarms = sum(one.p_two_sided <= 0.05 for one in found)
    assert stats.binom.ppf(1e-4, 500, 0.05) <= alarms <= stats.binom.isf(1e-4, 500, 0.05)


def test_the_level_with_overlapping_losses():
    rng = np.random.default_rng(6)
    alarms = trials = 0
    for _ in range(400):
        noise = rng.normal(size=(2, 82))
        first, second = (np.convolve(row, np.ones(3), "valid") for row in noise)
        found = diebold_mariano(first, second, horizon=3)
        if found is not None:
            trials += 1
            alarms += found.p_two_sided <= 0.05
    assert trials > 380
    assert alarms <= stats.binom.isf(1e-4, trials, 0.08)
