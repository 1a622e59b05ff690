import numpy as np
import pytest
from scipy import stats

from foresaid.chance.field import field_test, luck_band, timing_test
from foresaid.chance.shifts import ShiftedHits


def both(counts):
    timing = timing_test(counts)
    return timing, field_test(counts, timing)


def table(*rows):
    return np.array(rows, dtype=np.int32)


def binomial_table(seed, records, shifts, calls=200):
    return np.random.default_rng(seed).binomial(calls, 0.4, (records, shifts)).astype(np.int32)


def turned(row):
    return [row[k:] + row[:k] for k in range(len(row))]


# --- one record -------------------------------------------------------------------------


def test_by_hand():
    timing = timing_test(table([3, 1, 2, 3, 1], [0, 0, 0, 0, 5]))
    assert timing.hits.tolist() == [3, 0]
    assert timing.mean.tolist() == [2.0, 1.0]
    assert timing.deviation == pytest.approx([np.sqrt(4 / 5), 2.0], rel=1e-15)
    assert timing.z == pytest.approx([np.sqrt(5 / 4), -0.5], rel=1e-15)
    assert timing.p_upper.tolist() == [0.4, 1.0]
    assert timing.p_lower.tolist() == [1.0, 0.8]
    assert timing.best_upper.tolist() == [0.4, 0.2]
    assert timing.best_lower.tolist() == [0.4, 0.8]
    assert timing.is_constant.tolist() == [False, False]
    assert timing.resolution == 0.2


def test_moments_of_many_records_against_numpy():
    counts = binomial_table(1, 150, 400)
    timing = timing_test(counts)
    assert timing.mean == pytest.approx(counts.mean(axis=1), rel=1e-14)
    assert timing.deviation == pytest.approx(counts.std(axis=1), rel=1e-12)
    z = (counts[:, 0] - counts.mean(axis=1)) / counts.std(axis=1)
    assert timing.z == pytest.approx(z, rel=1e-9, abs=1e-12)
    assert (timing.p_upper == (counts >= counts[:, :1]).mean(axis=1)).all()


def test_a_large_base_does_not_blur_a_small_spread():
    small = table([0, 1, 0, 2])
    large = timing_test(small + 2_000_000_000)
    assert large.deviation[0] == timing_test(small).deviation[0]
    assert large.mean[0] == 2_000_000_000.75


def test_a_record_that_shifting_does_not_change():
    timing, field = both(table([4, 4, 4], [2, 0, 0]))
    assert timing.is_constant.tolist() == [True, False]
    assert (timing.z[0], timing.deviation[0]) == (0.0, 0.0)
    assert (timing.p_upper[0], timing.p_lower[0]) == (1.0, 1.0)
    assert (timing.best_upper[0], timing.best_lower[0]) == (1.0, 1.0)
    assert (field.p_upper[0], field.p_lower[0]) == (1.0, 1.0)
    alone = both(table([2, 0, 0]))[1]
    assert field.n_records == 1
    assert field.maximum.tolist() == alone.maximum.tolist()
    assert field.p_upper[1] == alone.p_upper[0]


def test_a_record_that_shifting_hardly_changes_cannot_pass():
    # always up in a market that rose all the time but once: no p below 0.9
    timing = timing_test(table([50, 50, 50, 50, 49, 50, 50, 50, 50, 50]))
    assert timing.best_upper[0] == 0.9
    assert timing.best_lower[0] == 0.1


def test_cycles_of_two_and_three_sessions_are_independent():
    """Over six shifts each pair of places occurs once, so the law is a product."""
    hits = ShiftedHits(1, 6)
    hits.add(
        np.array([[1, 0, 0], [0, 1, 0]], dtype=np.uint8),
        low=np.array([0, 0]),
        cycle=np.array([2, 3]),
        record=np.array([0, 0]),
        signature=np.array([0, 1]),
        start=np.array([0, 1]),
    )
    timing = timing_test(hits.counts)
    assert timing.hits[0] == 2
    assert timing.p_upper[0] == 1 / 6
    assert timing.mean[0] == pytest.approx(1 / 2 + 1 / 3, rel=1e-15)
    assert timing.deviation[0] ** 2 == pytest.approx(1 / 4 + 2 / 9, rel=1e-14)


