from datetime import date, timedelta

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from foresaid.market.actions import factor_steps
from foresaid.model.records import Action

EPOCH = date(1970, 1, 1)


def action(day, kind, ratio=None, **more):
    return Action("ABC", EPOCH + timedelta(days=day), kind, ratio=ratio, **more)


@pytest.mark.parametrize(
    ("actions", "day", "factor"),
    [
        ([], [-5, 0, 99], [1.0, 1.0, 1.0]),
        ([action(10, "split", 3.0)], [9, 10, 11], [1.0, 3.0, 3.0]),
        ([action(10, "rebase", 4.0)], [9, 10], [1.0, 0.25]),
        ([action(10, "split", 0.1)], [9, 10], [1.0, 0.1]),
        (
            [action(20, "split", 5.0), action(10, "split", 2.0)],
            [9, 10, 19, 20],
            [1.0, 2.0, 2.0, 10.0],
        ),
        ([action(10, "split", 2.0), action(10, "rebase", 4.0)], [9, 10], [1.0, 0.5]),
        ([action(10, "dividend", amount=1.0), action(12, "halt")], [9, 10, 13], [1.0] * 3),
        ([action(10, "merger", 2.0)], [9, 10], [1.0, 1.0]),
    ],
)
def test_factors(actions, day, factor):
    assert factor_steps(actions).at(np.array(day)).tolist() == factor


@given(
    st.lists(
        st.tuples(
            st.integers(0, 60),
            st.sampled_from(["split", "rebase", "dividend"]),
            st.sampled_from([0.1, 0.5, 1.5, 2.0, 3.0]),
        ),
        max_size=6,
    ),
    st.integers(-5, 70),
)
def test_factors_against_a_product(rows, day):
    expected = 1.0
    for at, kind, ratio in sorted(rows):
        if at <= day and kind != "dividend":
            expected *= ratio if kind == "split" else 1.0 / ratio
    steps = factor_steps([action(*row) for row in rows])
    assert steps.at(np.array([day]))[0] == pytest.approx(expected, rel=1e-12)


def test_what_comes_later_changes_nothing_before():
    early = factor_steps([action(10, "split", 2.0)])
    late = factor_steps([action(10, "split", 2.0), action(50, "split", 7.0)])
    day = np.arange(50)
    assert (early.at(day) == late.at(day)).all()
