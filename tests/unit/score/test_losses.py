import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from scipy import integrate, stats

from foresaid.score.losses import (
    coverage,
    crps_normal,
    crps_sample,
    interval_score,
    pinball_loss,
    ranked_probability_score,
)
from foresaid.score.probability import brier_score

NAN = math.nan
LEVELS = np.array([0.05, 0.25, 0.5, 0.75, 0.9])
VALUES = st.floats(-1e3, 1e3)
VECTOR = arrays(np.float64, 4, elements=VALUES)
TABLE = arrays(np.float64, (4, 5), elements=VALUES)


def with_gaps(rng, table):
    """Leave out values at random, but never all of a row."""
    result = table.copy()
    for row in result:
        keep = rng.integers(0, len(row))
        for column in range(len(row)):
            if column != keep and rng.random() < 0.4:
                row[column] = NAN
    return result


def random_shares(rng, rows, columns):
    """Rows of 1 to ``columns`` probabilities, NaN behind them, and a category each."""
    table, category = np.full((rows, columns), NAN), np.zeros(rows, dtype=np.int64)
    for row in range(rows):
        parts = int(rng.integers(1, columns + 1))
        table[row, :parts] = rng.dirichlet(np.ones(parts))
        category[row] = rng.integers(0, parts)
    return table, category


# Slow recomputations


def slow_pinball(levels, quantiles, outcome):
    losses = []
    for alpha, q in zip(levels, quantiles, strict=True):
        if not math.isnan(q):
            losses.append((1 - alpha) * (q - outcome) if outcome < q else alpha * (outcome - q))
    return sum(losses) / len(losses)


def slow_ranked(probabilities, category):
    shares = [p for p in probabilities if not math.isnan(p)]
    total = 0.0
    for j in range(len(shares)):
        total += (sum(shares[: j + 1]) - (1 if category <= j else 0)) ** 2
    return total, len(shares)


def slow_sample(samples, outcome):
    values = [x for x in samples if not math.isnan(x)]
    near = sum(abs(x - outcome) for x in values) / len(values)
    apart = sum(abs(x - other) for x in values for other in values)
    return near - apart / (2 * len(values) ** 2)


@pytest.mark.parametrize("own_levels", [False, True])
def test_pinball_in_plain_loops(own_levels):
    rng = np.random.default_rng(1)
    quantiles, outcomes = with_gaps(rng, rng.normal(size=(60, 5))), rng.normal(size=60)
    quantiles[0, 0] = outcomes[0]
    levels = rng.uniform(0.01, 0.99, (60, 5)) if own_levels else LEVELS
    rows = np.broadcast_to(levels, (60, 5))
    expected = [slow_pinball(*row) for row in zip(rows, quantiles, outcomes, strict=True)]
    assert pinball_loss(levels, quantiles, outcomes) == pytest.approx(expected, rel=1e-13)


def test_interval_score_in_plain_loops():
    rng = np.random.default_rng(2)
    low = rng.normal(size=60)
    high, y, share = low + rng.exponential(size=60), rng.normal(size=60), rng.random(60)
    expected = []
    for a, b, came, covered in zip(low, high, y, share, strict=True):
        score = b - a
        if came < a:
            score += 2 / (1 - covered) * (a - came)
        elif came > b:
            score += 2 / (1 - covered) * (came - b)
        expected.append(score)
    assert interval_score(low, high, y, share) == pytest.approx(expected, rel=1e-13)


def test_ranked_probability_score_in_plain_loops():
    table, category = random_shares(np.random.default_rng(3), 60, 6)
    slow = [slow_ranked(p, c) for p, c in zip(table, category, strict=True)]
    summed = ranked_probability_score(table, category, scaled=False)
    assert summed == pytest.approx([total for total, _ in slow], abs=1e-13)
    scaled = [total / (parts - 1) if parts > 1 else 0.0 for total, parts in slow]
    assert ranked_probability_score(table, category) == pytest.approx(scaled, abs=1e-13)


def test_sample_score_in_plain_loops():
    rng = np.random.default_rng(4)
    samples, outcomes = with_gaps(rng, rng.normal(size=(60, 7))), rng.normal(size=60)
    expected = [slow_sample(*row) for row in zip(samples, outcomes, strict=True)]
    assert crps_sample(samples, outcomes) == pytest.approx(expected, abs=1e-13)


