import pytest

from foresaid.report.field import (
    apart_columns,
    field_columns,
    in_field,
    line_of,
    ranked,
    shares_text,
    standing,
)

ROW = {
    "forecaster": "ada",
    "hits": 12,
    "n": 20,
    "n_timing": 18,
    "timing_hits": 12,
    "timing_expected": 9.0,
    "timing_deviation": 2.0,
    "p_field": 0.25,
    "p_field_low": 0.97,
    "luck_low": 5.0,
    "luck_high": 13.0,
    "rank_low": 2.0,
    "rank_high": 9.0,
    "share_none": 0.71,
    "share_none_low": 0.5,
    "share_none_high": 0.9,
    "share_some": 0.2,
    "share_some_low": 0.05,
    "share_some_high": 0.4,
    "share_negative": 0.09,
    "share_negative_low": 0.0,
    "share_negative_high": 0.2,
    "verdict": "no different from chance",
    "verdict_reason": "because",
}
APART = ROW | {"p_field": None, "p_field_low": None, "luck_low": None, "luck_high": None}
NEVER = ROW | dict.fromkeys(("timing_expected", "timing_deviation", "p_field"))


def test_a_record_on_the_line():
    # 1.5 deviations above, the band from 2 below to 2 above; 4 characters to a deviation
    assert standing(ROW) == 1.5
    assert line_of(ROW) == "        --------|-----o--        "
    far = ROW | {"timing_hits": 30}
    assert line_of(far) == "        --------|--------       o"
    middle = ROW | {"timing_hits": 9}
    assert line_of(middle)[16] == "o"
    assert len(line_of(far)) == 33


@pytest.mark.parametrize(
    ("row", "member"),
    [(ROW, True), (APART, False), (NEVER, False), (ROW | {"timing_deviation": 0.0}, False)],
)
def test_who_is_in_the_field(row, member):
    assert in_field(row) == member


def test_the_best_comes_first_and_the_rest_stand_apart():
    low = ROW | {"forecaster": "bob", "timing_hits": 4}
    same = ROW | {"forecaster": "cyd"}
    assert [row["forecaster"] for row in ranked([low, ROW, APART, same])] == [
        "ada",
        "cyd",
        "bob",
    ]
    texts = {column.heading: column.text(low) for column in field_columns(["forecaster"])}
    assert texts["excess"] == "-5.0 (2.0)"
    assert texts["field"] == "0.97 low"
    assert {c.heading: c.text(ROW) for c in field_columns([])}["field"] == "0.25"
    assert [c.text(APART) for c in apart_columns(["forecaster"])] == [
        "ada",
        "12 of 20",
        "no different from chance",
        "because",
    ]


def test_shares_of_the_field_in_words():
    text = shares_text(ROW)
    assert "71 % (50 to 90) without skill, 20 % (5 to 40) with some" in text
    assert shares_text(ROW | {"share_none": None}) == ""
    texts = {column.heading: column.text(ROW) for column in field_columns([])}
    assert texts["rank"] == "2 to 9"
    none = {
        column.heading: column.text(ROW | {"rank_low": None}) for column in field_columns([])
    }
    assert none["rank"] == "–"
