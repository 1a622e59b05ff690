"""Adjusted p-values and the best of many against published values."""

import numpy as np
import pytest
from scipy import stats

from foresaid.score.multiplicity import benjamini_hochberg, holm
from foresaid.score.shrinkage import shrunken_ranks

# Y. Benjamini, Y. Hochberg (1995), Journal of the Royal Statistical Society B 57, 289-300,
# section 4: fifteen p-values; 3 are rejected by Bonferroni, 4 by their procedure at 0.05.
P = np.array(
    [0.0001, 0.0004, 0.0019, 0.0095, 0.0201, 0.0278, 0.0298, 0.0344, 0.0459, 0.3240, 0.4262,
     0.5719, 0.6528, 0.7590, 1.0]
)  # fmt: skip


def test_rejections_of_the_paper():
    assert int((benjamini_hochberg(P) <= 0.05).sum()) == 4
    assert int((holm(P) <= 0.05).sum()) == 3
    assert int((len(P) * P <= 0.05).sum()) == 3


def test_adjusted_values():
    """As printed on the help page of scipy's `false_discovery_control`."""
    printed = [0.0015, 0.003, 0.0095, 0.035625, 0.0603, 0.06385714, 0.06385714, 0.0645, 0.0765,
               0.486, 0.58118182, 0.714875, 0.75323077, 0.81321429, 1.0]  # fmt: skip
    np.testing.assert_allclose(benjamini_hochberg(P), printed, rtol=1e-7)


@pytest.mark.parametrize(
    ("n", "expected"), [(2, 0.56419), (5, 1.16296), (10, 1.53875), (20, 1.86748)]
)
def test_the_best_of_many_equal_records(n, expected):
    """H. L. Harter (1961), Expected values of normal order statistics, Biometrika 48, Table 1.

    The best of n measured values of one and the same skill lies that many errors above it; the
    shrunken value of the best must take most of that back.
    """
    rng = np.random.default_rng(n)
    raw, kept = [], []
    for _ in range(400):
        x = rng.normal(size=n)
        found = shrunken_ranks(x, np.ones(n), rng, draws=100)
        raw.append(x.max())
        kept.append(found.value[np.argmax(x)])
    assert np.mean(raw) == pytest.approx(expected, abs=4 * np.std(raw) / 20)
    assert abs(np.mean(kept)) < 0.6 * expected
    assert stats.norm.ppf((n - 0.375) / (n + 0.25)) == pytest.approx(expected, abs=0.03)