@pytest.mark.parametrize(("mean", "deviation"), [(0.0, 1.0), (3.0, 0.5), (-2.0, 4.0)])
@pytest.mark.parametrize("outcome", [-3.0, 0.2, 3.0, 9.0])
def test_normal_score_is_the_integral_that_defines_it(mean, deviation, outcome):
    law = stats.norm(mean, deviation)
    below, _ = integrate.quad(lambda x: law.cdf(x) ** 2, -60, outcome, points=[mean])
    above, _ = integrate.quad(lambda x: law.sf(x) ** 2, outcome, 60, points=[mean])
    found = crps_normal(np.array([mean]), np.array([deviation]), np.array([outcome]))
    assert found == pytest.approx([below + above], rel=1e-7)


# How the losses hang together


@given(quantiles=TABLE, outcomes=VECTOR)
def test_the_median_costs_half_its_absolute_error(quantiles, outcomes):
    found = pinball_loss(np.full(1, 0.5), quantiles[:, :1], outcomes)
    assert found == pytest.approx(np.abs(quantiles[:, 0] - outcomes) / 2, abs=1e-12)


@given(low=VECTOR, width=arrays(np.float64, 4, elements=st.floats(0, 1e3)), outcomes=VECTOR)
@pytest.mark.parametrize("share", [0.0, 0.5, 0.9])
def test_an_interval_costs_what_its_two_quantiles_cost(low, width, outcomes, share):
    alpha, high = 1 - share, low + width
    pair = pinball_loss(
        np.array([alpha / 2, 1 - alpha / 2]), np.stack([low, high], axis=1), outcomes
    )
    found = interval_score(low, high, outcomes, np.full(4, share))
    assert found == pytest.approx(4 / alpha * pair, abs=1e-9)


@given(p=arrays(np.float64, 4, elements=st.floats(0, 1)), outcomes=arrays(np.bool_, 4))
def test_two_categories_cost_the_brier_score(p, outcomes):
    table = np.stack([1 - p, p], axis=1)
    for scaled in (False, True):
        found = ranked_probability_score(table, outcomes.astype(np.int64), scaled=scaled)
        assert found.mean() == pytest.approx(brier_score(p, outcomes), abs=1e-14)


@given(samples=TABLE, outcomes=VECTOR)
def test_one_value_costs_its_absolute_error_and_copies_change_nothing(samples, outcomes):
    one = crps_sample(samples[:, :1], outcomes)
    assert one == pytest.approx(np.abs(samples[:, 0] - outcomes), abs=1e-12)
    twice = crps_sample(np.concatenate([samples, samples], axis=1), outcomes)
    assert twice == pytest.approx(crps_sample(samples, outcomes), abs=1e-9)


def test_many_values_of_a_normal_cost_what_the_normal_costs():
    spread = stats.norm.ppf((np.arange(4_000) + 0.5) / 4_000, 2.0, 3.0)[None, :]
    outcome = np.array([4.5])
    exact = crps_normal(np.array([2.0]), np.array([3.0]), outcome)
    assert crps_sample(spread, outcome) == pytest.approx(exact, rel=1e-4)


def test_many_quantiles_cost_half_of_the_ranked_score():
    """Twice the pinball loss over all levels is the continuous ranked probability score."""
    levels = (np.arange(4_000) + 0.5) / 4_000
    found = pinball_loss(levels, stats.norm.ppf(levels)[None, :], np.array([0.7]))
    exact = crps_normal(np.array([0.0]), np.array([1.0]), np.array([0.7]))
    assert 2 * found == pytest.approx(exact, rel=1e-4)


@given(samples=TABLE, outcomes=VECTOR, shift=VALUES, factor=st.floats(0.01, 100))
def test_losses_move_and_stretch_with_the_unit(samples, outcomes, shift, factor):
    moved, came = factor * samples + shift, factor * outcomes + shift
    size = 1e-9 * factor
    assert pinball_loss(LEVELS, moved, came) == pytest.approx(
        factor * pinball_loss(LEVELS, samples, outcomes), abs=size + 1e-9
    )
    assert crps_sample(moved, came) == pytest.approx(
        factor * crps_sample(samples, outcomes), abs=size + 1e-9
    )


