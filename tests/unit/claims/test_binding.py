import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from foresaid.claims.binding import UNIT_CODES, bind, quantity_arrays
from foresaid.claims.claim import Claim, Quantity
from foresaid.claims.phrases import parse_claim
from foresaid.claims.registry import KINDS


def marks(phrase, *, reference=100.0, factor=1.0, additive=False, inverse=False):
    """Return the marks of one phrase."""
    claim = parse_claim(phrase)
    values, units = quantity_arrays([claim])
    found = bind(
        KINDS[claim.kind].in_sense(inverse=inverse),
        values,
        units,
        reference=np.array([reference]),
        level_factor=np.array([factor]),
        additive=np.array([additive]),
    )
    assert found.shape[0] == 1
    return found[0].tolist()


@pytest.mark.parametrize(
    ("phrase", "options", "expected"),
    [
        ("ends higher", {}, [1.0]),
        ("ends higher", {"additive": True}, [0.0]),
        ("ends above 110", {}, [1.1]),
        ("ends above 110", {"factor": 2.0}, [2.2]),
        ("ends above 4.25", {"reference": 4.0, "additive": True}, [0.25]),
        ("ends below -0.5", {"reference": 0.25, "additive": True}, [-0.75]),
        ("ends between 90 and 120", {}, [0.9, 1.2]),
        ("ends higher by 5%", {}, [1.05]),
        ("ends lower by 5%", {}, [0.95]),
        ("ends higher by 7pt", {"reference": 140.0}, [1.05]),
        ("ends lower by 7pt", {"reference": 140.0}, [0.95]),
        ("ends higher by 7pt", {"reference": 140.0, "factor": 2.0}, [1.1]),
        ("rises 5%", {"factor": 2.0}, [1.05]),
        ("ends higher by 0.5pp", {"reference": 4.0, "additive": True}, [0.5]),
        ("ends higher by 25bp", {"reference": 4.0, "additive": True}, [0.25]),
        ("ends lower by 25bp", {"reference": -0.1, "additive": True}, [-0.25]),
        ("ends within 2%", {}, [0.98, 1.02]),
        ("ends within 10bp", {"additive": True}, [-0.1, 0.1]),
        ("strengthens", {"inverse": True}, [1.0]),
        ("strengthens by 2%", {}, [1.02]),
        ("weakens by 2%", {}, [0.98]),
        ("strengthens by 2%", {"inverse": True}, [1 / 1.02]),
        ("weakens by 2%", {"inverse": True}, [1 / 0.98]),
        ("strengthens by 10bp", {"additive": True, "inverse": True}, [-0.1]),
        ("weakens by 10bp", {"additive": True, "inverse": True}, [0.1]),
    ],
)
def test_marks(phrase, options, expected):
    assert marks(phrase, **options) == pytest.approx(expected, rel=1e-14, abs=1e-14)


@pytest.mark.parametrize(
    ("quote", "hit"), [(98.0392156862745, True), (98.05, False), (97.0, True), (102.0, False)]
)
def test_an_inverse_pair_strengthens_when_its_quote_falls_far_enough(quote, hit):
    (mark,) = marks("strengthens by 2%", inverse=True)
    kind = KINDS["strengthens by"].in_sense(inverse=True)
    (bound,) = kind.kernel.bounds
    assert (kind.direction, bound.side, bound.strict) == ("down", -1, False)
    # the thing named is worth 1 / quote: it gained 2% where the quote is at most ref / 1.02
    assert (quote <= 100.0 * mark * (1 + 1e-12)) == hit


def test_senses_swap_direction():
    for name in ("strengthens", "weakens", "strengthens by", "weakens by"):
        direct, inverse = (KINDS[name].in_sense(inverse=flag) for flag in (False, True))
        assert {direct.direction, inverse.direction} == {"up", "down"}
        up = direct if name.startswith("strengthens") else inverse
        assert up.direction == "up"
    plain = KINDS["ends higher"]
    assert plain.in_sense(inverse=True) is plain


@given(st.floats(1.0, 1e4), st.floats(0.01, 90.0))
def test_gain_and_loss_lie_around_the_reference(reference, size):
    text = np.format_float_positional(size, trim="-")
    up, down = (
        marks(f"ends {side} by {text}%", reference=reference)[0] for side in ("higher", "lower")
    )
    assert up - 1.0 == pytest.approx(size / 100, rel=1e-9)
    assert up + down == pytest.approx(2.0, rel=1e-12)


def test_quantities_become_arrays():
    claims = [
        Claim("ends higher by", (Quantity(5.0, "%"),)),
        Claim("ends between and", (Quantity(95.0), Quantity(105.0))),
    ]
    values, units = quantity_arrays(claims)
    np.testing.assert_array_equal(values, [[5.0, np.nan], [95.0, 105.0]])
    assert units.tolist() == [[1, 0], [0, 0]]
    values, _ = quantity_arrays([Claim("ends higher")])
    assert values.shape == (1, 1)
    assert np.isnan(values).all()
    assert sorted(UNIT_CODES.values()) == list(range(5))


def test_rows_are_bound_apart():
    found = bind(
        KINDS["ends above"],
        np.array([[110.0], [4.5]]),
        np.zeros((2, 1), dtype=np.int64),
        reference=np.array([100.0, 4.0]),
        level_factor=np.ones(2),
        additive=np.array([False, True]),
    )
    assert found[:, 0].tolist() == pytest.approx([1.1, 0.5])
