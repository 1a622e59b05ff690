"""Published values of proportions, exact tails, probability scores and first passages.

Each check names its source. "From memory" marks a printed value that was recalled rather than
read again; all of them were recomputed when they were entered.
"""

import math
from fractions import Fraction
from itertools import product

import numpy as np
import pytest
from scipy import stats

from foresaid.chance.passage import (
    MONITORING_BETA,
    ends_above,
    monitoring_shift,
    stays_between,
    touches_above,
)
from foresaid.score.poisson_binomial import (
    poisson_binomial_moments,
    poisson_binomial_pmf,
    poisson_binomial_tails,
)
from foresaid.score.probability import brier_score, brier_score_band, log_score
from foresaid.score.proportions import (
    binomial_tails,
    clopper_pearson_interval,
    wilson_interval,
)

FOUR_PLACES = 0.5e-4 + 1e-12


# R. G. Newcombe (1998). Two-sided confidence intervals for the single proportion: comparison of
# seven methods. Statistics in Medicine 17, 857-872, Table I: method 3 (score) and method 5
# (exact; from memory). The four cases at 95 %.


@pytest.mark.parametrize(
    ("hits", "trials", "low", "high"),
    [
        (81, 263, 0.2553, 0.3662),
        (15, 148, 0.0624, 0.1605),
        (0, 20, 0.0, 0.1611),
        (1, 29, 0.0061, 0.1718),
    ],
)
def test_newcombe_score_method(hits, trials, low, high):
    found = wilson_interval(hits, trials)
    assert (found.low, found.high) == pytest.approx((low, high), abs=FOUR_PLACES)


@pytest.mark.parametrize(
    ("hits", "trials", "low", "high"),
    [
        (81, 263, 0.2527, 0.3676),
        (15, 148, 0.0578, 0.1617),
        (0, 20, 0.0, 0.1684),
        (1, 29, 0.0009, 0.1776),
    ],
)
def test_newcombe_exact_method(hits, trials, low, high):
    found = clopper_pearson_interval(hits, trials)
    assert (found.low, found.high) == pytest.approx((low, high), abs=FOUR_PLACES)


def test_handbook_exact_interval():
    """NIST/SEMATECH e-Handbook of Statistical Methods, 7.2.4.2: 4 of 20 at 90 %.

    The printed bounds are from memory; the upper one, 0.401029, is a unit of the last place
    above the exact value.
    """
    found = clopper_pearson_interval(4, 20, level=0.90)
    assert found.low == pytest.approx(0.071354, abs=0.5e-6)
    assert found.high == pytest.approx(0.401029, abs=1.5e-6)


# W. J. Conover (1971). Practical Nonparametric Statistics, as the example of R's binom.test
# gives it: 682 of 925 against 3/4, p 0.3825, 95 % interval 0.7076683 to 0.7654066.


def test_conover_interval():
    found = clopper_pearson_interval(682, 925)
    assert (found.low, found.high) == pytest.approx((0.7076683, 0.7654066), abs=0.6e-7)


def test_conover_two_sided_p():
    """Both tails of counts no more likely than the observed one."""
    counts = np.arange(926)
    pmf = stats.binom.pmf(counts, 925, 0.75)
    mirror = counts[(counts > 694) & (pmf <= pmf[682])][0]
    lower = binomial_tails(682, 925, chance=0.75).lower
    upper = binomial_tails(int(mirror), 925, chance=0.75).upper
    assert lower + upper == pytest.approx(0.3825, abs=FOUR_PLACES)


def test_basel_exceptions():
    """Basel Committee on Banking Supervision (January 1996). Supervisory framework for the use
    of backtesting, Table 2: cumulative probability of 0 to 10 exceptions in 250 days at 1 %.

    Per cent, two places, from memory.
    """
    printed = [8.11, 28.58, 54.32, 75.81, 89.22, 95.88, 98.63, 99.60, 99.89, 99.97, 99.99]
    found = [100 * binomial_tails(k, 250, chance=0.01).lower for k in range(11)]
    assert found == pytest.approx(printed, abs=0.5e-2 + 1e-9)


# The Poisson-binomial distribution of five chances, as exact fractions of whole-number
# arithmetic; R's package PoissonBinomial agrees.

FIVE = np.array([0.1, 0.2, 0.3, 0.4, 0.5])
FIVE_PMF = [
    Fraction(189, 1250),
    Fraction(1857, 5000),
    Fraction(1637, 5000),
    Fraction(637, 5000),
    Fraction(107, 5000),
    Fraction(3, 2500),
]


