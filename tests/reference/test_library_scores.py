"""Scores against scikit-learn: its functions, and the examples printed on its help pages."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from sklearn import metrics

from foresaid.score.direction import direction_table, hit_less_false_alarm
from foresaid.score.losses import pinball_loss
from foresaid.score.probability import brier_score, log_score


def draw(seed, n):
    rng = np.random.default_rng(seed)
    return rng.uniform(0.01, 0.99, n), rng.random(n) < 0.5


@settings(max_examples=50, deadline=None)
@given(st.integers(0, 2**32 - 1), st.integers(2, 60))
def test_probability_scores(seed, n):
    p, y = draw(seed, n)
    y[0], y[1] = True, False
    assert brier_score(p, y) == pytest.approx(metrics.brier_score_loss(y, p), rel=1e-12)
    assert log_score(p, y) == pytest.approx(metrics.log_loss(y, p), rel=1e-9)


def test_the_printed_example_of_the_brier_score():
    """Help page of `brier_score_loss`: 0.0375."""
    p, y = np.array([0.1, 0.9, 0.8, 0.3]), np.array([0, 1, 1, 0], dtype=bool)
    assert brier_score(p, y) == pytest.approx(0.0375, abs=1e-12)


@settings(max_examples=50, deadline=None)
@given(st.integers(0, 2**32 - 1), st.integers(1, 40), st.floats(0.01, 0.99))
def test_pinball_losses(seed, n, level):
    rng = np.random.default_rng(seed)
    y, q = rng.normal(size=n), rng.normal(size=n)
    own = pinball_loss(np.full((n, 1), level), q[:, None], y).mean()
    assert own == pytest.approx(metrics.mean_pinball_loss(y, q, alpha=level), rel=1e-10)


@pytest.mark.parametrize(
    ("q", "level", "printed"),
    [([0.0, 2.0, 3.0], 0.1, 0.0333), ([1.0, 2.0, 4.0], 0.1, 0.3), ([0.0, 2.0, 3.0], 0.9, 0.3)],
)
def test_the_printed_examples_of_the_pinball_loss(q, level, printed):
    """Help page of `mean_pinball_loss`."""
    y = np.array([1.0, 2.0, 3.0])
    own = pinball_loss(np.full((3, 1), level), np.array(q)[:, None], y).mean()
    assert own == pytest.approx(printed, abs=5e-5)


@settings(max_examples=50, deadline=None)
@given(st.integers(0, 2**32 - 1), st.integers(4, 80))
def test_hits_less_false_alarms_is_the_adjusted_balanced_accuracy(seed, n):
    rng = np.random.default_rng(seed)
    said, went = rng.choice([-1, 1], n), rng.choice([-1, 1], n)
    went[0], went[1] = 1, -1
    said[0], said[1] = 1, -1
    own = hit_less_false_alarm(direction_table(said, went))
    library = metrics.balanced_accuracy_score(went, said, adjusted=True)
    assert own == pytest.approx(library, abs=1e-12)
