"""The shift tests against plain loops and fractions, and their level over all shifts."""

import math
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from foresaid.chance.field import field_test, luck_band, timing_test
from foresaid.chance.shifts import ShiftedHits


@st.composite
def settings(draw):
    """Signatures with cycles of their own, and calls on them."""
    sessions = draw(st.integers(1, 12))
    signatures = []
    for _ in range(draw(st.integers(1, 4))):
        low = draw(st.integers(0, sessions - 1))
        cycle = draw(st.integers(1, sessions - low))
        row = draw(st.lists(st.integers(0, 1), min_size=sessions, max_size=sessions))
        signatures.append((low, cycle, row))
    n_records = draw(st.integers(1, 5))
    calls = []
    for _ in range(draw(st.integers(0, 15))):
        number = draw(st.integers(0, len(signatures) - 1))
        low, cycle, _ = signatures[number]
        start = low + draw(st.integers(0, cycle - 1))
        calls.append((draw(st.integers(0, n_records - 1)), number, start))
    return sessions, signatures, n_records, calls, draw(st.integers(1, 20))


def counts_of(drawn):
    _, signatures, n_records, calls, n_shifts = drawn
    low, cycle, rows = zip(*signatures, strict=True)
    record, number, start = np.array(calls, dtype=np.int64).reshape(-1, 3).T
    hits = ShiftedHits(n_records, n_shifts)
    hits.add(
        np.array(rows, dtype=np.uint8),
        low=np.array(low),
        cycle=np.array(cycle),
        record=record,
        signature=number,
        start=start,
    )
    return hits.counts


def counts_by_loop(drawn):
    _, signatures, n_records, calls, n_shifts = drawn
    table = [[0] * n_shifts for _ in range(n_records)]
    for shift in range(n_shifts):
        for record, number, start in calls:
            low, cycle, row = signatures[number]
            table[record][shift] += row[low + (start - low + shift) % cycle]
    return table


TABLES = st.integers(1, 12).flatmap(
    lambda shifts: st.lists(
        st.lists(st.integers(0, 6), min_size=shifts, max_size=shifts), min_size=1, max_size=6
    )
)


def squared(row, hits):
    """The square of z with its sign, as a fraction; None for a constant row."""
    shifts, total = len(row), sum(row)
    variance = shifts * sum(x * x for x in row) - total * total
    distance = shifts * hits - total
    return Fraction(distance * abs(distance), variance) if variance else None


def adjusted_by_fractions(table):
    """Step-down p-values of the upper tail, z compared without rounding."""
    shifts = len(table[0])
    heights = [[squared(row, hits) for hits in row] for row in table]
    plain = {}
    for j, own in enumerate(heights):
        if own[0] is not None:
            field = [z for z in heights if z[0] is not None and z[0] <= own[0]]
            count = sum(max(z[k] for z in field) >= own[0] for k in range(shifts))
            plain[j] = Fraction(count, shifts)
    return [
        float(max(p for i, p in plain.items() if heights[i][0] >= heights[j][0]))
        if j in plain
        else 1.0
        for j in range(len(table))
    ]


def both_tests(table):
    counts = np.array(table, dtype=np.int32)
    timing = timing_test(counts)
    return timing, field_test(counts, timing)


@given(settings())
def test_counts_equal_the_plain_loop(drawn):
    assert counts_of(drawn).tolist() == counts_by_loop(drawn)


@given(settings())
def test_p_values_from_outcomes_equal_the_plain_loop_to_the_last_digit(drawn):
    timing = timing_test(counts_of(drawn))
    for j, row in enumerate(counts_by_loop(drawn)):
        assert timing.p_upper[j] == sum(x >= row[0] for x in row) / len(row)
        assert timing.p_lower[j] == sum(x <= row[0] for x in row) / len(row)
        assert timing.best_upper[j] == row.count(max(row)) / len(row)
        assert timing.best_lower[j] == row.count(min(row)) / len(row)
        assert timing.mean[j] == pytest.approx(sum(row) / len(row), rel=1e-15)
        assert timing.is_constant[j] == (len(set(row)) == 1)


@given(TABLES)
def test_adjusted_p_values_equal_those_by_fractions(table):
    _, field = both_tests(table)
    assert field.p_upper.tolist() == adjusted_by_fractions(table)
    turned = [[-hits for hits in row] for row in table]
    assert field.p_lower.tolist() == adjusted_by_fractions(turned)


@given(TABLES)
def test_adjusted_is_at_least_raw_and_follows_z(table):
    timing, field = both_tests(table)
    assert (field.p_upper >= timing.p_upper).all()
    assert (field.p_lower >= timing.p_lower).all()
    varying = ~timing.is_constant
    order = np.argsort(timing.z[varying])
    assert (np.diff(field.p_upper[varying][order]) <= 0).all()
    assert (np.diff(field.p_lower[varying][order]) >= 0).all()
    assert (timing.p_upper >= timing.best_upper).all()
    assert (timing.best_upper >= timing.resolution).all()


@given(TABLES, st.randoms(use_true_random=False))
def test_order_of_records_does_not_matter_and_copies_change_nothing(table, random):
    _, field = both_tests(table)
    order = list(range(len(table)))
    random.shuffle(order)
    _, mixed = both_tests([table[i] for i in order])
    assert mixed.p_upper.tolist() == field.p_upper[order].tolist()
    _, doubled = both_tests(table + table)
    assert doubled.p_upper.tolist() == [*field.p_upper, *field.p_upper]
    assert doubled.maximum.tolist() == field.maximum.tolist()
    # three calls where there was one: the same z but for rounding
    _, tripled = both_tests(table + [[3 * hits for hits in row] for row in table])
    assert tripled.p_upper.tolist() == [*field.p_upper, *field.p_upper]
    assert tripled.p_lower.tolist() == [*field.p_lower, *field.p_lower]


@given(TABLES)
def test_level_holds_when_every_shift_in_turn_is_the_record(table):
    """With one cycle for all each rotation is as likely, so the level holds by counting."""
    shifts = len(table[0])
    rotations = [both_tests([row[k:] + row[:k] for row in table]) for k in range(shifts)]
    for level in range(1, shifts + 1):
        share = level / shifts
        alone = sum(timing.p_upper[0] <= share for timing, _ in rotations)
        any_of_all = sum(field.p_upper.min() <= share for _, field in rotations)
        assert alone <= level
        assert any_of_all <= level


@given(TABLES, st.integers(1, 100))
def test_luck_band_is_the_smallest_value_that_covers_its_share(table, percent):
    timing, field = both_tests(table)
    band = luck_band(timing, field, levels=[percent / 100])
    needed = math.ceil(Fraction(percent * len(table[0]), 100))
    assert (field.maximum <= band.z_upper[0]).sum() >= needed
    assert (field.maximum < band.z_upper[0]).sum() < needed
    assert (field.minimum >= band.z_lower[0]).sum() >= needed
    assert (field.minimum > band.z_lower[0]).sum() < needed
