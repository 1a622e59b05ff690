import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from foresaid.score.poisson_binomial import poisson_binomial_tails
from foresaid.score.power import (
    MOST_CALLS,
    achieved_power,
    best_possible_p,
    calls_needed,
    detectable_skill,
)
from foresaid.score.proportions import binomial_tails

SHARES = st.floats(0.02, 0.98)
LEVELS = st.sampled_from([0.001, 0.01, 0.05, 0.2])


def slow_hits_needed(n, chance, level):
    """The smallest count whose tail, added up from its far end, is within the level."""
    tail, hits = 0.0, n + 1
    for count in range(n, -1, -1):
        tail += math.comb(n, count) * chance**count * (1 - chance) ** (n - count)
        if tail > level * (1 + 1e-12):
            break
        hits = count
    return hits


def slow_tail(hits, n, share):
    return sum(
        math.comb(n, count) * share**count * (1 - share) ** (n - count)
        for count in range(hits, n + 1)
    )


def slow_calls_needed(chance, skill, level, power, longest):
    """One more than the last length that misses the power, looking at every length."""
    lengths = np.arange(1, longest + 1)
    hits = stats.binom.isf(level, lengths, chance) + 1  # isf: tail beyond it within the level
    missed = stats.binom.sf(hits - 1, lengths, skill) < power
    assert not missed[-longest // 10 :].any()
    return int(lengths[missed].max(initial=0)) + 1


# Against slow recomputations


@pytest.mark.parametrize("chance", [0.07, 0.3, 0.5, 0.81])
@pytest.mark.parametrize("level", [0.05, 0.01, 0.2])
def test_power_in_plain_loops(chance, level):
    skill = chance + 0.1
    for n in range(46):
        found = achieved_power(n, chance, skill, level=level)
        hits = slow_hits_needed(n, chance, level)
        assert found.hits_needed == (hits if hits <= n else None)
        assert found.power == pytest.approx(slow_tail(hits, n, skill), rel=1e-10)
        assert found.attained_level == pytest.approx(slow_tail(hits, n, chance), rel=1e-10)
        assert found.independent == n


@pytest.mark.parametrize(
    ("chance", "skill", "level", "power", "longest"),
    [
        (0.5, 0.6, 0.05, 0.8, 2_000),
        (0.5, 0.52, 0.05, 0.8, 12_000),
        (0.5, 0.55, 0.01, 0.9, 5_000),
        (0.6, 0.65, 0.05, 0.8, 4_000),
        (0.1, 0.2, 0.05, 0.9, 1_000),
        (0.01, 0.03, 0.05, 0.8, 3_000),
        (0.9, 0.97, 0.025, 0.95, 2_000),
        (0.3, 0.9, 0.05, 0.8, 200),
        (0.5, 1.0, 0.05, 0.8, 100),
        (0.2, 0.4, 0.001, 0.5, 500),
    ],
)
def test_calls_needed_looking_at_every_length(chance, skill, level, power, longest):
    found = calls_needed(chance, skill, level=level, power=power)
    assert found == slow_calls_needed(chance, skill, level, power, longest)


@settings(deadline=None, max_examples=50)
@given(chance=st.floats(0.02, 0.9), edge=st.floats(0.15, 0.9), level=LEVELS)
def test_the_power_is_missed_just_before_and_reached_ever_after(chance, edge, level):
    skill = chance + edge * (1 - chance)
    found = calls_needed(chance, skill, level=level)
    assert achieved_power(found - 1, chance, skill, level=level).power < 0.8
    for n in (*range(found, found + 12), found + 29, 2 * found):
        assert achieved_power(n, chance, skill, level=level).power >= 0.8 * (1 - 1e-9)


def test_the_power_may_be_reached_before_it_stays():
    needed = calls_needed(0.5, 0.6)
    reached = [achieved_power(n, 0.5, 0.6).power >= 0.8 for n in range(needed + 100)]
    assert reached.index(True) == 158
    assert needed == 169
    assert not reached[needed - 1]
    assert all(reached[needed:])


@pytest.mark.parametrize(("chance", "skill"), [(0.5, 0.52), (0.5, 0.505), (0.6, 0.61)])
def test_long_records_come_near_the_normal_approximation(chance, skill):
    widths = stats.norm.isf(0.05) * math.sqrt(chance * (1 - chance))
    widths += stats.norm.isf(0.2) * math.sqrt(skill * (1 - skill))
    approximate = (widths / (skill - chance)) ** 2
    assert calls_needed(chance, skill) == pytest.approx(approximate, rel=0.03)


@pytest.mark.parametrize("n", [0, 4, 5, 20, 100, 1_000])
@pytest.mark.parametrize("chance", [0.1, 0.5, 0.7])
def test_detectable_skill_by_search(n, chance):
    found = detectable_skill(n, chance)
    hits = (
        slow_hits_needed(n, chance, 0.05)
        if n <= 100
        else int(stats.binom.isf(0.05, n, chance)) + 1
    )
    if hits > n:
        assert found is None
        return
    low, high = 0.0, 1.0
    for _ in range(60):
        middle = (low + high) / 2
        low, high = (
            (middle, high) if stats.binom.sf(hits - 1, n, middle) < 0.8 else (low, middle)
        )
    assert found == pytest.approx(high, rel=1e-9)


# How the answers hang together


@given(n=st.integers(1, 400), chance=SHARES, level=LEVELS, power=st.floats(0.25, 0.99))
def test_the_detectable_skill_is_found_with_the_power(n, chance, level, power):
    skill = detectable_skill(n, chance, level=level, power=power)
    if skill is None:
        assert achieved_power(n, chance, 1.0, level=level).power == 0
    else:
        assert skill > chance
        found = achieved_power(n, chance, skill, level=level)
        assert found.power == pytest.approx(power, rel=1e-9)


@given(
    n=st.integers(0, 400), chance=SHARES, skill=SHARES, level=LEVELS, field=st.integers(1, 50)
)
def test_a_field_shares_the_level(n, chance, skill, level, field):
    found = achieved_power(n, chance, skill, level=level, field=field)
    assert found == achieved_power(n, chance, skill, level=level / field)
    assert found.attained_level <= level / field * (1 + 1e-9)
    assert found.power <= achieved_power(n, chance, skill, level=level).power
    if skill >= chance:
        assert found.power >= found.attained_level * (1 - 1e-9)
    else:
        assert found.power <= found.attained_level * (1 + 1e-9)


def test_a_larger_field_needs_a_longer_record():
    needed = [calls_needed(0.5, 0.6, field=field) for field in (1, 2, 10, 100)]
    assert needed == sorted(set(needed))
    assert calls_needed(0.5, 0.6, field=10) == calls_needed(0.5, 0.6, level=0.005)


@pytest.mark.parametrize("overlap", [1.0, 1.1, 1.25, 2.0, 3.7, 20.0, 1 / 0.3])
def test_calls_that_share_a_window_count_as_one(overlap):
    alone = calls_needed(0.5, 0.65)
    needed = calls_needed(0.5, 0.65, overlap=overlap)
    assert needed == math.ceil(round(alone * overlap, 9))
    assert achieved_power(needed, 0.5, 0.65, overlap=overlap).independent == alone
    assert achieved_power(needed - 1, 0.5, 0.65, overlap=overlap).independent == alone - 1


@given(length=st.integers(1, 10**6), overlap=st.floats(1, 50))
def test_rounding_never_takes_a_call_away(length, overlap):
    calls = math.ceil(length * overlap * (1 - 1e-12))
    assert achieved_power(calls, 0.5, 0.5, overlap=overlap).independent >= length


def test_rounding_never_adds_a_call():
    assert 172 / 169 * 169 > 172
    assert calls_needed(0.5, 0.6, overlap=172 / 169) == 172


def test_overlap_lowers_the_detectable_skill():
    assert detectable_skill(100, 0.5, overlap=5) == detectable_skill(20, 0.5)
    assert detectable_skill(104, 0.5, overlap=5) == detectable_skill(20, 0.5)


def test_a_perfect_record_passes_if_its_best_p_does():
    for n in range(1, 40):
        best = best_possible_p(np.full(n, 0.6))
        found = achieved_power(n, 0.6, 1.0)
        assert (found.hits_needed is not None) == (best <= 0.05)


@given(chances=st.lists(st.floats(0, 1), max_size=30))
def test_the_best_p_is_the_tail_of_a_perfect_record(chances):
    p = np.array(chances)
    product = math.prod(chances)
    assert best_possible_p(p) == pytest.approx(product, rel=1e-12, abs=1e-300)
    tail = poisson_binomial_tails(len(p), p).upper
    assert best_possible_p(p) == pytest.approx(tail, rel=1e-11, abs=1e-280)


def test_the_mean_chance_is_on_the_safe_side():
    """Chances of their own spread hits less than their mean does, so the test stays within its
    level and finds no less (W. Hoeffding 1956, Annals of Mathematical Statistics 27, 713-721).
    """
    rng = np.random.default_rng(5)
    for n in (30, 80):
        chances = rng.uniform(0.2, 0.7, n)
        skills = chances + 0.28
        found = achieved_power(n, chances.mean(), skills.mean())
        hits = found.hits_needed
        assert chances.sum() + 1 <= hits <= skills.sum()  # what the theorem asks for
        assert poisson_binomial_tails(hits, chances).upper <= found.attained_level
        assert poisson_binomial_tails(hits, skills).upper >= found.power


def test_a_tail_equal_to_the_level_passes():
    """Five of five against a coin: exactly 1/32."""
    assert achieved_power(5, 0.5, 0.9, level=1 / 32).hits_needed == 5
    assert achieved_power(5, 0.5, 0.9, level=1 / 32 - 1e-9).hits_needed is None
    assert achieved_power(3, 0.1, 0.9, level=0.001).hits_needed == 3


def test_the_test_is_that_of_the_tails():
    found = achieved_power(137, 0.4, 0.55)
    assert binomial_tails(found.hits_needed, 137, chance=0.4).upper == found.attained_level
    assert binomial_tails(found.hits_needed - 1, 137, chance=0.4).upper > 0.05


# Little data and certainties


@pytest.mark.parametrize(("chance", "skill"), [(0.5, 0.5), (0.5, 0.3), (1.0, 1.0), (0.0, 0.0)])
def test_no_record_shows_what_is_not_there(chance, skill):
    assert calls_needed(chance, skill) is None


def test_no_longer_record_is_thought_of():
    assert calls_needed(0.5, 0.501) is None
    assert calls_needed(0.5, 0.5 + 1e-12) is None
    assert calls_needed(0.0, 5e-324) is None
    assert calls_needed(0.5, 0.5015) < MOST_CALLS


def test_what_never_happens_by_chance_needs_happen_once():
    assert calls_needed(0.0, 1.0) == 1
    assert calls_needed(0.0, 0.1) == math.ceil(math.log(0.2) / math.log(0.9))
    assert achieved_power(3, 0.0, 0.5).power == pytest.approx(0.875)
    assert detectable_skill(1, 0.0) == pytest.approx(0.8)


def test_what_always_happens_by_chance_shows_nothing():
    assert achieved_power(50, 1.0, 1.0).hits_needed is None
    assert detectable_skill(50, 1.0) is None


def test_no_call_shows_nothing():
    assert best_possible_p(np.array([])) == 1.0
    found = achieved_power(0, 0.5, 0.9)
    assert (found.power, found.attained_level, found.hits_needed) == (0.0, 0.0, None)
    assert achieved_power(1, 0.01, 0.9, overlap=2).independent == 0
    assert detectable_skill(0, 0.5) is None


# Wrong numbers


def needed(**changed):
    return calls_needed(**({"chance": 0.5, "skill": 0.6} | changed))


def achieved(**changed):
    return achieved_power(**({"n": 20, "chance": 0.5, "skill": 0.6} | changed))


def detectable(**changed):
    return detectable_skill(**({"n": 20, "chance": 0.5} | changed))


FAULTS = {
    "chance": [-0.1, 1.1, math.nan],
    "level": [0, 1, 5, math.nan],
    "field": [0, -1, 1.5, math.nan, math.inf],
    "overlap": [0.9, 0, -1, math.nan, math.inf],
    "n": [-1, 2.5, math.nan, math.inf],
    "skill": [-0.1, 1.1, math.nan],
    "power": [0.05, 0.01, 1, math.nan],
}
TAKES = {
    needed: ("chance", "skill", "level", "power", "field", "overlap"),
    achieved: ("n", "chance", "skill", "level", "field", "overlap"),
    detectable: ("n", "chance", "level", "power", "field", "overlap"),
}


@pytest.mark.parametrize(
    ("function", "name", "value"),
    [
        (function, name, value)
        for function, names in TAKES.items()
        for name in names
        for value in FAULTS[name]
    ],
)
def test_impossible_arguments_are_named(function, name, value):
    with pytest.raises(ValueError, match=f"{name}={value}"):
        function(**{name: value})


@pytest.mark.parametrize(
    ("chances", "named"),
    [([0.5, 1.2], "chances holds 1.2"), ([math.nan], "chances holds nan"), ([[0.5]], "shape")],
)
def test_impossible_chances_are_named(chances, named):
    with pytest.raises(ValueError, match=named):
        best_possible_p(np.array(chances))
