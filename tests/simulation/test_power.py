"""How often forecasters with a known edge are found: more often with a longer record."""

import numpy as np
import pytest

from support.no_skill import Forecasters, Market
from support.no_skill_scores import LEVEL, TESTS, p_values

pytestmark = pytest.mark.slow

WORLDS = 150


def found_share(seed, *, sees, years, days, size=1):
    """Return how often the timing hurdle and the verdict find one forecaster with an edge."""
    style = Forecasters(size=size, spans=(days,), sees=sees, knowing=1)
    market = Market(years=years)
    found = np.array([one[0][:, 0] for one in p_values(seed, market, style, WORLDS)])
    return {test: (found[:, at] <= LEVEL).mean() for at, test in enumerate(TESTS)}


@pytest.mark.parametrize("days", [30, 365])
def test_power_grows_with_the_record(days):
    powers = [found_share(1, sees=0.5, years=years, days=days)["timing"] for years in (3, 10)]
    # three standard errors of a difference of two shares are 0.17 at most
    assert powers[1] > powers[0] + 0.17, powers


def test_power_grows_with_the_edge():
    powers = [found_share(2, sees=sees, years=10, days=30)["timing"] for sees in (0.1, 0.3)]
    assert powers[1] > powers[0] + 0.17, powers


def test_ten_years_of_calls_with_an_edge_are_mostly_found():
    found = found_share(3, sees=0.3, years=10, days=30)
    assert found["timing"] > 0.6
    assert found["verdict"] > 0.5
    # a field of one is the record itself, and the verdict needs the other hurdles too
    assert found["field"] == found["timing"]
    assert found["verdict"] <= found["timing"]


def test_long_windows_take_longer_to_judge():
    month, year = (
        found_share(4, sees=0.3, years=10, days=days)["timing"] for days in (30, 365)
    )
    assert month > year + 0.1
