import math
from decimal import Decimal, localcontext
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from foresaid.score.poisson_binomial import (
    poisson_binomial_moments,
    poisson_binomial_pmf,
    poisson_binomial_tails,
)
from foresaid.score.proportions import binomial_tails

PARTS = 1024  # chances in the exact tests are whole multiples of 1/1024
CHANCES = st.lists(st.floats(0, 1), max_size=150).map(np.array)


def exact_weights(parts):
    """Numerators of the distribution over 1024^n, in whole numbers."""
    weights = [1]
    for own in parts:
        shifted = [0, *(weight * own for weight in weights)]
        kept = [*(weight * (PARTS - own) for weight in weights), 0]
        weights = [a + b for a, b in zip(shifted, kept, strict=True)]
    return weights


def relative_error(found, exact):
    return abs(float(Fraction(found) / exact - 1))


def binomial_in_decimals(trials, chance):
    """The binomial distribution with fifty digits, by the ratio of neighbours."""
    p = Decimal(chance)
    terms = [(1 - p) ** trials]
    for k in range(trials):
        terms.append(terms[-1] * (trials - k) * p / ((k + 1) * (1 - p)))
    return terms


@pytest.mark.parametrize(
    ("low", "high", "n"), [(300, 724, 400), (1, 60, 400), (990, 1024, 300), (0, 1025, 257)]
)
def test_every_tail_down_to_1e_minus_100_is_exact(low, high, n):
    parts = np.random.default_rng(n).integers(low, high, n)
    weights, whole = exact_weights(parts.tolist()), PARTS**n
    upper, lower, checked = whole, 0, 0
    for hits in range(n + 1):
        lower += weights[hits]
        if hits % 7 == 0:
            found = poisson_binomial_tails(hits, parts / PARTS)
            for tail, exact in ((found.upper, upper), (found.lower, lower)):
                if exact * 10**100 > whole:
                    assert relative_error(tail, Fraction(exact, whole)) < 1e-12
                    checked += 1
        upper -= weights[hits]
    assert checked > n / 7


def test_far_tails_of_6600_calls_of_two_kinds():
    """One kind's terms times the other kind's tail, with fifty digits."""
    few, many = 2_400, 4_200
    chances = np.repeat([0.3125, 0.59375], [few, many])
    with localcontext(prec=50):
        first = binomial_in_decimals(few, chances[0])
        second = binomial_in_decimals(many, chances[-1])
        tail = [Decimal(0)] * (many + 2)
        for k in range(many, -1, -1):
            tail[k] = tail[k + 1] + second[k]
        for hits in (3_260, 3_400, 3_700, 4_060):
            exact = sum(
                (term * tail[min(max(hits - k, 0), many + 1)] for k, term in enumerate(first)),
                Decimal(0),
            )
            found = poisson_binomial_tails(hits, chances).upper
            assert abs(float(Decimal(found) / exact - 1)) < 1e-12
    assert 1e-105 < found < 1e-95


def test_equal_chances_are_a_binomial():
    for hits in (3_100, 3_300, 3_500, 4_000):
        found = poisson_binomial_tails(hits, np.full(6_600, 0.5))
        binomial = binomial_tails(hits, 6_600)
        assert found.upper == pytest.approx(binomial.upper, rel=1e-11)
        assert found.lower == pytest.approx(binomial.lower, rel=1e-11)


def test_scipy_gives_the_same_probabilities():
    chances = np.random.default_rng(3).uniform(0.05, 0.9, 90)
    theirs = stats.poisson_binom.pmf(np.arange(91), chances)
    assert poisson_binomial_pmf(chances) == pytest.approx(theirs, abs=1e-14)
    tails = poisson_binomial_tails(50, chances)
    assert tails.upper == pytest.approx(stats.poisson_binom.sf(49, chances), abs=1e-13)
    assert tails.lower == pytest.approx(stats.poisson_binom.cdf(50, chances), abs=1e-13)


