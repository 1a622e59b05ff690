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


def contradicted(table):
    """Return the table of whoever says the opposite each time."""
    return DirectionTable(table.down_up, table.down_down, table.up_up, table.up_down)


def exchanged(table):
    """Return the table with what was said and what happened exchanged."""
    return DirectionTable(table.up_up, table.down_up, table.up_down, table.down_down)


def no_skill_tables():
    """Return 500 tables of 80 calls that know nothing of a market that mostly rises."""
    rng = np.random.default_rng(5)
    return [
        direction_table(rng.choice([-1, 1], 80), rng.choice([-1, 1], 80, p=[0.4, 0.6]))
        for _ in range(500)
    ]


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
        (np.array([1]), np.array([0.5]), r"went\[0\]=0.5 must be -1, 0 or 1"),
        (np.array([1, np.nan]), np.array([1, 1]), r"said\[1\]=nan must be -1, 0 or 1"),
        (np.array([False]), np.array([1]), r"said\[0\]=False must be -1, 0 or 1"),
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
    assert henriksson_merton(turned(table)) == found
    assert henriksson_merton(exchanged(table)) == found
    opposite = henriksson_merton(contradicted(table))
    assert (opposite.lower, opposite.upper) == (found.upper, found.lower)


@pytest.mark.parametrize(
    "table",
    [
        DirectionTable(860, 100, 100, 860),
        DirectionTable(60, 800, 700, 40),
        DirectionTable(5, 60, 70, 4),
    ],
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
    assert 0 < min(found.upper, found.lower) < 1e-10


def test_a_tail_too_small_for_a_float_is_nought():
    assert henriksson_merton(DirectionTable(900, 100, 50, 950)).upper == 0.0


@given(tables)
def test_whole_numbers_of_any_kind_count_alike(table):
    """Narrow types would overflow."""
    fields = (table.up_up, table.up_down, table.down_up, table.down_down)
    for kind in (np.int64, np.uint8, float):
        same = DirectionTable(*(kind(count) for count in fields))
        for function in (henriksson_merton, pesaran_timmermann, hit_less_false_alarm):
            assert function(same) == function(table)


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
    assert variance > 0
    gap = (table.up_up + table.down_down) / n - star
    assert found.z == pytest.approx(float(gap) / float(variance) ** 0.5, rel=1e-12, abs=0)
    assert found.p_upper == pytest.approx(stats.norm.sf(found.z), rel=1e-9, abs=0)
    assert found.p_lower == pytest.approx(stats.norm.cdf(found.z), rel=1e-9, abs=0)
    assert found.p_two_sided == pytest.approx(2 * stats.norm.sf(abs(found.z)), rel=1e-9, abs=0)
    assert pesaran_timmermann(turned(table), cross_term=cross_term) == found
    assert pesaran_timmermann(exchanged(table), cross_term=cross_term) == found
    opposite = pesaran_timmermann(contradicted(table), cross_term=cross_term)
    assert (opposite.z, opposite.p_upper) == (-found.z, found.p_lower)
    assert opposite.p_two_sided == found.p_two_sided


@settings(max_examples=100, deadline=None)
@given(tables)
def test_the_square_without_the_cross_term_is_pearsons(table):
    found = pesaran_timmermann(table, cross_term=False)
    if found is None:
        assert table.is_one_sided
        return
    square = [[table.up_up, table.up_down], [table.down_up, table.down_down]]
    pearson = stats.chi2_contingency(square, correction=False)
    assert found.z**2 == pytest.approx(pearson.statistic, rel=1e-10, abs=1e-12)
    assert found.p_two_sided == pytest.approx(pearson.pvalue, rel=1e-9)
    with_term = pesaran_timmermann(table)
    assert with_term.z**2 * (1 - 1 / table.n) == pytest.approx(found.z**2, rel=1e-12)


def test_rare_calls_of_rare_rises_lose_no_digits():
    """One rise in a million, called: the correlation is 1."""
    found = pesaran_timmermann(DirectionTable(1, 0, 0, 999_999), cross_term=False)
    assert found.z == pytest.approx(1000.0, rel=1e-14)


@given(tables)
def test_hits_less_false_alarms(table):
    found = hit_less_false_alarm(table)
    rose, fell = table.up_up + table.down_up, table.up_down + table.down_down
    assert table.hit_rate == (table.up_up / rose if rose else None)
    assert table.false_alarm_rate == (table.up_down / fell if fell else None)
    if not rose or not fell:
        assert found is None
        return
    assert found == pytest.approx(table.up_up / rose - table.up_down / fell)
    assert hit_less_false_alarm(turned(table)) == pytest.approx(found)


@pytest.mark.parametrize(
    ("table", "score"),
    [
        (DirectionTable(30, 20, 0, 0), 0.0),
        (DirectionTable(0, 0, 30, 20), 0.0),
        (DirectionTable(30, 0, 20, 0), None),
        (DirectionTable(0, 30, 0, 20), None),
        (DirectionTable(1, 0, 0, 0), None),
        (DirectionTable(0, 0, 0, 0), None),
    ],
    ids=["said up", "said down", "went up", "went down", "one call", "no call"],
)
def test_where_only_one_thing_was_said_or_happened_nothing_can_be_judged(table, score):
    assert table.is_one_sided
    assert henriksson_merton(table) is None
    for cross_term in (True, False):
        assert pesaran_timmermann(table, cross_term=cross_term) is None
    assert hit_less_false_alarm(table) == score


@pytest.mark.parametrize(
    "function", [henriksson_merton, pesaran_timmermann, hit_less_false_alarm]
)
@pytest.mark.parametrize("count", [-1, 0.5, float("nan")])
def test_a_count_that_is_none_is_a_bug(function, count):
    with pytest.raises(ValueError, match="negative count or one that is not whole"):
        function(DirectionTable(count, 2, 3, 4))


@pytest.mark.parametrize("tail", ["upper", "lower"])
def test_the_exact_test_keeps_its_level_on_independent_calls(tail):
    alarms = sum(getattr(henriksson_merton(one), tail) <= 0.05 for one in no_skill_tables())
    assert 0 < alarms <= stats.binom.isf(1e-4, 500, 0.05)


@pytest.mark.parametrize("tail", ["p_upper", "p_lower", "p_two_sided"])
@pytest.mark.parametrize("cross_term", [True, False])
def test_the_normal_test_nearly_keeps_its_level_on_independent_calls(tail, cross_term):
    """Counts are whole, so the level is 3 to 7 % rather than 5 %."""
    found = [pesaran_timmermann(one, cross_term=cross_term) for one in no_skill_tables()]
    alarms = sum(getattr(one, tail) <= 0.05 for one in found)
    assert stats.binom.ppf(1e-4, 500, 0.03) <= alarms <= stats.binom.isf(1e-4, 500, 0.07)
