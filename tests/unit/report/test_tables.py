import io

import pytest
from rich.console import Console

from foresaid.model.issues import Issue
from foresaid.report.cautions import CAUTIONS
from foresaid.report.tables import (
    Column,
    beside_columns,
    call_columns,
    decimal,
    fraction,
    has_something_beside,
    issue_lines,
    make_table,
    p_value,
    score_columns,
)

ROW = {
    "forecaster": "ada",
    "hits": 12,
    "n": 20,
    "hit_rate": 0.6,
    "hit_low": 0.387,
    "hit_high": 0.781,
    "n_base": 18,
    "expected_hits": 9.04,
    "p_coin": 0.2517,
    "p_base": 0.00001,
    "p_timing": 0.0123,
    "e_value": 31.25,
    "e_passed_on": "2025-03-14",
    "e_value_low": 0.2,
    "e_passed_low_on": None,
    "p_field": 0.5,
    "n_effective": 11,
    "weighted_hit_rate": 0.605,
    "verdict": "too few to tell",
    "not_a_call": 1,
    "open": 0,
    "void": 2,
    "early": 0,
    "imputed_n": 5,
    "withdrawn_n": 0,
    "withdrawn_hits": 0,
    "imputed_hits": 3,
    "n_probability": 4,
    "brier": 0.2345,
    "brier_skill": -0.0567,
}
EMPTY = {
    "forecaster": None,
    "hits": 0,
    "n": 0,
    "hit_rate": None,
    "hit_low": None,
    "hit_high": None,
    "n_base": 0,
    "expected_hits": None,
    "p_coin": None,
    "p_base": None,
    "p_timing": None,
    "e_value": 1.0,
    "e_passed_on": None,
    "e_value_low": 1.0,
    "e_passed_low_on": None,
    "p_field": None,
    "n_effective": 0,
    "weighted_hit_rate": None,
    "verdict": "too few to tell",
    "not_a_call": 0,
    "open": 0,
    "void": 0,
    "early": 0,
    "imputed_n": 0,
    "withdrawn_n": 0,
    "withdrawn_hits": 0,
    "imputed_hits": 0,
    "n_probability": 0,
    "brier": None,
    "brier_skill": None,
}


def shown(columns, row):
    return {column.heading: column.text(row) for column in columns}


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (None, "–"),
        (0.62, "0.62"),
        (1.0, "1.00"),
        (0.1, "0.10"),
        (0.0312, "0.031"),
        (0.01, "0.010"),
        (0.00123, "0.0012"),
        (0.0001, "0.0001"),
        (0.0000999, "<0.0001"),
        (0.0, "<0.0001"),
    ],
)
def test_p_values(value, text):
    assert p_value(value) == text


@pytest.mark.parametrize(
    ("value", "digits", "text"),
    [
        (None, 0, "–"),
        (0.6178, 0, "62 %"),
        (0.6178, 1, "61.8 %"),
        (0.0, 0, "0 %"),
        (1, 0, "100 %"),
    ],
)
def test_fractions(value, digits, text):
    assert fraction(value, digits=digits) == text


@pytest.mark.parametrize(
    ("value", "digits", "text"), [(None, 3, "–"), (0.23456, 3, "0.235"), (-0.056, 2, "-0.06")]
)
def test_decimals(value, digits, text):
    assert decimal(value, digits=digits) == text


def test_a_score():
    assert shown(score_columns(["forecaster"], has_weights=True), ROW) == {
        "forecaster": "ada",
        "right": "12 of 20",
        "in % (interval)": "60 (39 to 78)",
        "chance": "9.0 of 18",
        "coin": "0.25",
        "base": "<0.0001",
        "timing": "0.012",
        "field": "0.50",
        "apart": "11",
        "weighted": "60 %",
        "verdict": "too few to tell",
    }
    plain = shown(score_columns([], has_weights=False), ROW | {"n_base": 20})
    assert "weighted" not in plain
    assert plain["chance"] == "9.0"