def test_random_shifts_draw_near_the_exact_p_value():
    rng = np.random.default_rng(2)
    sessions, calls = 300, 80
    row = np.repeat(rng.integers(0, 2, 30, dtype=np.uint8), 10)
    start = rng.integers(0, sessions, calls)
    hits = ShiftedHits(1, sessions)
    hits.add(
        row[None],
        low=np.array([0]),
        cycle=np.array([sessions]),
        record=np.zeros(calls, dtype=np.int64),
        signature=np.zeros(calls, dtype=np.int64),
        start=start,
    )
    exact = timing_test(hits.counts).p_upper[0]
    draws = 20_000
    shift = rng.integers(0, sessions, draws)
    drawn = row[(start + shift[:, None]) % sessions].sum(axis=1)
    share = (drawn >= row[start].sum()).mean()
    assert 0.05 < exact < 0.95
    assert abs(share - exact) < 4 * np.sqrt(exact * (1 - exact) / draws)


# --- the field --------------------------------------------------------------------------


def slow_step_down(counts):
    """Adjusted upper p-values from the whole table of z, one record at a time."""
    z = (counts - counts.mean(axis=1, keepdims=True)) / counts.std(axis=1, keepdims=True)
    order = np.argsort(-z[:, 0])
    result, before = np.empty(len(z)), 0.0
    for at, record in enumerate(order):
        rest = z[order[at:]].max(axis=0)
        before = max(before, (rest >= z[record, 0] - 1e-9).mean())
        result[record] = before
    return result


def test_many_records_against_the_whole_table():
    counts = binomial_table(3, 150, 200, calls=100_000)
    field = both(counts)[1]
    assert field.p_upper.tolist() == slow_step_down(counts).tolist()
    assert field.p_lower.tolist() == slow_step_down(-counts).tolist()
    z = (counts - counts.mean(axis=1, keepdims=True)) / counts.std(axis=1, keepdims=True)
    assert field.maximum == pytest.approx(z.max(axis=0), rel=1e-9)
    assert field.minimum == pytest.approx(z.min(axis=0), rel=1e-9)
    assert field.n_records == 150


def test_step_down_is_sharper_than_one_step():
    """Beside a record that stands out the next one is judged by the rest alone."""
    first = [9, 0, 0, 8] + [0] * 16
    second = [5, 5, 5] + [0] * 17
    third = [0, 1] * 10
    timing, field = both(table(first, second, third))
    single = [(field.maximum >= z - 1e-9).mean() for z in timing.z]
    assert single == [0.05, 0.2, 1.0]
    assert field.p_upper.tolist() == [0.05, 0.15, 1.0]


def test_a_field_of_one_needs_no_adjustment():
    timing, field = both(binomial_table(4, 1, 100))
    assert field.p_upper.tolist() == timing.p_upper.tolist()
    assert field.p_lower.tolist() == timing.p_lower.tolist()


def test_who_copies_costs_nothing_and_who_does_not_costs():
    own = table(*turned([4, 1, 2, 3, 0, 2, 1, 3]))
    herd = both(np.repeat(own[:1], 5, axis=0))[1]
    assert herd.p_upper.tolist() == [0.125] * 5
    others = both(own[[0, 2, 3, 4, 5]])[1]
    assert others.p_upper[0] == 0.625


def test_copies_of_another_size_tie_in_spite_of_rounding():
    base = np.random.default_rng(5).integers(0, 9, (1, 70))
    counts = np.concatenate([base * size for size in range(1, 40)]).astype(np.int32)
    timing, field = both(counts)
    assert len(set(timing.z.tolist())) > 1  # rounding does part them
    assert set(field.p_upper) == set(timing.p_upper)
    assert set(field.p_lower) == set(timing.p_lower)


