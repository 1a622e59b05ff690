import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from foresaid.score.probability import (
    brier_score,
    brier_score_band,
    brier_skill,
    log_score,
    spiegelhalter_z,
)

STATED = st.lists(st.tuples(st.floats(0, 1), st.booleans()), min_size=1, max_size=40)
SCORES = [brier_score, log_score, spiegelhalter_z, lambda p, y: brier_score_band(p, p, y)]


def columns(stated):
    return tuple(np.array(column) for column in zip(*stated, strict=True))


@given(STATED)
def test_brier_is_half_the_sum_over_both_classes(stated):
    p, y = columns(stated)
    both = np.mean((p - y) ** 2 + ((1 - p) - (1 - y)) ** 2)
    assert brier_score(p, y) == pytest.approx(both / 2, abs=1e-15)


@given(STATED)
def test_the_opposite_statement_scores_the_same(stated):
    p, y = columns(stated)
    assert brier_score(1 - p, ~y) == pytest.approx(brier_score(p, y), abs=1e-15)


@given(STATED)
def test_a_band_without_width_is_a_probability(stated):
    p, y = columns(stated)
    assert brier_score_band(p, p, y) == pytest.approx(brier_score(p, y), abs=1e-16)


def test_a_band_is_the_average_over_itself():
    low, high = np.array([0.2, 0.55, 0.0]), np.array([0.45, 0.8, 1.0])
    outcomes = np.array([True, False, True])
    steps = (np.arange(20_000) + 0.5) / 20_000
    average = np.mean([brier_score(low + (high - low) * step, outcomes) for step in steps])
    assert brier_score_band(low, high, outcomes) == pytest.approx(average, rel=1e-8)


def test_log_score_is_the_mean_logarithm_of_what_happened():
    p, y = np.array([0.9, 0.2, 0.4]), np.array([True, False, True])
    by_hand = -(math.log(0.9) + math.log(0.8) + math.log(0.4)) / 3
    assert log_score(p, y) == pytest.approx(by_hand, rel=1e-15)


def test_log_score_keeps_small_probabilities_and_certainty():
    tiny = np.array([1e-20])
    assert log_score(tiny, np.array([False])) == pytest.approx(1e-20)
    assert log_score(tiny, np.array([True])) == pytest.approx(20 * math.log(10))
    sure = log_score(np.array([1.0, 0.0]), np.array([True, False]))
    assert sure == 0.0
    assert math.copysign(1, sure) == 1
    assert log_score(np.array([0.5, 1.0]), np.array([True, False])) == math.inf


@pytest.mark.parametrize("score", [brier_score, log_score])
@given(truth=st.floats(0.02, 0.98), stated=st.floats(0.01, 0.99))
def test_honesty_pays(score, truth, stated):
    def expected(p):
        yes = score(np.array([p]), np.array([True]))
        no = score(np.array([p]), np.array([False]))
        return truth * yes + (1 - truth) * no

    assert expected(truth) <= expected(stated) + 1e-15


def test_skill():
    assert brier_skill(0.25, 0.25) == 0.0
    assert brier_skill(0.0, 0.25) == 1.0
    assert brier_skill(0.5, 0.25) == -1.0
    assert brier_skill(0.5, 0.0) is None
    assert brier_skill(0.0, 0.0) is None


@given(STATED)
def test_z_is_the_brier_score_against_its_expectation(stated):
    p, y = columns(stated)
    found = spiegelhalter_z(p, y)
    n, spread = len(p), (1 - 2 * p) ** 2 * p * (1 - p)
    if found is None:
        assert spread.sum() == 0
    elif spread.sum() > 1e-6:
        excess = brier_score(p, y) - np.mean(p * (1 - p))
        assert found.z == pytest.approx(excess * n / math.sqrt(spread.sum()), abs=1e-9)
        assert found.p_two_sided == pytest.approx(2 * stats.norm.sf(abs(found.z)), rel=1e-12)


def test_z_is_none_without_variance():
    p = np.array([0.0, 0.5, 1.0])
    assert spiegelhalter_z(p, np.array([True, False, True])) is None


def test_z_tells_too_sure_from_not_sure_enough():
    outcomes = np.repeat([True, False], [7, 3])
    assert spiegelhalter_z(np.full(10, 0.95), outcomes).z > 0
    assert spiegelhalter_z(np.full(10, 0.55), outcomes).z < 0


@pytest.mark.slow
def test_z_is_standard_normal_for_calibrated_forecasts():
    rng = np.random.default_rng(7)
    z, p_values = [], []
    for _ in range(4_000):
        p = rng.uniform(0, 1, 150)
        found = spiegelhalter_z(p, rng.random(150) < p)
        z.append(found.z)
        p_values.append(found.p_two_sided)
    assert np.mean(z) == pytest.approx(0, abs=0.06)
    assert np.std(z) == pytest.approx(1, abs=0.05)
    assert np.mean(np.array(p_values) < 0.05) == pytest.approx(0.05, abs=0.015)


@pytest.mark.parametrize("score", SCORES)
def test_outcomes_may_be_numbers(score):
    p = np.array([0.3, 0.9, 0.6])
    assert score(p, np.array([0, 1, 1])) == score(p, np.array([False, True, True]))


@pytest.mark.parametrize("score", SCORES)
@pytest.mark.parametrize(
    ("p", "y", "named"),
    [
        ([], [], "shape"),
        ([[0.5]], [[True]], "shape"),
        ([0.5, 0.5], [True], "outcomes has 1"),
        ([0.5, 1.25], [True, True], "holds 1.25"),
        ([-0.5], [True], "holds -0.5"),
        ([math.nan], [True], "holds nan"),
        ([0.5], [0.5], "outcomes holds 0.5"),
        ([0.5], [2], "outcomes holds 2"),
        ([0.5], [math.nan], "outcomes holds nan"),
    ],
)
def test_bad_arrays_are_named(score, p, y, named):
    with pytest.raises(ValueError, match=named):
        score(np.array(p), np.array(y))


def test_bad_bands_are_named():
    y = np.array([True, True])
    with pytest.raises(ValueError, match=r"high\[1\]=0.25 lies below low\[1\]=0.5"):
        brier_score_band(np.array([0.5, 0.5]), np.array([0.75, 0.25]), y)
    with pytest.raises(ValueError, match="high holds"):
        brier_score_band(np.array([0.5, 0.5]), np.array([0.75, 1.5]), y)
    with pytest.raises(ValueError, match="low has 1"):
        brier_score_band(np.array([0.5]), np.array([0.75, 0.75]), y)


@pytest.mark.parametrize("bad", [-0.1, math.nan, math.inf])
def test_bad_scores_are_named(bad):
    with pytest.raises(ValueError, match=f"^score={bad}"):
        brier_skill(bad, 0.25)
    with pytest.raises(ValueError, match=f"reference_score={bad}"):
        brier_skill(0.25, bad)
