import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from foresaid.chance.passage import (
    MONITORING_BETA,
    ends_above,
    monitoring_shift,
    stays_between,
    touches_above,
)

DISTANCES = st.floats(-8, 8)
SIDES = st.floats(0.05, 6)


def stays_on_a_lattice(low, high, steps):
    """Chance that a walk of +-1 stays strictly between two lattice points, step by step."""
    at = np.zeros(high - low + 1)
    at[-low] = 1.0
    for _ in range(steps):
        at = 0.5 * (np.roll(at, 1) + np.roll(at, -1))
        at[[0, -1]] = 0.0
    return at.sum()


def stays_by_many_images(low, high):
    """The textbook sum, over far more images than needed."""
    shift = 2 * np.arange(-400, 401) * (high - low)
    direct = stats.norm.cdf(high + shift) - stats.norm.cdf(low + shift)
    image = stats.norm.cdf(2 * high - low + shift) - stats.norm.cdf(high + shift)
    return np.sum(direct - image)


@pytest.fixture(scope="module")
def paths():
    """Highest and lowest close of walks of 40 sessions, in sds of the whole window."""
    steps = np.random.default_rng(11).normal(0, 1 / math.sqrt(40), (100_000, 40))
    walks = np.cumsum(steps, axis=1)
    return walks.max(axis=1), walks.min(axis=1), walks[:, -1]


@given(st.lists(DISTANCES, min_size=1))
def test_ends_are_a_normal_tail(distances):
    d = np.array(distances)
    assert ends_above(d) == pytest.approx(stats.norm.sf(d), rel=1e-12)
    assert ends_above(d) + ends_above(-d) == pytest.approx(1)


def test_far_marks_keep_their_digits():
    assert ends_above(np.array([10.0]))[0] == pytest.approx(7.61985302416e-24, rel=1e-11)


@given(st.lists(DISTANCES, min_size=1))
def test_touching_is_twice_as_likely_as_ending_beyond(distances):
    d = np.array(distances)
    touched = touches_above(d)
    assert touched[d > 0] == pytest.approx(2 * ends_above(d[d > 0]))
    assert (touched[d <= 0] == 1).all()


@given(low=SIDES, high=SIDES)
def test_staying_is_between_the_simple_bounds(low, high):
    stays = stays_between(np.array([-low]), np.array([high]))[0]
    leaves_above, leaves_below = touches_above(np.array([high, low]))
    assert stays >= 1 - leaves_above - leaves_below - 1e-15
    assert stays <= 1 - max(leaves_above, leaves_below) + 1e-15
    inside = ends_above(np.array([-low])) - ends_above(np.array([high]))
    assert stays <= inside[0] + 1e-15


@given(low=SIDES, high=SIDES)
def test_both_sides_of_a_band_are_alike(low, high):
    here = stays_between(np.array([-low]), np.array([high]))
    there = stays_between(np.array([-high]), np.array([low]))
    assert here == pytest.approx(there, rel=1e-12, abs=1e-15)


@given(low=SIDES, high=SIDES)
def test_staying_is_the_sum_over_many_images(low, high):
    found = stays_between(np.array([-low]), np.array([high]))[0]
    assert found == pytest.approx(stays_by_many_images(-low, high), abs=1e-13)


def test_the_two_series_meet():
    for share in (0.01, 0.2, 0.5, 0.93):
        width = np.array([2 - 1e-12, 2 + 1e-12])
        narrow, wide = stays_between(-share * width, (1 - share) * width)
        assert narrow == pytest.approx(wide, rel=1e-11)


def test_narrow_bands_fall_off_as_their_first_wave():
    width = 0.1
    found = stays_between(np.array([-0.03]), np.array([0.07]))[0]
    wave = 4 / math.pi * math.sin(0.3 * math.pi) * math.exp(-((math.pi / width) ** 2) / 2)
    assert found == pytest.approx(wave, rel=1e-12)
    assert 0 < found < 1e-200
    assert stays_between(np.array([-1e-300]), np.array([1e-300]))[0] == 0.0


@pytest.mark.parametrize(("low", "high"), [(-80, 120), (-40, 40), (-300, 20), (-25, 60)])
def test_staying_is_the_limit_of_lattice_walks(low, high):
    steps = 10_000
    lattice = stays_on_a_lattice(low, high, steps)
    found = stays_between(np.array([low / 100]), np.array([high / 100]))[0]
    assert found == pytest.approx(lattice, rel=2e-3, abs=1e-5)


