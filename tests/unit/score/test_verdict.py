from dataclasses import replace

import pytest

from foresaid.model.codebook import default_codebook
from foresaid.score.verdict import (
    AHEAD,
    BEHIND,
    NO_DIFFERENT,
    NOT_ESTIMABLE,
    TOO_FEW,
    Evidence,
    verdict,
)

RULES = default_codebook().verdict
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
)


def said(**changes):
    return verdict(replace(SOUND, **changes), RULES)


@pytest.mark.parametrize(
    ("changes", "words", "reason"),
    [
        ({}, NO_DIFFERENT, "22 right of 40, 20.0 expected by the base rate; p = 0.32."),
        (
            {"hits": 30, "p_upper": 0.0123, "p_lower": 0.99},
            AHEAD,
            "30 right of 40, 20.0 expected by the base rate; p = 0.012.",
        ),
        (
            {"hits": 10, "p_upper": 0.999, "p_lower": 0.00123},
            BEHIND,
            "10 right of 40, 20.0 expected by the base rate; p = 0.0012 in the lower tail.",
        ),
        ({"p_upper": 0.05}, AHEAD, None),
        ({"p_upper": 0.0500001}, NO_DIFFERENT, None),
        ({"p_lower": 0.05}, BEHIND, None),
        ({"p_lower": 0.0500001}, NO_DIFFERENT, None),
        (
            {"n": 19, "n_base": 19, "hits": 19, "p_upper": 1e-6},
            TOO_FEW,
            "19 matured calls in 15 windows without overlap; at least 20 and 10 are needed.",
        ),
        (
            {"n_effective": 9, "hits": 40, "p_upper": 1e-6},
            TOO_FEW,
            "40 matured calls in 9 windows without overlap; at least 20 and 10 are needed.",
        ),
        (
            {"n_base": 19, "hits": 10},
            NOT_ESTIMABLE,
            "only 19 of 40 calls have a base rate.",
        ),
        ({"n_base": 20, "hits": 10}, NO_DIFFERENT, None),
        (
            {"n_base": 0, "hits": 0, "p_upper": None, "p_lower": None},
            NOT_ESTIMABLE,
            "only 0 of 40 calls have a base rate.",
        ),
        (
            {"p_best": 0.2, "p_worst": 0.07},
            TOO_FEW,
            "even a perfect record would only reach p = 0.07 on these calls.",
        ),
        ({"p_best": 0.2, "p_worst": 0.05}, NO_DIFFERENT, None),
        ({"p_best": 0.05, "p_worst": 0.2}, NO_DIFFERENT, None),
        (
            {"is_one_sided": True, "hits": 39, "p_upper": 1e-6},
            NOT_ESTIMABLE,
            "every call points the same way, so timing cannot be told from the market's drift.",
        ),
    ],
)
def test_words_and_reasons(changes, words, reason):
    found = said(**changes)
    assert found.words == words
    if reason is not None:
        assert found.reason == reason


def test_a_short_record_is_refused_before_anything_else():
    found = said(n=5, n_base=0, hits=0, p_upper=None, is_one_sided=True)
    assert found.words == TOO_FEW


def test_levels_and_minima_are_the_codebook_s():
    strict = replace(RULES, level=0.01, minimum_matured=41)
    assert verdict(SOUND, strict).words == TOO_FEW
    strict = replace(strict, minimum_matured=40)
    assert verdict(replace(SOUND, p_upper=0.02), strict).words == NO_DIFFERENT


@pytest.mark.parametrize(
    "changes", [{"hits": 41}, {"n_base": 41, "hits": 41}, {"hits": -1}, {"n": 39}]
)
def test_counts_that_contradict_each_other_are_a_bug(changes):
    with pytest.raises(ValueError, match="contradict"):
        said(**changes)


@pytest.mark.parametrize("word", [AHEAD, BEHIND, NO_DIFFERENT, TOO_FEW, NOT_ESTIMABLE])
def test_no_word_speaks_of_skill_or_worth(word):
    assert not any(bad in word for bad in ("skill", "good", "bad", "best"))