def test_an_empty_field():
    for counts in (np.zeros((0, 5), dtype=np.int32), table([3, 3, 3, 3, 3])):
        timing, field = both(counts)
        band = luck_band(timing, field)
        assert field.n_records == 0
        assert field.maximum.tolist() == field.minimum.tolist() == [0.0] * 5
        assert band.z_upper.tolist() == band.z_lower.tolist() == [0.0, 0.0]
        assert band.hits_upper.shape == (2, len(counts))
        assert not band.excess_upper.any()


def test_one_shift_decides_nothing():
    timing, field = both(table([3], [4]))
    assert timing.is_constant.all()
    assert field.p_upper.tolist() == [1.0, 1.0]


# --- the luck band ----------------------------------------------------------------------


def test_band_by_hand():
    counts = table([4, 0, 2, 2], [0, 10, 10, 20])
    timing, field = both(counts)
    root = np.sqrt(2.0)
    assert field.maximum == pytest.approx([root, 0.0, 0.0, root], abs=1e-15)
    assert field.minimum == pytest.approx([-root, -root, 0.0, 0.0], abs=1e-15)
    band = luck_band(timing, field, levels=[0.5, 0.51])
    assert band.levels == (0.5, 0.51)
    assert band.z_upper == pytest.approx([0.0, root])
    assert band.z_lower == pytest.approx([0.0, -root])
    assert band.hits_upper[1] == pytest.approx([4.0, 20.0])
    assert band.hits_lower[1] == pytest.approx([0.0, 0.0], abs=1e-12)
    assert band.excess_upper[1] == pytest.approx([2.0, 10.0])
    assert band.excess_lower[1] == pytest.approx([-2.0, -10.0])


def test_band_against_quantiles_of_numpy():
    timing, field = both(binomial_table(6, 80, 500))
    levels = (0.05, 0.25, 0.5, 0.9, 0.95, 1.0)
    band = luck_band(timing, field, levels)
    expected = np.quantile(field.maximum, levels, method="inverted_cdf")
    assert band.z_upper.tolist() == expected.tolist()
    lower = -np.quantile(-field.minimum, levels, method="inverted_cdf")
    assert band.z_lower.tolist() == lower.tolist()


def test_rank_of_a_level_is_not_pushed_up_by_rounding():
    timing, field = both(table(list(range(100))))
    assert 0.07 * 100 > 7
    assert luck_band(timing, field, levels=[0.07]).hits_upper[0, 0] == pytest.approx(6.0)


def test_best_of_many_without_skill_is_the_expected_normal_maximum():
    """Mean of the field's best under its shifts, and the means for independent normals.

    H. L. Harter (1961), Expected values of normal order statistics, Biometrika 48, table 1.
    """
    for records, expected in ((2, 0.56419), (10, 1.53875), (100, 2.50759)):
        counts = binomial_table(records, records, 5_000, calls=20_000)
        field = both(counts)[1]
        assert field.maximum.mean() == pytest.approx(expected, abs=0.04)
        assert field.minimum.mean() == pytest.approx(-expected, abs=0.04)


# --- level: worlds without skill --------------------------------------------------------

SESSIONS, HORIZON, EVERY = 300, 40, 5


def sticky(rng, n, stay):
    """Views up or down that change now and then, shape (n,)."""
    changes = rng.random(n) > stay
    return (rng.integers(0, 2) + np.cumsum(changes)) % 2