def test_five_chances():
    assert sum(FIVE_PMF) == 1
    assert poisson_binomial_pmf(FIVE) == pytest.approx([float(p) for p in FIVE_PMF], rel=1e-14)
    cumulative = [poisson_binomial_tails(k, FIVE).lower for k in range(6)]
    assert cumulative == pytest.approx([0.1512, 0.5226, 0.8500, 0.9774, 0.9988, 1], rel=1e-14)
    upper = [poisson_binomial_tails(k, FIVE).upper for k in range(6)]
    assert upper == pytest.approx([1, 0.8488, 0.4774, 0.15, 0.0226, 0.0012], rel=1e-13)
    assert poisson_binomial_moments(FIVE) == pytest.approx((1.5, 0.95))


# G. W. Brier (1950). Verification of forecasts expressed in terms of probability. Monthly
# Weather Review 78, 1-3, Table 1: ten rain probabilities, rain on occasions 2, 3 and 4 (from
# memory). His score, 0.19, sums over rain and no rain; the half form is 0.095.

RAIN = np.array([0.7, 0.9, 0.8, 0.4, 0.2, 0, 0, 0, 0, 0.1])
RAINED = np.isin(np.arange(1, 11), [2, 3, 4])


def test_brier_table():
    assert 2 * brier_score(RAIN, RAINED) == pytest.approx(0.19, rel=1e-14)
    assert brier_score(RAIN, RAINED) == pytest.approx(0.095, rel=1e-14)
    assert brier_score_band(RAIN, RAIN, RAINED) == pytest.approx(0.095, rel=1e-14)


def test_brier_example_of_scikit_learn():
    """The example in the help of scikit-learn's brier_score_loss: 0.0375 (sum form 0.075)."""
    stated, outcomes = np.array([0.1, 0.9, 0.8, 0.3]), np.array([0, 1, 1, 0], dtype=bool)
    assert brier_score(stated, outcomes) == pytest.approx(0.0375, rel=1e-14)


def test_log_loss_example_of_scikit_learn():
    """The example in the help of scikit-learn's log_loss: 0.21616."""
    stated, outcomes = np.array([0.1, 0.9, 0.8, 0.35]), np.array([0, 1, 1, 0], dtype=bool)
    assert log_score(stated, outcomes) == pytest.approx(0.21616, abs=0.5e-5)


# First passages.


def test_monitoring_constant():
    """M. Broadie, P. Glasserman, S. Kou (1997). A continuity correction for discrete barrier
    options. Mathematical Finance 7, 325-348: beta = -zeta(1/2) / sqrt(2 pi) = 0.5826.
    """
    assert pytest.approx(0.5826, abs=FOUR_PLACES) == MONITORING_BETA
    assert monitoring_shift(np.array([25.0])) == pytest.approx(0.5826 / 5, abs=FOUR_PLACES / 5)


def test_touching_a_level_one_deviation_away():
    """The reflection principle: 2 (1 - Phi(1)) = 0.3173105, twice the chance to end there."""
    one = np.array([1.0])
    assert touches_above(one) == pytest.approx(0.3173105, abs=0.5e-7)
    assert touches_above(one) == pytest.approx(math.erfc(1 / math.sqrt(2)), rel=1e-14)
    assert touches_above(one) == pytest.approx(2 * ends_above(one))


def test_reflection_by_all_paths_of_ten_steps():
    """Of 1,024 paths of ten steps of one, 176 end at 4 or higher, 56 higher, 232 touch 4."""
    paths = np.cumsum(list(product([-1, 1], repeat=10)), axis=1)
    at_or_above, above = np.sum(paths[:, -1] >= 4), np.sum(paths[:, -1] > 4)
    touches = np.sum(paths.max(axis=1) >= 4)
    assert (at_or_above, above, touches) == (176, 56, 232)
    assert touches == at_or_above + above
    # ends of the walk are binomial: 4 or higher is 7 or more steps up
    assert 1024 * binomial_tails(7, 10).upper == pytest.approx(176, rel=1e-13)
    assert 1024 * binomial_tails(8, 10).upper == pytest.approx(56, rel=1e-13)


@pytest.mark.parametrize("level", [30, 100, 220])
def test_reflection_in_the_limit_of_many_steps(level):
    """A walk of n steps touches a level with the sum of two binomial tails, which the normal
    walk's closed form approaches: here 10,000 steps, a hundred to the standard deviation.
    """
    steps = 10_000
    at_or_above = binomial_tails((steps + level) // 2, steps).upper
    above = binomial_tails((steps + level) // 2 + 1, steps).upper
    assert touches_above(np.array([level / 100])) == pytest.approx(
        at_or_above + above, rel=1e-3
    )


def test_staying_within_one_deviation():
    """W. Feller (1971), volume II, X.5: the first wave is (4 / pi) exp(-pi^2 / 8)."""
    waves = [
        4 / math.pi * (-1) ** k / (2 * k + 1) * math.exp(-(((2 * k + 1) * math.pi) ** 2) / 8)
        for k in range(6)
    ]
    found = stays_between(np.array([-1.0]), np.array([1.0]))
    assert found == pytest.approx(sum(waves), rel=1e-13)
