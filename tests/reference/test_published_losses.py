"""Published values of losses of forecasts of a number.

Each check names its source. "From memory" marks a printed value that was recalled rather than
read again; all of them were recomputed when they were entered.
"""

import math

import numpy as np
import pytest

from foresaid.score.losses import (
    crps_normal,
    interval_score,
    pinball_loss,
    ranked_probability_score,
)


@pytest.mark.parametrize(
    ("quantiles", "level", "printed"),
    [
        ([0, 2, 3], 0.1, 0.0333),
        ([1, 2, 4], 0.1, 0.3),
        ([0, 2, 3], 0.9, 0.3),
        ([1, 2, 4], 0.9, 0.0333),
    ],
)
def test_pinball_example_of_scikit_learn(quantiles, level, printed):
    """The examples in the help of mean_pinball_loss; no factor 2 either."""
    stated = np.array(quantiles, dtype=float)[:, None]
    found = pinball_loss(np.array([level]), stated, np.array([1.0, 2.0, 3.0]))
    assert found.mean() == pytest.approx(printed, abs=0.5e-4)


def test_pinball_example_of_scoringrules():
    """The example in the help of scoringrules' quantile_score: 0.16."""
    found = pinball_loss(np.array([0.2]), np.array([[0.5]]), np.array([0.3]))
    assert found == pytest.approx([0.16], rel=1e-14)


@pytest.mark.parametrize(
    ("low", "high", "outcome", "printed"), [(0.0, 0.4, 0.1, 0.4), (0.1, 0.3, 0.2, 0.2)]
)
def test_interval_examples_of_scoringrules(low, high, outcome, printed):
    """The examples in the help of scoringrules' interval_score, alpha 0.5."""
    found = interval_score(*(np.array([x]) for x in (low, high, outcome, 0.5)))
    assert found == pytest.approx([printed], rel=1e-14)


@pytest.mark.parametrize(
    ("stated", "category", "summed"),
    [
        # D. S. Wilks, Statistical Methods in the Atmospheric Sciences, chapter 7 (from memory):
        # two forecasts with the same probability for what came
        ([0.2, 0.5, 0.3], 0, 0.73),
        ([0.2, 0.3, 0.5], 0, 0.89),
        # the example in the help of scoringrules' rps_score, third category
        ([0.1, 0.2, 0.3, 0.4], 2, 0.26),
    ],
)
def test_ranked_probability_score_as_a_sum(stated, category, summed):
    p, c = np.array([stated]), np.array([category])
    assert ranked_probability_score(p, c, scaled=False) == pytest.approx([summed], rel=1e-13)
    assert ranked_probability_score(p, c) == pytest.approx([summed / (len(stated) - 1)])


def test_five_equal_categories():
    """Arithmetic: over K - 1 by outcome, over K in the mean (0.16)."""
    p, every = np.full((5, 5), 0.2), np.arange(5)
    by_outcome = ranked_probability_score(p, every)
    assert by_outcome == pytest.approx([0.3, 0.15, 0.1, 0.15, 0.3])
    assert ranked_probability_score(p, every, scaled=False).mean() / 5 == pytest.approx(0.16)


def test_standard_normal_at_its_mean():
    """T. Gneiting, A. E. Raftery, A. H. Westveld, T. Goldman (2005), Monthly Weather Review
    133, 1098-1118, equation 5 at the mean: (sqrt 2 - 1) / sqrt pi.
    """
    found = crps_normal(np.array([0.0]), np.array([1.0]), np.array([0.0]))
    assert found == pytest.approx([(math.sqrt(2) - 1) / math.sqrt(math.pi)], rel=1e-14)
    assert found == pytest.approx([0.2336950], abs=0.5e-7)
