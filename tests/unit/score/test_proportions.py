import math
from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats
from statsmodels.stats.proportion import proportion_confint

from foresaid.score.proportions import (
    binomial_tails,
    clopper_pearson_interval,
    jeffreys_interval,
    wilson_interval,
)

INTERVALS = [wilson_interval, clopper_pearson_interval, jeffreys_interval]
COUNTS = st.integers(1, 5_000).flatmap(lambda n: st.tuples(st.integers(0, n), st.just(n)))
every_interval = pytest.mark.parametrize("interval", INTERVALS)


def exact_tails(hits, trials, chance):
    """Both tails as fractions, from binomial coefficients."""
    p = Fraction(chance)
    weights = [math.comb(trials, k) * p**k * (1 - p) ** (trials - k) for k in range(trials + 1)]
    return sum(weights[hits:]), sum(weights[: hits + 1])


@pytest.mark.parametrize(
    ("interval", "method"),
    [
        (wilson_interval, "wilson"),
        (clopper_pearson_interval, "beta"),
        (jeffreys_interval, "jeffreys"),
    ],
)
@pytest.mark.parametrize("level", [0.5, 0.9, 0.95, 0.999])
@pytest.mark.parametrize(("hits", "trials"), [(1, 2), (7, 10), (1, 400), (399, 400), (55, 60)])
def test_statsmodels_gives_the_same_bounds(interval, method, level, hits, trials):
    low, high = proportion_confint(hits, trials, alpha=1 - level, method=method)
    found = interval(hits, trials, level=level)
    assert (found.low, found.high) == pytest.approx((low, high), rel=1e-11)
    assert found.level == level


@pytest.mark.parametrize(("hits", "trials"), [(0, 1), (0, 30), (30, 30), (3, 17), (640, 900)])
@pytest.mark.parametrize(
    ("interval", "method"), [(wilson_interval, "wilson"), (clopper_pearson_interval, "exact")]
)
def test_scipy_gives_the_same_bounds(interval, method, hits, trials):
    theirs = stats.binomtest(hits, trials).proportion_ci(0.9, method=method)
    found = interval(hits, trials, level=0.9)
    assert (found.low, found.high) == pytest.approx((theirs.low, theirs.high), abs=1e-9)


def test_wilson_bounds_solve_their_equation():
    z = stats.norm.isf(0.025)
    found = wilson_interval(3, 1_000_000)
    for bound in (found.low, found.high):
        distance = (3e-6 - bound) ** 2
        assert distance == pytest.approx(z**2 * bound * (1 - bound) / 1e6, rel=1e-10)


def test_clopper_pearson_bounds_leave_half_a_tail_each():
    found = clopper_pearson_interval(17, 60, level=0.8)
    assert binomial_tails(17, 60, chance=found.low).upper == pytest.approx(0.1, rel=1e-12)
    assert binomial_tails(17, 60, chance=found.high).lower == pytest.approx(0.1, rel=1e-12)


def test_jeffreys_bounds_are_posterior_quantiles_except_at_an_empty_side():
    found = jeffreys_interval(4, 9, level=0.9)
    assert stats.beta.cdf(found.low, 4.5, 5.5) == pytest.approx(0.05)
    assert stats.beta.sf(found.high, 4.5, 5.5) == pytest.approx(0.05)
    assert jeffreys_interval(0, 9).low == 0.0
    assert jeffreys_interval(9, 9).high == 1.0


@every_interval
@given(counts=COUNTS, level=st.floats(0.01, 0.9999))
def test_swapping_hits_and_misses_mirrors_an_interval(interval, counts, level):
    hits, trials = counts
    found = interval(hits, trials, level=level)
    mirror = interval(trials - hits, trials, level=level)
    assert found.low == pytest.approx(1 - mirror.high, abs=1e-15)
    assert found.high == pytest.approx(1 - mirror.low, abs=1e-15)


@every_interval
@given(counts=COUNTS)
def test_a_wider_interval_holds_a_narrower_one_and_the_rate(interval, counts):
    hits, trials = counts
    narrow, wide = interval(hits, trials, level=0.95), interval(hits, trials, level=0.99)
    assert 0 <= wide.low <= narrow.low <= hits / trials + 1e-15
    assert hits / trials - 1e-15 <= narrow.high <= wide.high <= 1


