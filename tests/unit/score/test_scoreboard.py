from dataclasses import fields, replace

import numpy as np
import pytest
from scipy import stats

from foresaid.model.codebook import default_codebook
from foresaid.score.record import Record, empty_record, is_long_enough, is_one_sided
from foresaid.score.scoreboard import GroupScore, score_record
from foresaid.score.verdict import Shifted

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
        "went": np.zeros(n, dtype=np.int64),
        "weight": np.ones(n),
    }
    given = {name: np.asarray(column) for name, column in columns.items()}
    return Record(**(plain | given))


def scored(*args, **columns):
    return score_record(record(*args, **columns), BOOK)


def test_an_empty_record_has_counts_and_no_numbers():
    score = score_record(empty_record(), BOOK)
    assert score.verdict == "too few to tell"
    counts = {"n", "n_effective", "hits", "n_base", "n_probability", "n_timing"}
    counts |= {"timing_hits", "field_size", "shifts", "windows_disjoint", "n_direction"}
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


def moved(hits, *, n=40, p_upper=0.5, p_lower=0.5):
    """Return where a record stands among a thousand shifts, and alone in its field."""
    return Shifted(
        n, hits, 20.0, 3.0, p_upper, p_lower, 0.001, 0.001, 1000, p_upper, p_lower, 1
    )


def test_verdicts_of_long_records():
    n = 40
    good, poor = [1] * 36 + [0] * 4, [0] * 36 + [1] * 4
    first = moved(36, p_upper=0.002)
    assert score_record(record(good), BOOK, first).verdict == "ahead of chance"
    assert score_record(record(good), BOOK, moved(36)).verdict == "no different from chance"
    last = moved(4, p_lower=0.002)
    assert score_record(record(poor), BOOK, last).verdict == "behind chance"
    assert score_record(record([1, 0] * 20), BOOK, first).verdict == "no different from chance"
    assert score_record(record(good), BOOK).verdict == "not estimable"
    up = np.ones(n, dtype=np.int64)
    assert score_record(record(good, direction=up), BOOK, first).verdict == "not estimable"
    # betting against a rise points down
    half = np.arange(n) % 2 == 0
    mixed = record(np.where(half, 0, 1), leans_against=half, direction=up)
    assert score_record(mixed, BOOK, first).verdict == "ahead of chance"
    sure = record([1] * n, chance=np.full(n, 0.999))
    assert score_record(sure, BOOK, first).verdict == "no different from chance"


def test_the_numbers_of_the_shifts_are_passed_on():
    score = score_record(record([1, 0] * 20), BOOK, moved(20, n=38, p_upper=0.6, p_lower=0.45))
    assert (score.n_timing, score.timing_hits, score.timing_expected) == (38, 20, 20.0)
    assert (score.p_timing, score.p_timing_low) == (0.6, 0.45)
    assert (score.p_field, score.p_field_low, score.field_size) == (0.6, 0.45, 1)
    assert score.shifts == 1000


def test_windows_of_several_instruments_overlap_in_time():
    twice = {"start": [0, 0, 10, 10], "end": [10, 10, 20, 20], "instrument": [0, 1, 0, 1]}
    score = scored([1, 1, 1, 1], **twice)
    assert (score.n_effective, score.windows_disjoint) == (4, 2)


def test_direction_looks_at_what_the_price_did():
    # 30 calls for a rise, 20 of them right; 20 for a fall, 15 right
    said = np.repeat([1, -1], [30, 20])
    went = np.concatenate([np.repeat([1, -1], [20, 10]), np.repeat([-1, 1], [15, 5])])
    score = scored(said == went, direction=said, went=went)
    assert score.n_direction == 50
    assert score.hit_less_false_alarm == pytest.approx(20 / 25 - 10 / 25)
    square = [[20, 10], [5, 15]]
    wanted = stats.fisher_exact(square, "greater").pvalue
    assert score.p_henriksson_merton == pytest.approx(wanted)
    assert 0 < score.p_pesaran_timmermann < 0.01
    # whoever says a fall is unlikely points up
    leaning = scored(said != went, direction=-said, went=went, leans_against=np.ones(50, bool))
    assert leaning.p_henriksson_merton == score.p_henriksson_merton
    always = scored(said == went, direction=np.ones(50, dtype=np.int64), went=went)
    assert always.p_henriksson_merton is None
    assert always.p_pesaran_timmermann is None
    assert always.hit_less_false_alarm is None


def test_which_records_may_be_ranked():
    long_one = record([1, 0] * 20)
    assert is_long_enough(long_one, BOOK)
    assert not is_long_enough(record([1, 0] * 9), BOOK)
    assert not is_long_enough(replace(long_one, chance=np.full(40, np.nan)), BOOK)
    crowded = replace(long_one, start=np.zeros(40, np.int64), end=np.full(40, 9))
    assert not is_long_enough(crowded, BOOK)
    assert not is_one_sided(long_one)
    assert is_one_sided(replace(long_one, direction=-np.ones(40, dtype=np.int64)))
    aimless = np.where(np.arange(40) == 3, 0, 1)
    assert not is_one_sided(replace(long_one, direction=aimless))


def test_calls_needed_are_named_where_a_record_is_short():
    reason = scored([1, 0, 1], chance=[0.5, 0.5, 0.5]).verdict_reason
    # 0.5 against 0.6, one-sided at 0.05: the power of 0.8 is kept from 169 on
    assert "takes about 169" in reason
    assert stats.binom.sf(stats.binom.isf(0.05, 168, 0.5), 168, 0.6) < 0.8
    assert stats.binom.sf(stats.binom.isf(0.05, 169, 0.5), 169, 0.6) >= 0.8


def test_columns_of_different_length_are_a_bug():
    whole = record([1, 0])
    with pytest.raises(ValueError, match="different length"):
        score_record(replace(whole, chance=np.zeros(3)), BOOK)
