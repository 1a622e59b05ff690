import csv
import io
import json
import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from foresaid.report.exports import FORMULA_STARTS, as_csv, as_json

cells = st.one_of(
    st.none(),
    st.integers(),
    st.floats(allow_nan=False, allow_infinity=False),
    st.text(st.characters(exclude_categories=["Cs"], exclude_characters="\0"), max_size=12),
    st.sampled_from(
        ['"', "a,b", "line\nbreak", "\r", "a\rb", "\r\n", "=1+1", "@x", "-5", "'x", "\ttab"]
    ),
)


def read_back(text):
    return list(csv.reader(io.StringIO(text, newline="")))


@given(st.lists(st.lists(cells, min_size=3, max_size=3), max_size=5))
def test_csv_reads_back(rows):
    names = ["a", "b", "c"]
    text = as_csv(names, [dict(zip(names, row, strict=True)) for row in rows])
    header, *found = read_back(text)
    assert header == names
    assert len(found) == len(rows)
    for row, texts in zip(rows, found, strict=True):
        for cell, shown in zip(row, texts, strict=True):
            if cell is None:
                assert shown == ""
            elif isinstance(cell, str):
                is_formula = cell.startswith(FORMULA_STARTS)
                assert shown == ("'" + cell if is_formula else cell)
            else:
                assert type(cell)(shown) == cell


@pytest.mark.parametrize("start", FORMULA_STARTS)
def test_text_that_would_run_as_a_formula_is_quoted(start):
    ((_,), (cell,)) = read_back(as_csv(["a"], [{"a": start + "1+1"}]))
    assert cell == "'" + start + "1+1"


def test_numbers_are_never_quoted_cut_or_rounded():
    row = {"a": -0.1, "b": 1e-300, "c": 0.1 + 0.2, "d": -5}
    assert as_csv(list(row), [row]) == "a,b,c,d\n-0.1,1e-300,0.30000000000000004,-5\n"


def test_columns_are_exactly_those_asked_for():
    rows = [{"b": 1, "a": 2, "extra": 3}, {"a": 4}]
    assert as_csv(["a", "b"], rows) == "a,b\n2,1\n4,\n"


def test_no_rows_leave_the_header():
    assert as_csv(["a", "b"], []) == "a,b\n"


@given(
    st.recursive(
        st.one_of(st.none(), st.booleans(), st.integers(), st.text(max_size=5)),
        lambda inner: st.one_of(
            st.lists(inner, max_size=3), st.dictionaries(st.text(max_size=3), inner, max_size=3)
        ),
        max_leaves=8,
    )
)
def test_json_reads_back(value):
    assert json.loads(as_json(value)) == value


@pytest.mark.parametrize("number", [math.nan, math.inf, -math.inf])
def test_json_refuses_what_it_cannot_hold(number):
    with pytest.raises(ValueError, match="not JSON compliant"):
        as_json([{"chance": number}])


def test_json_is_plain_unicode():
    assert as_json({"name": "Zürich"}) == '{\n  "name": "Zürich"\n}'
