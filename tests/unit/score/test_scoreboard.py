from dataclasses import fields, replace

import numpy as np
import pytest
from scipy import stats

from foresaid.model.codebook import default_codebook
from foresaid.score.scoreboard import GroupScore, Record, empty_record, score_record

BOOK = default_codebook()


def record(came_true, **columns):
    """Return calls on one instrument, one window after the other, unless told otherwise."""
    n = len(came_true)
    plain = {
        "came_true": np.array(came_true, dtype=bool),
        "leans_against": np.zeros(n, dtype=bool),
        "chance": np.full(n, 0.5),
        "probability_low": np.full(n, np.nan),
        "probability_high": np.full(n, np.nan),
        "instrument": np.zeros(n, dtype=np.int64),
        "start": 10 * np.arange(n),
        "end": 10 * np.arange(n) + 10,
        "direction": np.where(np.arange(n) % 2 == 0, 1, -1),
        "weight": np.ones(n),
    }
    given = {name: np.asarray(column) for name, column in columns.items()}
    return Record(**(plain | given))


def scored(*args, **columns):
    return score_record(record(*args, **columns), BOOK)


def test_an_empty_record_has_counts_and_no_numbers():
    score = score_record(empty_record(), BOOK)
    assert score.verdict == "too few to tell"
    counts = {"n", "n_effective", "hits", "n_base", "n_probability"}
    for field in fields(GroupScore):
        value = getattr(score, field.name)
        if field.name in counts:
            assert value == 0
        elif not field.name.startswith("verdict"):
            assert value is None, field.name


def test_a_record_by_hand():
    score = scored([1, 1, 1, 0], chance=[0.5, 0.25, 0.5, 0.25])
    assert (score.n, score.hits, score.hit_rate, score.n_base) == (4, 3, 0.75, 4)
    assert score.expected_hits == pytest.approx(1.5)
    assert score.excess == pytest.approx(1.5)
    # at least 3 of 4 fair coins: 5 of 16; at most 3: 15 of 16
    assert score.p_coin == pytest.approx(5 / 16)
    assert score.p_coin_low == pytest.approx(15 / 16)
    # chances 1/2 1/4 1/2 1/4: all four 1/64; three: both coins and one quarter 6/64, one coin
    # and both quarters 2/64
    assert score.p_base == pytest.approx(9 / 64)
    assert score.p_base_low == pytest.approx(63 / 64)
    assert score.n_effective == 4
    assert score.verdict == "too few to tell"
    assert (score.brier, score.brier_chance, score.brier_skill) == (None, None, None)


def test_the_interval_is_at_the_codebook_s_level():
    score = scored([1, 1, 1, 0])
    z = stats.norm.ppf(0.975)
    for bound in (score.hit_low, score.hit_high):
        assert (0.75 - bound) ** 2 == pytest.approx(z * z * bound * (1 - bound) / 4)


def test_calls_without_a_chance_count_in_rates_only():
    score = scored([1, 0, 1], chance=[np.nan] * 3)
    assert (score.n, score.hits, score.n_base) == (3, 2, 0)
    assert score.p_coin == pytest.approx(0.5)
    for name in ("expected_hits", "excess", "p_base", "p_base_low", "weighted_expected_rate"):
        assert getattr(score, name) is None
    mixed = scored([1, 0, 1], chance=[0.25, np.nan, np.nan])
    assert (mixed.n_base, mixed.expected_hits, mixed.excess) == (1, 0.25, 0.75)


def test_a_long_record_without_chances_is_not_estimable():
    score = scored([1, 0] * 20, chance=[np.nan] * 40)
    assert score.verdict == "not estimable"


def test_a_low_probability_is_right_when_the_claim_fails():
    score = scored(
        [0, 1],
        leans_against=[True, True],
        chance=[0.9, 0.2],
        probability_low=[0.1, 0.2],
        probability_high=[0.1, 0.3],
    )
    assert score.hits == 1
    assert score.expected_hits == pytest.approx(0.1 + 0.8)
    # right by chance: 0.1 and 0.8; at least one right 1 - 0.9 * 0.2
    assert score.p_base == pytest.approx(0.82)
    # the Brier score is of the claim as written
    word = ((0.25 - 1) ** 2) + 0.1**2 / 12
    assert score.brier == pytest.approx((0.1**2 + word) / 2)


def test_brier_skill_is_on_the_calls_that_have_both():
    score = scored(
        [1, 0, 1],
        probability_low=[0.8, 0.3, np.nan],
        probability_high=[0.8, 0.3, np.nan],
        chance=[0.5, np.nan, 0.5],
    )
    assert score.n_probability == 2
    assert score.brier == pytest.approx((0.04 + 0.09) / 2)
    assert score.brier_chance == pytest.approx(0.25)
    assert score.brier_skill == pytest.approx(1 - 0.04 / 0.25)


def test_windows_are_counted_by_instrument():
    twice = {"start": [0, 0, 5, 5], "end": [10, 10, 15, 15]}
    assert scored([1, 1, 1, 1], **twice).n_effective == 1
    assert scored([1, 1, 1, 1], instrument=[0, 1, 0, 1], **twice).n_effective == 2
    assert scored([1, 1, 1, 1], instrument=[0, 1, 2, 3], **twice).n_effective == 4


def test_weights_count_in_the_weighted_rates_alone():
    plain = scored([1, 0, 1], chance=[0.5, 0.25, np.nan])
    score = scored([1, 0, 1], chance=[0.5, 0.25, np.nan], weight=[3.0, 1.0, 0.0])
    assert score.weighted_hit_rate == pytest.approx(0.75)
    assert score.weighted_expected_rate == pytest.approx((3 * 0.5 + 0.25) / 4)
    names = [f.name for f in fields(GroupScore) if not f.name.startswith("weighted")]
    assert [getattr(score, name) for name in names] == [getattr(plain, name) for name in names]
    none = scored([1, 0], weight=[0.0, 0.0])
    assert (none.weighted_hit_rate, none.weighted_expected_rate) == (None, None)


def test_verdicts_of_long_records():
    chance, n = 0.5, 40
    assert scored([1] * 36 + [0] * 4).verdict == "ahead of the base rate"
    assert scored([0] * 36 + [1] * 4).verdict == "behind the base rate"
    assert scored([1, 0] * 20).verdict == "no different from chance"
    up = np.ones(n, dtype=np.int64)
    assert scored([1] * 36 + [0] * 4, direction=up).verdict == "not estimable"
    # betting against a rise points down
    half = np.arange(n) % 2 == 0
    mixed = scored(
        np.where(half, 0, 1), leans_against=half, direction=up, chance=np.full(n, chance)
    )
    assert mixed.verdict == "ahead of the base rate"
    sure = scored([1] * n, chance=np.full(n, 0.999))
    assert sure.verdict == "no different from chance"


def test_columns_of_different_length_are_a_bug():
    whole = record([1, 0])
    with pytest.raises(ValueError, match="different length"):
        score_record(replace(whole, chance=np.zeros(3)), BOOK)