@given(samples=TABLE, outcomes=VECTOR)
def test_no_loss_is_negative(samples, outcomes):
    assert (pinball_loss(LEVELS, samples, outcomes) >= 0).all()
    assert (crps_sample(samples, outcomes) >= 0).all()
    assert (crps_normal(samples[:, 0], np.abs(samples[:, 1]), outcomes) >= 0).all()


def test_certain_forecasts_score_from_best_to_worst():
    sure = np.array([[1.0, 0.0, 0.0]] * 3)
    assert ranked_probability_score(sure, np.arange(3)).tolist() == [0.0, 0.5, 1.0]
    assert ranked_probability_score(sure, np.arange(3), scaled=False).tolist() == [0, 1, 2]


def test_one_category_is_no_forecast_and_costs_nothing():
    table = np.array([[1.0, NAN], [0.4, 0.6]])
    assert ranked_probability_score(table, np.array([0, 0])).tolist() == pytest.approx(
        [0, 0.36]
    )


def test_probabilities_that_add_up_nearly_are_taken():
    table = np.array([[0.3333333, 0.3333333, 0.3333333]])
    found = ranked_probability_score(table, np.array([2]), scaled=False)
    assert found == pytest.approx([1 / 9 + 4 / 9], abs=1e-6)


def test_probabilities_that_add_up_to_more_cost_no_more_than_the_worst():
    table = np.array([[1.0, 0.0000005, 0.0]])
    assert ranked_probability_score(table, np.array([2])).tolist() == [1.0]


def test_a_normal_without_deviation_costs_its_absolute_error():
    came = np.array([1.0, 2.0, -4.0])
    found = crps_normal(np.full(3, 1.0), np.array([0.0, 0.0, 1e-310]), came)
    assert found.tolist() == pytest.approx([0, 1, 5])


# Propriety: who states what is true expects the smallest loss


@pytest.mark.parametrize("level", [0.1, 0.5, 0.8])
def test_the_true_quantile_expects_the_smallest_pinball_loss(level):
    came = stats.expon.ppf((np.arange(20_000) + 0.5) / 20_000)

    def expected(q):
        return pinball_loss(np.array([level]), np.full((len(came), 1), q), came).mean()

    true = stats.expon.ppf(level)
    assert all(expected(true) < expected(true + off) for off in (-0.4, -0.05, 0.05, 0.4))


@pytest.mark.parametrize("share", [0.5, 0.8])
def test_the_true_interval_expects_the_smallest_score(share):
    came = stats.norm.ppf((np.arange(20_000) + 0.5) / 20_000)
    low, high = stats.norm.interval(share)

    def expected(a, b):
        ones = np.ones(len(came))
        return interval_score(a * ones, b * ones, came, share * ones).mean()

    others = [(low - 0.1, high), (low, high + 0.1), (low + 0.1, high - 0.1), (low, high - 0.3)]
    assert all(expected(low, high) < expected(*other) for other in others)


@given(seed=st.integers(0, 2**32 - 1))
def test_true_probabilities_expect_the_smallest_ranked_score(seed):
    true, other = np.random.default_rng(seed).dirichlet(np.ones(4), size=2)
    every = np.arange(4)

    def expected(stated):
        return true @ ranked_probability_score(np.tile(stated, (4, 1)), every)

    assert expected(true) <= expected(other) + 1e-15


@pytest.mark.parametrize(("mean", "deviation"), [(0.2, 1.0), (-0.2, 1.0), (0, 1.3), (0, 0.8)])
def test_the_true_normal_expects_the_smallest_score(mean, deviation):
    came = stats.norm.ppf((np.arange(20_000) + 0.5) / 20_000)
    ones = np.ones(len(came))
    true = crps_normal(0 * ones, ones, came).mean()
    assert true < crps_normal(mean * ones, deviation * ones, came).mean()
    # half the mean distance of two draws
    assert true == pytest.approx(1 / math.sqrt(math.pi), rel=1e-3)


# Coverage


def test_both_bounds_are_inside():
    low, high = np.full(5, 1.0), np.full(5, 2.0)
    came = np.array([1.0, 2.0, 1.5, 0.999, 2.001])
    assert coverage(low, high, came) == 0.6


