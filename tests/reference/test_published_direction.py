"""Tests of direction and equal accuracy against published and library values."""

import numpy as np
import pytest
from statsmodels.stats.diagnostic import pesaran_timmermann as library_test

from foresaid.score.direction import (
    DirectionTable,
    henriksson_merton,
    hit_less_false_alarm,
    pesaran_timmermann,
)
from foresaid.score.equal_accuracy import paired_test


def test_tea_tasting():
    """R. A. Fisher's lady: 3 of 4 right. Help page of `fisher.test` in R; p 0.2429, 0.4857."""
    found = henriksson_merton(DirectionTable(3, 1, 1, 3))
    assert found.upper == pytest.approx(0.2429, abs=5e-5)
    assert 2 * found.upper == pytest.approx(0.4857, abs=5e-5)


@pytest.mark.parametrize(("cross_term", "z"), [(False, 1.4142136), (True, 1.5118579)])
def test_both_forms_of_the_variance(cross_term, z):
    """Input of statsmodels' `test_diagnostic.py`, where 0 counts as no rise.

    Its function leaves the term in 1/n^2 out (two-sided p 0.1572992).
    """
    moves = np.array([1.2, -0.4, 0.0, 0.9, -1.1, 0.5, -0.2, 0.3])
    forecasts = np.array([0.6, -0.2, -0.1, 1.0, 0.7, 0.2, -0.4, -0.6])
    actual, said = moves > 0, forecasts > 0
    table = DirectionTable(
        int((said & actual).sum()),
        int((said & ~actual).sum()),
        int((~said & actual).sum()),
        int((~said & ~actual).sum()),
    )
    found = pesaran_timmermann(table, cross_term=cross_term)
    assert found.z == pytest.approx(z, abs=5e-8)
    if not cross_term:
        assert found.p_two_sided == pytest.approx(0.1572992, abs=5e-8)
        for one, p in (
            ("larger", found.p_upper),
            ("smaller", found.p_lower),
            ("two-sided", found.p_two_sided),
        ):
            library = library_test(moves, forecasts, alternative=one)
            assert (found.z, p) == pytest.approx((library.statistic, library.pvalue), rel=1e-12)


def test_finley_tornadoes():
    """J. P. Finley's tornado forecasts of 1884: 28, 72, 23, 2680; score 0.523.

    D. B. Stephenson (2000). Use of the odds ratio for diagnosing forecast skill. Weather and
    Forecasting 15, 221-232 (counts and score as printed on public verification pages).
    """
    table = DirectionTable(28, 72, 23, 2680)
    assert hit_less_false_alarm(table) == pytest.approx(0.523, abs=5e-4)
    assert table.hit_rate == pytest.approx(0.549, abs=5e-4)
    # worked out from the counts, not printed there
    assert table.false_alarm_rate == pytest.approx(0.0261628, abs=5e-8)


def test_approval_ratings():
    """A. Agresti's approval counts, input of `mcnemar.test` in R: 86 against 150.

    The exact p-value, 3.7159e-5, is worked out anew, not printed there.
    """
    first = np.array([True] * 86 + [False] * 150)
    found = paired_test(first, ~first)
    assert found.p_two_sided == pytest.approx(3.7159e-5, rel=5e-5)
