import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats
from statsmodels.stats.multitest import multipletests

from foresaid.score.multiplicity import (
    benjamini_hochberg,
    benjamini_yekutieli,
    field_shares,
    holm,
)

p_values = st.lists(st.just(0.0) | st.floats(1e-300, 1), max_size=40).map(np.array)
METHODS = {holm: "holm", benjamini_hochberg: "fdr_bh", benjamini_yekutieli: "fdr_by"}


@pytest.mark.parametrize("function", METHODS)
@settings(max_examples=150, deadline=None)
@given(p=p_values, seed=st.integers(0, 1000))
def test_adjusted_p_values_are_the_librarys(function, p, seed):
    found = function(p)
    if not len(p):
        assert len(found) == 0
        return
    np.testing.assert_allclose(found, multipletests(p, method=METHODS[function])[1], rtol=1e-12)
    assert (found >= p - 1e-15).all()
    order = np.random.default_rng(seed).permutation(len(p))
    np.testing.assert_array_equal(function(p[order]), found[order])


@given(p_values)
def test_one_adjustment_is_stricter_than_the_other(p):
    assert (holm(p) >= benjamini_hochberg(p) - 1e-12).all()
    assert (benjamini_yekutieli(p) >= benjamini_hochberg(p) - 1e-12).all()
    if len(p):
        by = stats.false_discovery_control(p, method="by")
        np.testing.assert_allclose(benjamini_yekutieli(p), by, rtol=1e-12)


@pytest.mark.parametrize("function", METHODS)
@pytest.mark.parametrize("wrong", [[0.5, np.nan], [1.1], [-0.1], [[0.5]]])
def test_values_that_are_no_p_values(function, wrong):
    with pytest.raises(ValueError, match="p_values"):
        function(np.array(wrong))


def field(rng, none, some, worse, *, edge=3.0):
    z = np.concatenate(
        [rng.normal(size=none), rng.normal(edge, 1, some), rng.normal(-edge, 1, worse)]
    )
    return stats.norm.sf(z), stats.norm.cdf(z)


def test_shares_of_a_large_field_come_near_the_truth():
    rng = np.random.default_rng(1)
    found = field_shares(*field(rng, 700, 200, 100), np.random.default_rng(2))
    assert found.none.value == pytest.approx(0.70, abs=0.06)
    assert found.some.value == pytest.approx(0.20, abs=0.04)
    assert found.negative.value == pytest.approx(0.10, abs=0.04)
    for share, truth in ((found.none, 0.7), (found.some, 0.2), (found.negative, 0.1)):
        assert share.low - 0.03 < truth < share.high + 0.03
        assert share.low <= share.value <= share.high


@settings(max_examples=40, deadline=None)
@given(st.integers(0, 10_000), st.integers(10, 40), st.integers(0, 10), st.integers(0, 10))
def test_shares_add_up_and_are_shares(seed, none, some, worse):
    rng = np.random.default_rng(seed)
    upper, lower = field(rng, none, some, worse)
    found = field_shares(upper, lower, np.random.default_rng(3), draws=100)
    values = [found.none.value, found.some.value, found.negative.value]
    assert sum(values) == pytest.approx(1.0)
    assert all(0.0 <= v <= 1.0 for v in values)
    turned = field_shares(lower, upper, np.random.default_rng(3), draws=100)
    assert (turned.some, turned.negative) == (found.negative, found.some)


def test_the_shares_by_hand():
    # two-sided: ten at 0.02 up, four at 0.1 down, six above one half
    upper = np.array([0.01] * 10 + [0.95] * 4 + [0.4] * 6)
    found = field_shares(upper, 1.0 - upper, np.random.default_rng(4))
    none = 6 / (20 * 0.5)
    some, worse = 10 / 20 - none * 0.1, 4 / 20 - none * 0.1
    scale = (1 - none) / (some + worse)
    assert found.some.value == pytest.approx(some * scale)
    assert found.negative.value == pytest.approx(worse * scale)
    assert found.none.value == pytest.approx(none)


def test_a_small_field_has_no_shares():
    assert field_shares(np.full(9, 0.5), np.full(9, 0.5), np.random.default_rng(5)) is None


@pytest.mark.parametrize(
    ("changes", "told"),
    [
        ({"beyond": 1.0}, "beyond"),
        ({"level": 0.0}, "level"),
        ({"draws": 10}, "draws"),
        ({"p_lower": np.full(3, 0.5)}, "length 12"),
        ({"p_upper": np.full(12, 2.0)}, "p_upper"),
    ],
)
def test_arguments_out_of_range(changes, told):
    given_ = {"p_upper": np.full(12, 0.5), "p_lower": np.full(12, 0.5)} | changes
    with pytest.raises(ValueError, match=told):
        field_shares(**given_, generator=np.random.default_rng(6))
