from dataclasses import replace

import pytest

from foresaid.model.codebook import default_codebook
from foresaid.score.verdict import (
    AHEAD,
    AHEAD_ALONE,
    BEHIND,
    BEHIND_ALONE,
    NO_DIFFERENT,
    NOT_ESTIMABLE,
    TOO_FEW,
    Evidence,
    Shifted,
    verdict,
)

RULES = default_codebook().verdict
SHIFTED = Shifted(
    n=40,
    hits=22,
    mean=20.5,
    deviation=3.0,
    p_upper=0.4,
    p_lower=0.7,
    best_upper=0.001,
    best_lower=0.001,
    shifts=1000,
    p_field=0.9,
    p_field_low=0.99,
    field_size=7,
)
SOUND = Evidence(
    n=40,
    n_base=40,
    n_effective=15,
    hits=22,
    expected=20.0,
    p_upper=0.32,
    p_lower=0.78,
    p_best=1e-9,
    p_worst=1e-12,
    is_one_sided=False,
    shifted=SHIFTED,
    n_needed=150,
)
SHORT = "; to find an edge of 10 points in 80 % of cases takes about 150."


def said(moved=None, **changes):
    if moved is not None:
        changes["shifted"] = replace(SHIFTED, **moved)
    return verdict(replace(SOUND, **changes), RULES)


@pytest.mark.parametrize(
    ("moved", "changes", "words", "reason"),
    [
        (
            {},
            {},
            NO_DIFFERENT,
            "22 right of 40, 20.0 expected by the base rate (p = 0.32); against 20.5 over 1000 "
            "shifts (p = 0.4); p = 0.9 in a field of 7.",
        ),
        (
            {"p_upper": 0.004, "p_field": 0.03},
            {"hits": 30, "p_upper": 0.0123, "p_lower": 0.99},
            AHEAD,
            "30 right of 40, 20.0 expected by the base rate (p = 0.012); against 20.5 over "
            "1000 shifts (p = 0.004); p = 0.03 in a field of 7.",
        ),
        ({"p_upper": 0.05, "p_field": 0.05}, {"p_upper": 0.05}, AHEAD, None),
        ({"p_upper": 0.05, "p_field": 0.051}, {"p_upper": 0.05}, AHEAD_ALONE, None),
        ({"p_upper": 0.05, "p_field": None}, {"p_upper": 0.05}, AHEAD_ALONE, None),
        ({"p_upper": 0.0501, "p_field": 0.05}, {"p_upper": 0.01}, NO_DIFFERENT, None),
        ({"p_upper": 0.01, "p_field": 0.01}, {"p_upper": 0.051}, NO_DIFFERENT, None),
        (
            {"n": 38, "hits": 9, "p_lower": 0.01, "p_field_low": 0.02},
            {"hits": 10, "p_upper": 0.999, "p_lower": 0.00123},
            BEHIND,
            "10 right of 40, 20.0 expected by the base rate (p = 0.0012) in the lower tail; "
            "9 of 38 against 20.5 over 1000 shifts (p = 0.01); p = 0.02 in a field of 7.",
        ),
        ({"p_lower": 0.01, "p_field_low": 0.06}, {"p_lower": 0.01}, BEHIND_ALONE, None),
        ({"p_lower": 0.06, "p_field_low": 0.06}, {"p_lower": 0.01}, NO_DIFFERENT, None),
        (
            {},
            {"n": 19, "n_base": 19, "hits": 19, "p_upper": 1e-6},
            TOO_FEW,
            "19 matured calls in 15 windows without overlap; at least 20 and 10 are needed"
            + SHORT,
        ),
        (
            {},
            {"n_effective": 9, "hits": 40, "p_upper": 1e-6, "n_needed": None},
            TOO_FEW,
            "40 matured calls in 9 windows without overlap; at least 20 and 10 are needed.",
        ),
        (
            {},
            {"n_base": 19, "hits": 10},
            NOT_ESTIMABLE,
            "only 19 of 40 calls have a base rate.",
        ),
        ({}, {"n_base": 20, "hits": 10}, NO_DIFFERENT, None),
        (
            {},
            {"n_base": 0, "hits": 0, "p_upper": None, "p_lower": None},
            NOT_ESTIMABLE,
            "only 0 of 40 calls have a base rate.",
        ),
        (
            {},
            {"p_best": 0.2, "p_worst": 0.07},
            TOO_FEW,
            "even a perfect record would only reach p = 0.07 on these calls" + SHORT,
        ),
        ({}, {"p_best": 0.2, "p_worst": 0.05}, NO_DIFFERENT, None),
        ({}, {"p_best": 0.05, "p_worst": 0.2}, NO_DIFFERENT, None),
        (
            {},
            {"is_one_sided": True, "hits": 39, "p_upper": 1e-6},
            NOT_ESTIMABLE,
            "every call points the same way, so timing cannot be told from the market's drift.",
        ),
        (
            {"n": 19},
            {},
            NOT_ESTIMABLE,
            "only 19 of 40 calls can be moved along the field's calendar.",
        ),
        (
            {"shifts": 19},
            {},
            TOO_FEW,
            "the calendar has 19 shifts, too few for any p-value to reach 0.05.",
        ),
        ({"shifts": 20}, {}, NO_DIFFERENT, None),
        (
            {"best_upper": 0.2, "best_lower": 0.06},
            {},
            NOT_ESTIMABLE,
            "moving the record along the calendar changes next to nothing, so its timing "
            "cannot be judged.",
        ),
        ({"best_upper": 0.2, "best_lower": 0.05}, {}, NO_DIFFERENT, None),
    ],
)
def test_words_and_reasons(moved, changes, words, reason):
    found = said(moved, **changes)
    assert found.words == words
    if reason is not None:
        assert found.reason == reason


def test_a_record_that_cannot_be_moved_is_not_estimable():
    found = said(shifted=None)
    assert found.words == NOT_ESTIMABLE
    assert found.reason == "only 0 of 40 calls can be moved along the field's calendar."


def test_a_short_record_is_refused_before_anything_else():
    found = said(n=5, n_base=0, hits=0, p_upper=None, is_one_sided=True)
    assert found.words == TOO_FEW


def test_levels_and_minima_are_the_codebook_s():
    strict = replace(RULES, level=0.01, minimum_matured=41)
    assert verdict(SOUND, strict).words == TOO_FEW
    strict = replace(strict, minimum_matured=40)
    passing = replace(SHIFTED, p_upper=0.005, p_field=0.005)
    assert verdict(replace(SOUND, shifted=passing, p_upper=0.02), strict).words == NO_DIFFERENT
    assert verdict(replace(SOUND, shifted=passing, p_upper=0.01), strict).words == AHEAD


@pytest.mark.parametrize(
    "changes", [{"hits": 41}, {"n_base": 41, "hits": 41}, {"hits": -1}, {"n": 39}]
)
def test_counts_that_contradict_each_other_are_a_bug(changes):
    with pytest.raises(ValueError, match="contradict"):
        said(**changes)


@pytest.mark.parametrize(
    "word",
    [AHEAD, AHEAD_ALONE, BEHIND, BEHIND_ALONE, NO_DIFFERENT, TOO_FEW, NOT_ESTIMABLE],
)
def test_no_word_speaks_of_skill_or_worth(word):
    assert not any(bad in word for bad in ("skill", "good", "bad", "best"))
