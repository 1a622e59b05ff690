from fractions import Fraction
from math import comb

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from foresaid.score.direction import (
    DirectionTable,
    direction_table,
    henriksson_merton,
    hit_less_false_alarm,
    pesaran_timmermann,
)

counts = st.integers(0, 60)
tables = st.builds(DirectionTable, counts, counts, counts, counts)


def turned(table):
    """Return the table with rise and fall exchanged."""
    return DirectionTable(table.down_down, table.down_up, table.up_down, table.up_up)


def test_the_table_leaves_out_what_has_no_direction():
    said = np.array([1, 1, 1, -1, -1, 0, 1, -1])
    went = np.array([1, 1, -1, 1, -1, 1, 0, -1])
    assert direction_table(said, went) == DirectionTable(2, 1, 1, 2)
    assert direction_table(said[:0], went[:0]).n == 0


@pytest.mark.parametrize(
    ("said", "went", "told"),
    [
        (np.ones(2), np.ones(3), "length 2"),
        (np.array([2]), np.array([1]), "must be -1, 0 or 1"),
        (np.array([1]), np.array([0.5]), "must be -1, 0 or 1"),
        (np.ones((1, 1)), np.ones(1), "must be flat"),
    ],
)
def test_signs_that_are_none(said, went, told):
    with pytest.raises(ValueError, match=told):
        direction_table(said, went)


@settings(max_examples=300, deadline=None)
@given(tables)
def test_the_exact_test_is_fishers(table):
    found = henriksson_merton(table)
    if table.is_one_sided:
        assert found is None
        return
    square = [[table.up_up, table.up_down], [table.down_up, table.down_down]]
    assert found.upper == pytest.approx(stats.fisher_exact(square, "greater").pvalue, rel=1e-8)
    assert found.lower == pytest.approx(stats.fisher_exact(square, "less").pvalue, rel=1e-8)
    flipped = henriksson_merton(turned(table))
    assert (flipped.upper, flipped.lower) == (found.upper, found.lower)


@pytest.mark.parametrize(
    "table", [DirectionTable(900, 100, 50, 950), DirectionTable(5, 60, 70, 4)]
)
def test_far_tails_against_fractions(table):
    n, rose, said = table.n, table.up_up + table.down_up, table.up_up + table.up_down
    terms = {
        k: comb(rose, k) * comb(n - rose, said - k)
        for k in range(max(0, said + rose - n), min(said, rose) + 1)
    }
    whole = sum(terms.values())
    upper = Fraction(sum(t for k, t in terms.items() if k >= table.up_up), whole)
    lower = Fraction(sum(t for k, t in terms.items() if k <= table.up_up), whole)
    found = henriksson_merton(table)
    assert found.upper == pytest.approx(float(upper), rel=1e-14, abs=0)
    assert found.lower == pytest.approx(float(lower), rel=1e-14, abs=0)
    assert min(found.upper, found.lower) < 1e-10


@settings(max_examples=300, deadline=None)
@given(tables, st.booleans())
def test_the_statistic_by_hand(table, cross_term):
    found = pesaran_timmermann(table, cross_term=cross_term)
    if table.is_one_sided:
        assert found is None
        return
    n = Fraction(table.n)
    x, y = (table.up_up + table.up_down) / n, (table.up_up + table.down_up) / n
    star = x * y + (1 - x) * (1 - y)
    variance = star * (1 - star) / n
    variance -= ((2 * y - 1) ** 2 * x * (1 - x) + (2 * x - 1) ** 2 * y * (1 - y)) / n
    variance -= 4 * x * y * (1 - x) * (1 - y) / n**2 if cross_term else 0
    if variance <= 0:
        assert found is None or float(variance) > -1e-12
        return
    gap = (table.up_up + table.down_down) / n - star
    assert found.z == pytest.approx(float(gap) / float(variance) ** 0.5, rel=1e-6, abs=1e-9)
    assert found.p_upper == pytest.approx(stats.norm.sf(found.z))
    assert found.p_upper + found.p_lower == pytest.approx(1.0)
    assert found.p_two_sided == pytest.approx(2 * min(found.p_upper, found.p_lower))


@given(tables)
def test_hits_less_false_alarms(table):
    found = hit_less_false_alarm(table)
    rose, fell = table.up_up + table.down_up, table.up_down + table.down_down
    if not rose or not fell:
        assert found is None
        return
    assert found == pytest.approx(table.up_up / rose - table.up_down / fell)
    assert hit_less_false_alarm(turned(table)) == pytest.approx(found)


def test_whoever_always_says_the_same_cannot_be_judged():
    table = DirectionTable(30, 20, 0, 0)
    assert table.is_one_sided
    assert henriksson_merton(table) is None
    assert pesaran_timmermann(table) is None
    assert hit_less_false_alarm(table) == 0.0


@pytest.mark.parametrize(
    "function", [henriksson_merton, pesaran_timmermann, hit_less_false_alarm]
)
def test_a_negative_count_is_a_bug(function):
    with pytest.raises(ValueError, match="negative count"):
        function(DirectionTable(-1, 2, 3, 4))


def test_the_exact_test_keeps_its_level_on_independent_calls():
    rng = np.random.default_rng(5)
    alarms = 0
    for _ in range(500):
        said, went = rng.choice([-1, 1], 80), rng.choice([-1, 1], 80, p=[0.4, 0.6])
        alarms += henriksson_merton(direction_table(said, went)).upper <= 0.05
    assert alarms <= stats.binom.isf(1e-4, 500, 0.05)