def test_what_stands_beside():
    assert shown(beside_columns(["forecaster"]), ROW) == {
        "forecaster": "ada",
        "not a call": "1",
        "open": "–",
        "void": "2",
        "early": "–",
        "undated right": "3 of 5",
        "withdrawn right": "–",
        "stated": "4",
        "Brier": "0.234",
        "skill": "-0.06",
        "evidence": "31.2, 2025-03-14",
    }
    assert has_something_beside(ROW)
    assert not has_something_beside(EMPTY)


def test_an_empty_group_has_dashes():
    found = shown(score_columns(["forecaster"], has_weights=True), EMPTY)
    dashes = {name for name, text in found.items() if text == "–"}
    assert set(found) - dashes == {"right", "apart", "verdict"}


def test_a_call():
    row = {
        "ref": "C-1",
        "forecaster": "ada",
        "said_at": "2025-03-14T12:15:00+01:00",
        "instrument": "",
        "claim": "not a call: no date",
        "horizon": "",
        "outcome": "",
        "decided_session": None,
        "chance": 0.427,
        "reason": "",
    }
    assert shown(call_columns(), row) == {
        "ref": "C-1",
        "forecaster": "ada",
        "said": "2025-03-14",
        "instrument": "–",
        "claim": "not a call: no date",
        "horizon": "–",
        "outcome": "not settled",
        "chance": "43 %",
    }
    settled = row | {"outcome": "void", "reason": "the level is the reference price"}
    found = shown(call_columns(), settled)["outcome"]
    assert found == "void: the level is the reference price"
    assert shown(call_columns(), row | {"outcome": "hit"})["outcome"] == "hit"


def test_text_is_shown_as_it_is():
    column = Column("name", lambda row: row["name"], "left")
    out = io.StringIO()
    table = make_table([column], [{"name": "[red]A[/red] :smile:"}], width=60)
    Console(file=out, width=60).print(table)
    assert "[red]A[/red] :smile:" in out.getvalue()


def test_columns_that_wrap_give_way_to_those_that_do_not():
    columns = [
        Column("name", lambda row: row["name"], "left"),
        Column("words", lambda row: row["words"], "left", wraps=True),
    ]
    row = {"name": "a-name-that-stays-whole", "words": "several words that may wrap " * 3}
    out = io.StringIO()
    Console(file=out, width=40).print(make_table(columns, [row], width=40))
    lines = out.getvalue().splitlines()
    assert max(map(len, lines)) <= 40
    assert any("a-name-that-stays-whole" in line for line in lines)
    assert len(lines) > 3


@pytest.mark.parametrize(
    ("issue", "line"),
    [
        (
            Issue("bad-date", "no such day", "c.csv", 3, "said_at", "2025-02-30", "Mend it."),
            "c.csv, line 3, said_at: no such day [2025-02-30]. Mend it.",
        ),
        (Issue("x", "is empty", "c.csv"), "c.csv: is empty."),
        (
            Issue("x", "is unknown", "c.csv", 1, "colour", severity="note"),
            "note: c.csv, line 1, colour: is unknown.",
        ),
    ],
)
def test_issue_lines(issue, line):
    assert issue_lines([issue]) == [line]


def test_cautions_are_sentences():
    assert CAUTIONS
    assert all(text.endswith(".") for text in CAUTIONS)


def test_wide_columns_give_way_on_a_narrow_screen():
    columns = [Column("a", lambda _: "1"), Column("b", lambda _: "2", wide=True)]
    narrow, wide = (make_table(columns, [{}], width=width) for width in (80, 120))
    assert [str(column.header) for column in narrow.columns] == ["a"]
    assert narrow.caption == "Left out on a narrow screen: b."
    assert [str(column.header) for column in wide.columns] == ["a", "b"]
    assert wide.caption is None