@pytest.mark.parametrize("n", [1, 2, 63, 64, 65, 127, 128, 129, 193, 700])
def test_no_size_is_special(n):
    chances = np.random.default_rng(n).uniform(0, 1, n)
    plain = np.array([1.0])
    for chance in chances:
        plain = np.append(plain, 0.0) * (1 - chance) + np.append(0.0, plain) * chance
    found = poisson_binomial_pmf(chances)
    assert found.shape == (n + 1,)
    seen = plain > 1e-200
    assert found[seen] == pytest.approx(plain[seen], rel=1e-12)
    assert (found[~seen] < 1.1e-200).all()


def test_no_calls_never_hit():
    assert poisson_binomial_pmf(np.array([])).tolist() == [1.0]
    tails = poisson_binomial_tails(0, np.array([]))
    assert (tails.upper, tails.lower) == (1.0, 1.0)
    assert poisson_binomial_moments(np.array([])) == (0.0, 0.0)


@pytest.mark.parametrize("n", [3, 70, 200])
def test_certain_calls_only_shift_the_count(n):
    chances = np.array([1.0] * n + [0.0] * n + [0.25])
    expected = np.zeros(2 * n + 2)
    expected[n : n + 2] = [0.75, 0.25]
    assert poisson_binomial_pmf(chances).tolist() == expected.tolist()
    assert poisson_binomial_tails(n + 1, chances).upper == 0.25
    assert poisson_binomial_tails(n + 2, chances).upper == 0.0
    assert poisson_binomial_tails(n - 1, chances).lower == 0.0


def test_a_rare_hit_is_not_lost():
    chances = np.full(1_000, 1e-30)
    assert poisson_binomial_tails(3, chances).upper == pytest.approx(
        math.comb(1_000, 3) * 1e-90, rel=1e-12
    )


@given(CHANCES)
def test_probabilities_sum_to_one_with_the_moments_in_closed_form(chances):
    pmf, counts = poisson_binomial_pmf(chances), np.arange(len(chances) + 1)
    mean, variance = poisson_binomial_moments(chances)
    assert pmf.sum() == pytest.approx(1, abs=1e-13)
    assert (pmf >= 0).all()
    assert counts @ pmf == pytest.approx(mean, rel=1e-11, abs=1e-200)
    assert (counts - mean) ** 2 @ pmf == pytest.approx(variance, rel=1e-8, abs=1e-9)


@given(CHANCES, st.randoms(use_true_random=False))
def test_the_order_of_calls_does_not_matter(chances, random):
    shuffled = chances.tolist()
    random.shuffle(shuffled)
    assert (poisson_binomial_pmf(np.array(shuffled)) == poisson_binomial_pmf(chances)).all()


@given(CHANCES, st.data())
def test_hits_against_misses(chances, data):
    hits = data.draw(st.integers(0, len(chances)))
    own = poisson_binomial_tails(hits, chances)
    other = poisson_binomial_tails(len(chances) - hits, 1.0 - chances)
    # chances below about 1e-16 vanish in 1 - chance
    assert own.upper == pytest.approx(other.lower, rel=1e-11, abs=1e-13)
    assert own.lower == pytest.approx(other.upper, rel=1e-11, abs=1e-13)
    assert 0 <= own.upper <= 1
    assert own.upper + own.lower == pytest.approx(1 + poisson_binomial_pmf(chances)[hits])


@pytest.mark.parametrize(
    ("chances", "named"),
    [([0.5, 1.5], "1.5"), ([-0.25], "-0.25"), ([math.nan, 0.5], "nan"), ([[0.5]], "shape")],
)
@pytest.mark.parametrize(
    "function",
    [poisson_binomial_pmf, poisson_binomial_moments, lambda p: poisson_binomial_tails(0, p)],
)
def test_impossible_chances_are_named(function, chances, named):
    with pytest.raises(ValueError, match=f"chances .*{named}"):
        function(np.array(chances))


@pytest.mark.parametrize("hits", [-1, 3, 0.5, math.nan])
def test_impossible_hits_are_named(hits):
    with pytest.raises(ValueError, match=f"hits={hits}"):
        poisson_binomial_tails(hits, np.array([0.5, 0.5]))