def test_a_band_open_on_one_side_is_never_to_touch_the_other():
    d = np.array([0.01, 0.7, 3.0])
    never = 1 - touches_above(d)
    assert stays_between(np.full(3, -np.inf), d) == pytest.approx(never, rel=1e-12)
    assert stays_between(-d, np.full(3, np.inf)) == pytest.approx(never, rel=1e-12)
    assert stays_between(np.array([-np.inf]), np.array([np.inf]))[0] == 1.0


def test_shapes_are_kept_and_spread():
    grid = np.linspace(0.1, 3, 6).reshape(2, 3)
    for function in (ends_above, touches_above, lambda d: monitoring_shift(d + 1)):
        assert function(grid).shape == (2, 3)
    assert stays_between(np.array(-1.0), grid).shape == (2, 3)
    assert stays_between(np.array(-1.0), np.array(1.0)) == pytest.approx(0.370777, abs=1e-6)
    assert stays_between(np.zeros(0), np.zeros(0)).shape == (0,)


def test_infinite_distances():
    d = np.array([-np.inf, np.inf])
    assert ends_above(d).tolist() == [1, 0]
    assert touches_above(d).tolist() == [1, 0]


def test_beta_by_an_alternating_series():
    """Dirichlet's eta at one half, its alternating terms weighted as Cohen et al. (2000) do.

    H. Cohen, F. Rodriguez Villegas, D. Zagier, Convergence acceleration of alternating series,
    Experimental Mathematics 9, 3-12, algorithm 1.
    """
    n = 24
    d = (3 + math.sqrt(8)) ** n
    d = (d + 1 / d) / 2
    b, c, total = -1.0, -d, 0.0
    for k in range(n):
        c = b - c
        total += c / math.sqrt(k + 1)
        b *= (k + n) * (k - n) / ((k + 0.5) * (k + 1))
    zeta = total / d / (1 - math.sqrt(2))
    assert pytest.approx(-zeta / math.sqrt(2 * math.pi), rel=4e-15) == MONITORING_BETA


@pytest.mark.parametrize("d", [0.3, 0.8, 1.5, 2.2])
def test_closes_touch_the_moved_barrier(paths, d):
    highest, _, last = paths
    moved = touches_above(d + monitoring_shift(np.array([40.0])))[0]
    assert np.mean(highest >= d) == pytest.approx(moved, abs=0.006)
    assert touches_above(np.array([d]))[0] - moved > 0.004
    assert np.mean(last > d) == pytest.approx(ends_above(np.array([d]))[0], abs=0.006)


@pytest.mark.parametrize(("low", "high"), [(-1.0, 1.0), (-0.6, 1.4), (-2.0, 0.5)])
def test_closes_stay_within_the_moved_band(paths, low, high):
    highest, lowest, _ = paths
    shift = monitoring_shift(np.array([40.0]))
    moved = stays_between(low - shift, high + shift)[0]
    assert np.mean((highest < high) & (lowest > low)) == pytest.approx(moved, abs=0.007)


@pytest.mark.parametrize("function", [ends_above, touches_above])
def test_nan_is_named(function):
    with pytest.raises(ValueError, match="distance holds nan"):
        function(np.array([0.5, np.nan]))


@pytest.mark.parametrize(
    ("low", "high", "named"),
    [
        (0.0, 1.0, "low=0.0"),
        (0.5, 1.0, "low=0.5"),
        (-1.0, 0.0, "high=0.0"),
        (-1.0, -0.5, "high=-0.5"),
        (np.nan, 1.0, "low holds nan"),
        (-1.0, np.nan, "high holds nan"),
    ],
)
def test_bad_bands_are_named(low, high, named):
    with pytest.raises(ValueError, match=named):
        stays_between(np.array([-1.0, low]), np.array([1.0, high]))


@pytest.mark.parametrize(
    ("n", "named"), [(0.0, "n_sessions=0.0"), (np.nan, "n_sessions holds")]
)
def test_bad_session_counts_are_named(n, named):
    with pytest.raises(ValueError, match=named):
        monitoring_shift(np.array([5.0, n]))
