import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from foresaid.ingest.cells import parse_number
from foresaid.ingest.columns import date_column, name_column, number_column
from foresaid.ingest.dates import parse_date

CELLS = st.one_of(
    st.text("0123456789.,eE+-_nai ", max_size=8).map(str.strip),
    st.floats(allow_nan=False, allow_infinity=False).map(repr),
)


@given(st.lists(CELLS), st.sampled_from(".,"))
def test_number_columns_agree_with_cells(cells, decimal):
    column = number_column(cells, decimal=decimal)
    for row, text in enumerate(cells):
        single = parse_number(text, decimal=decimal) if text else None
        assert column.is_bad[row] == (text != "" and not isinstance(single, float))
        if isinstance(single, float):
            assert column.values[row] == single
        else:
            assert np.isnan(column.values[row])


@given(
    st.lists(st.one_of(st.dates().map(str), st.text("0123456789-/.", max_size=10))),
    st.sampled_from(["iso", "dmy", "mdy"]),
)
def test_date_columns_agree_with_cells(cells, order):
    column = date_column(cells, order=order)
    for row, text in enumerate(cells):
        single = parse_date(text, order=order)
        if text in column.faults:
            assert column.faults[text] == single
            assert np.isnat(column.days[row])
        else:
            assert column.days[row] == np.datetime64(single, "D")


@given(st.lists(st.text(max_size=3)))
def test_names_are_numbered_in_order(cells):
    names, codes = name_column(cells)
    assert [names[code] for code in codes] == cells
    assert names == tuple(dict.fromkeys(cells))
