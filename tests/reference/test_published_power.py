"""Published sample sizes and powers of the exact binomial test.

Each check names its source. "From memory" marks a printed value that was recalled rather than
read again; all of them were recomputed when they were entered.
"""

import math

import pytest
from scipy import stats

from foresaid.score.power import achieved_power, calls_needed


def first_length(chance, skill, level, power):
    """The shortest record with the power; longer ones may miss it again."""
    n = 1
    while achieved_power(n, chance, skill, level=level).power < power:
        n += 1
    return n


# R. P. A'Hern (2001). Sample size tables for exact single stage phase II designs. Statistics in
# Medicine 20, 859-866, level 5 % (from memory): the first length with the power, and the count.


@pytest.mark.parametrize(
    ("chance", "skill", "power", "n", "hits"),
    [
        (0.05, 0.20, 0.8, 27, 4),
        (0.05, 0.20, 0.9, 38, 5),
        (0.05, 0.25, 0.8, 16, 3),
        (0.05, 0.25, 0.9, 25, 4),
        (0.10, 0.30, 0.8, 25, 6),
        (0.10, 0.30, 0.9, 33, 7),
        (0.20, 0.40, 0.8, 35, 12),
        (0.20, 0.40, 0.9, 47, 15),
        (0.30, 0.50, 0.8, 39, 17),
        (0.30, 0.50, 0.9, 53, 22),
        (0.40, 0.60, 0.8, 42, 23),
        (0.50, 0.70, 0.8, 37, 24),
        (0.50, 0.70, 0.9, 53, 33),
    ],
)
def test_single_stage_designs(chance, skill, power, n, hits):
    assert first_length(chance, skill, 0.05, power) == n
    assert achieved_power(n, chance, skill).hits_needed == hits
    assert calls_needed(chance, skill, power=power) >= n


def test_first_and_lasting_length():
    """cnblogs.com/snoopy1866/p/16069000: 98 % against 95 %, two-sided 5 %, power 0.8. A program
    that stops at the first length gives 312; from 338 on the power stays at 0.8.
    """
    assert first_length(0.95, 0.98, 0.025, 0.8) == 312
    assert calls_needed(0.95, 0.98, level=0.025) == 338


@pytest.mark.parametrize(
    ("n", "hits", "level", "power"),
    [
        (30, 23, 0.0435, 0.76),
        (31, 24, 0.0330, 0.73),
        (32, 25, None, 0.7),
        (33, 25, 0.0444, 0.8),
    ],
)
def test_teeth_of_the_saw(n, hits, level, power):
    """NCSS, www.ncss.com/videos/pass/training/saw-tooth-power-function: 0.8 against 0.6 at 5 %.

    The count at 31 is not printed there.
    """
    found = achieved_power(n, 0.6, 0.8)
    assert found.hits_needed == hits
    assert found.power == pytest.approx(power, abs=0.5e-2)
    if level is not None:
        assert found.attained_level == pytest.approx(level, abs=0.5e-4)


@pytest.mark.parametrize(
    ("rate", "missed"), [(0.02, 43.9), (0.03, 12.8), (0.04, 2.7), (0.05, 0.5)]
)
def test_basel_errors_of_the_second_kind(rate, missed):
    """Basel Committee on Banking Supervision (January 1996). Supervisory framework for the use
    of backtesting, Table 1: a model is rejected at five exceptions in 250 days, 10.8 % of the
    good ones; how often a bad one passes (per cent, one place, from memory).
    """
    found = achieved_power(250, 0.01, rate, level=0.11)
    assert found.hits_needed == 5
    assert 100 * found.attained_level == pytest.approx(10.8, abs=0.05)
    assert 100 * (1 - found.power) == pytest.approx(missed, abs=0.05)


def test_handbook_sample_size():
    """NIST/SEMATECH e-Handbook of Statistical Methods, 7.2.4.2: 10 % against 20 %, one-sided
    5 %, power 0.9: 102 by the normal approximation, 112 with its correction (from memory).

    The exact test reaches the power first at 109 and keeps it from 121 on.
    """
    deviations = stats.norm.isf(0.05) * math.sqrt(0.09) + stats.norm.isf(0.1) * math.sqrt(0.16)
    plain = (deviations / 0.1) ** 2
    assert math.ceil(plain) == 102
    assert math.ceil(plain + 1 / 0.1) == 112
    assert first_length(0.1, 0.2, 0.05, 0.9) == 109
    assert calls_needed(0.1, 0.2, power=0.9) == 121


# J. Cohen (1988). Statistical Power Analysis for the Behavioral Sciences, exercises 6.5 and
# 6.8, as the help of R's package pwr prints them. He takes arcsines for normal.


def arcsine_power(n, effect, level):
    """Two-sided at twice the level."""
    bound, shift = stats.norm.isf(level), effect * math.sqrt(n)
    return stats.norm.sf(bound - shift) + stats.norm.cdf(-bound - shift)


def test_cohen_power():
    """60 calls, 0.4 against 0.5, two-sided 5 %: 0.3447. Mirrored it is 0.6 against 0.5.

    The exact test attains a lower level and so less power; at that level the two agree.
    """
    effect = 2 * (math.asin(math.sqrt(0.6)) - math.asin(math.sqrt(0.5)))
    assert arcsine_power(60, effect, 0.025) == pytest.approx(0.3447014, abs=0.5e-7)
    found = achieved_power(60, 0.5, 0.6, level=0.025)
    assert found.power < 0.3447
    approximate = arcsine_power(60, effect, found.attained_level)
    assert found.power == pytest.approx(approximate, abs=0.005)


def test_cohen_sample_size():
    """Effect 0.2, two-sided 5 %, power 0.95: 324.8677. The exact test takes a little more."""
    skill = math.sin(math.asin(math.sqrt(0.5)) + 0.1) ** 2
    assert arcsine_power(324.8677, 0.2, 0.025) == pytest.approx(0.95, abs=1e-7)
    assert first_length(0.5, skill, 0.025, 0.95) == pytest.approx(324.8677, rel=0.02)
    assert 324.8677 < calls_needed(0.5, skill, level=0.025, power=0.95) < 1.06 * 324.8677