@every_interval
def test_levels_next_to_their_bounds_still_give_numbers(interval):
    for hits in (0, 5, 10):
        point = interval(hits, 10, level=1e-300)
        whole = interval(hits, 10, level=1 - 2**-53)
        assert (
            0 <= whole.low <= point.low <= point.high + 1e-12 <= whole.high + 1e-12 <= 1 + 1e-12
        )


@pytest.mark.slow
@pytest.mark.parametrize("rate", [0.05, 0.3, 0.5, 0.81])
def test_coverage(rate):
    """Exact coverage at 60 trials: never below nominal for the exact interval."""
    covered = dict.fromkeys(INTERVALS, 0.0)
    for hits in range(61):
        for interval in INTERVALS:
            found = interval(hits, 60)
            if found.low <= rate <= found.high:
                covered[interval] += stats.binom.pmf(hits, 60, rate)
    assert covered[clopper_pearson_interval] >= 0.95
    assert covered[wilson_interval] == pytest.approx(0.95, abs=0.03)
    assert covered[jeffreys_interval] == pytest.approx(0.95, abs=0.03)


@pytest.mark.parametrize("chance", [0.5, 0.3, 0.0625, 0.984375])
def test_tails_are_exact_far_out(chance):
    trials = 120
    for hits in range(0, trials + 1, 6):
        upper, lower = exact_tails(hits, trials, chance)
        found = binomial_tails(hits, trials, chance=chance)
        assert found.upper == pytest.approx(float(upper), rel=1e-12)
        assert found.lower == pytest.approx(float(lower), rel=1e-12)


def test_scipy_gives_the_same_tails():
    for hits, trials, chance in [(0, 1, 0.5), (61, 100, 0.5), (3, 40, 0.2), (900, 950, 0.9)]:
        found = binomial_tails(hits, trials, chance=chance)
        upper = stats.binomtest(hits, trials, chance, alternative="greater").pvalue
        lower = stats.binomtest(hits, trials, chance, alternative="less").pvalue
        assert (found.upper, found.lower) == pytest.approx((upper, lower), rel=1e-11)


def test_the_coin_is_the_default():
    assert binomial_tails(10, 10).upper == pytest.approx(2**-10, rel=1e-14)
    assert binomial_tails(10, 10).lower == 1.0


@pytest.mark.parametrize(
    ("hits", "chance", "upper", "lower"),
    [(0, 0.0, 1, 1), (1, 0.0, 0, 1), (5, 0.0, 0, 1), (5, 1.0, 1, 1), (4, 1.0, 1, 0)],
)
def test_certain_chances(hits, chance, upper, lower):
    found = binomial_tails(hits, 5, chance=chance)
    assert (found.upper, found.lower) == (upper, lower)


@given(counts=COUNTS, chance=st.floats(0, 1))
def test_tails_are_chances(counts, chance):
    found = binomial_tails(*counts, chance=chance)
    assert 0 <= found.upper <= 1
    assert 0 <= found.lower <= 1
    assert found.upper + found.lower >= 1 - 1e-12


@given(counts=COUNTS, chance=st.floats(1e-9, 1 - 1e-9))
def test_both_tails_include_the_count(counts, chance):
    hits, trials = counts
    found = binomial_tails(hits, trials, chance=chance)
    own = stats.binom.pmf(hits, trials, chance)
    assert found.upper + found.lower == pytest.approx(1 + own, abs=1e-11)


@pytest.mark.parametrize("function", [*INTERVALS, binomial_tails])
@pytest.mark.parametrize(
    ("hits", "trials", "named"),
    [
        (0, 0, "trials=0"),
        (1, 2.5, "trials=2.5"),
        (1, math.nan, "trials=nan"),
        (1, math.inf, "trials=inf"),
        (-1, 3, "hits=-1"),
        (4, 3, "hits=4"),
        (0.5, 3, "hits=0.5"),
        (math.nan, 3, "hits=nan"),
    ],
)
def test_impossible_counts_are_named(function, hits, trials, named):
    with pytest.raises(ValueError, match=named):
        function(hits, trials)


@every_interval
@pytest.mark.parametrize("level", [0, 1, -0.5, 95, math.nan])
def test_impossible_levels_are_named(interval, level):
    with pytest.raises(ValueError, match=f"level={level}"):
        interval(1, 3, level=level)


@pytest.mark.parametrize("chance", [-0.01, 1.01, math.nan])
def test_impossible_chances_are_named(chance):
    with pytest.raises(ValueError, match=f"chance={chance}"):
        binomial_tails(1, 3, chance=chance)
