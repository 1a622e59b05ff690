"""Shared fixtures."""

import numpy as np
import pytest


@pytest.fixture(autouse=True)
def global_random_state_is_left_alone():
    """Nothing may draw from or reseed numpy's global generator."""
    before = np.random.get_state()[1].copy()  # noqa: NPY002 - it is what is watched
    yield
    after = np.random.get_state()[1]  # noqa: NPY002
    assert (before == after).all()