def test_coverage_of_nothing_is_unknown():
    nothing = np.array([])
    assert coverage(nothing, nothing, nothing) is None


def test_coverage_of_one():
    assert coverage(np.zeros(1), np.zeros(1), np.zeros(1)) == 1.0


# Little data and wrong data


def test_no_forecast_has_no_loss():
    nothing, table = np.array([]), np.empty((0, 3))
    none = np.empty(0, dtype=np.int64)
    for found in (
        pinball_loss(np.full(3, 0.5), table, nothing),
        pinball_loss(table, table, nothing),
        interval_score(nothing, nothing, nothing, nothing),
        ranked_probability_score(table, none),
        crps_normal(nothing, nothing, nothing),
        crps_sample(table, nothing),
    ):
        assert found.shape == (0,)


ONE, PAIR = np.array([1.0]), np.array([[1.0, 2.0]])


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: pinball_loss(LEVELS, PAIR, ONE), "levels has shape"),
        (lambda: pinball_loss(np.array([0.5, 1.0]), PAIR, ONE), "levels holds 1.0"),
        (lambda: pinball_loss(np.array([0.0, 0.5]), PAIR, ONE), "levels holds 0.0"),
        (lambda: pinball_loss(np.array([0.5, NAN]), PAIR, ONE), "levels holds nan"),
        (lambda: pinball_loss(np.full(2, 0.5), PAIR[0], ONE), "quantiles has shape"),
        (
            lambda: pinball_loss(np.full(2, 0.5), PAIR * NAN, ONE),
            "quantiles holds a row of NaN",
        ),
        (lambda: pinball_loss(np.full(2, 0.5), PAIR * math.inf, ONE), "quantiles holds inf"),
        (lambda: pinball_loss(np.full(2, 0.5), PAIR, ONE * NAN), "outcomes holds nan"),
        (lambda: pinball_loss(np.full(2, 0.5), PAIR, PAIR[0]), "outcomes has length 2"),
        (lambda: interval_score(ONE, 0 * ONE, ONE, ONE / 2), "low holds 1.0"),
        (lambda: interval_score(ONE, ONE, ONE, ONE), "coverage holds 1.0"),
        (lambda: interval_score(ONE, ONE, ONE, -ONE), "coverage holds -1.0"),
        (lambda: interval_score(ONE, ONE, ONE, ONE * NAN), "coverage holds nan"),
        (lambda: interval_score(ONE, math.inf * ONE, ONE, ONE / 2), "high holds inf"),
        (lambda: interval_score(PAIR, PAIR, PAIR, PAIR), "low has shape"),
        (lambda: coverage(ONE, 0 * ONE, ONE), "low holds 1.0"),
        (lambda: coverage(ONE, ONE, PAIR[0]), "outcomes has length 2"),
        (lambda: crps_normal(ONE, -ONE, ONE), "deviation holds -1.0"),
        (lambda: crps_normal(ONE * NAN, ONE, ONE), "mean holds nan"),
        (lambda: crps_sample(ONE, ONE), "samples has shape"),
        (lambda: crps_sample(PAIR * NAN, ONE), "samples holds a row of NaN"),
    ],
)
def test_wrong_numbers_are_named(call, message):
    with pytest.raises(ValueError, match=message):
        call()


@pytest.mark.parametrize(
    ("stated", "category", "message"),
    [
        ([[0.5, 0.4]], [0], "sum of probabilities holds 0.9"),
        ([[0.5, 0.500002]], [0], "sum of probabilities"),
        ([[0.2, NAN, 0.8]], [0], "probabilities holds 0.8, must not stand behind a NaN"),
        ([[1.5, -0.5]], [0], "probabilities holds 1.5"),
        ([[0.5, 0.5]], [2], "category holds 2"),
        ([[0.5, 0.5, NAN]], [2], "category holds 2"),
        ([[0.5, 0.5]], [-1], "category holds -1"),
        ([[0.5, 0.5]], [0.0], "category has dtype float64"),
        ([[0.5, 0.5]], [0, 1], "category has shape"),
    ],
)
def test_wrong_categories_are_named(stated, category, message):
    with pytest.raises(ValueError, match=message):
        ranked_probability_score(np.array(stated), np.array(category))