def world_without_skill(rng, forecasters):
    """Overlapping calls up or down on one random walk, and half of each record copied."""
    walk = np.cumsum(rng.standard_normal(SESSIONS + HORIZON))
    up = walk[HORIZON:] > walk[:-HORIZON]
    start = np.arange(0, SESSIONS, EVERY)
    crowd = sticky(rng, len(start), 0.95)
    views = [
        np.where(rng.random(len(start)) < 0.5, crowd, sticky(rng, len(start), 0.95))
        for _ in range(forecasters)
    ]
    hits = ShiftedHits(forecasters, SESSIONS)
    hits.add(
        np.stack([~up, up]),
        low=np.zeros(2, dtype=np.int64),
        cycle=np.full(2, SESSIONS),
        record=np.repeat(np.arange(forecasters), len(start)),
        signature=np.concatenate(views),
        start=np.tile(start, forecasters),
    )
    return hits.counts, len(start)


def test_timing_test_keeps_its_level_where_a_binomial_test_does_not():
    rng, worlds, level = np.random.default_rng(7), 800, 0.1
    timed = coin = 0
    for _ in range(worlds):
        counts, calls = world_without_skill(rng, 1)
        timed += timing_test(counts).p_upper[0] <= level
        coin += stats.binom.sf(counts[0, 0] - 1, calls, 0.5) <= level
    assert 0.05 < timed / worlds < 0.14
    assert coin / worlds > 0.18


def test_field_test_keeps_its_level_in_a_herd_where_the_best_p_value_does_not():
    rng, worlds, level = np.random.default_rng(8), 500, 0.1
    ahead = behind = best = 0
    for _ in range(worlds):
        timing, field = both(world_without_skill(rng, 12)[0])
        ahead += field.p_upper.min() <= level
        behind += field.p_lower.min() <= level
        best += timing.p_upper.min() <= level
    assert 0.05 < ahead / worlds < 0.14
    assert 0.05 < behind / worlds < 0.14
    assert best / worlds > 0.3


def test_skill_is_found():
    rng = np.random.default_rng(9)
    walk = np.cumsum(rng.standard_normal(SESSIONS + HORIZON))
    up = walk[HORIZON:] > walk[:-HORIZON]
    start = np.arange(0, SESSIONS, EVERY)
    knows = np.where(rng.random(len(start)) < 0.9, up[start], ~up[start]).astype(np.int64)
    guesses = rng.integers(0, 2, (9, len(start)))
    hits = ShiftedHits(10, SESSIONS)
    hits.add(
        np.stack([~up, up]),
        low=np.zeros(2, dtype=np.int64),
        cycle=np.full(2, SESSIONS),
        record=np.repeat(np.arange(10), len(start)),
        signature=np.concatenate([knows, guesses.ravel()]),
        start=np.tile(start, 10),
    )
    timing, field = both(hits.counts)
    assert field.p_upper[0] <= 0.02
    assert (field.p_upper[1:] > field.p_upper[0]).all()
    assert timing.hits[0] > luck_band(timing, field).hits_upper[1, 0]


# --- refusals ---------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("counts", "named"),
    [
        (np.array([1, 2], dtype=np.int32), "counts has shape"),
        (np.zeros((3, 0), dtype=np.int32), "counts has shape"),
        (np.array([[1.0, 2.0]]), "counts has dtype float64"),
        (np.array([[1, 2]], dtype=np.uint64), "counts has dtype uint64"),
        (np.array([[0, 3_037_000_500]]), "counts spreads over 3037000500 hits"),
    ],
)
def test_tables_that_are_refused(counts, named):
    with pytest.raises(ValueError, match=named):
        timing_test(counts)


def test_moments_of_another_table_are_refused():
    timing = timing_test(table([1, 2, 3]))
    with pytest.raises(ValueError, match="timing does not belong to counts"):
        field_test(table([2, 2, 3]), timing)
    with pytest.raises(ValueError, match="timing does not belong to counts"):
        field_test(table([1, 2, 3], [1, 2, 3]), timing)


@pytest.mark.parametrize("level", [0.0, -0.1, 1.1, float("nan")])
def test_levels_that_are_refused(level):
    timing, field = both(table([1, 2, 3]))
    with pytest.raises(ValueError, match="levels holds"):
        luck_band(timing, field, levels=[0.5, level])
