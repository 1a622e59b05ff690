import math
from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from foresaid.score.e_process import ODDS, TimedCalls, e_process

CHANCES = st.sampled_from([0.03125, 0.25, 0.375, 0.5, 0.625, 0.75, 0.96875])
CALLS = st.lists(
    st.tuples(st.integers(0, 14), st.integers(1, 6), CHANCES, st.booleans(), st.booleans()),
    max_size=10,
).map(lambda drawn: [(start, start + length, *rest) for start, length, *rest in drawn])
SIDES = st.sampled_from(["upper", "lower"])
EXACT = {"rel": 1e-11, "abs": 1e-300}


def record(rows):
    starts, ends, chances, right, settled = zip(*rows, strict=True) if rows else [()] * 5
    return TimedCalls(
        np.array(starts, dtype=np.int64),
        np.array(ends, dtype=np.int64),
        np.array(chances, dtype=float),
        np.array(right, dtype=bool),
        np.array(settled, dtype=bool),
    )


def one_by_one(right, chance=0.5):
    """Return calls that follow one another, all settled."""
    return record([(i, i + 1, chance, bool(hit), True) for i, hit in enumerate(right)])


def values(found):
    return np.exp(found.log_values).tolist()


def slow_value(rows, day, side="upper", odds=ODDS):
    """Return the e-value at the end of one day as a fraction, with plain loops."""
    begun = sorted((row for row in rows if row[0] <= day), key=lambda row: (row[0], row[2]))
    streams = []
    for row in begun:
        fitting = [stream for stream in streams if stream[-1][1] <= row[0]]
        if fitting:
            fitting[0].append(row)
        else:
            streams.append([row])
    total, left = Fraction(0), Fraction(1)
    for number, stream in enumerate(streams, 1):
        weight = Fraction(1, number * (number + 1))
        left -= weight
        for factor in odds:
            theta = Fraction(factor) if side == "upper" else 1 / Fraction(factor)
            wealth = Fraction(1)
            for _, end, chance, right, settled in stream:
                p = Fraction(chance)
                q = theta * p / (1 - p + theta * p)
                if_right, if_wrong = q / p, (1 - q) / (1 - p)
                if settled and end <= day:
                    wealth *= if_right if right else if_wrong
                else:
                    wealth *= min(if_right, if_wrong)
            total += weight * wealth / len(odds)
    return total + left


@settings(max_examples=150, deadline=None)
@given(CALLS, st.integers(-1, 22), SIDES)
def test_the_path_is_that_of_a_slow_loop(rows, as_of, side):
    found = e_process(record(rows), as_of=as_of, side=side, level=0.5)
    days = sorted({day for row in rows for day in row[:2] if row[0] <= as_of and day <= as_of})
    slow = [slow_value(rows, day, side) for day in days]
    assert found.days.tolist() == days
    assert values(found) == pytest.approx([float(x) for x in slow], **EXACT)
    peaks = [float(max(slow[: i + 1], default=1)) for i in range(len(slow))]
    assert np.exp(found.log_peaks) == pytest.approx([max(1.0, x) for x in peaks], **EXACT)
    assert found.value == pytest.approx(float(slow_value(rows, as_of, side)), **EXACT)
    assert found.peak == pytest.approx(max([1.0, *peaks]), **EXACT)
    assert found.passed == next((d for d, x in zip(days, slow, strict=True) if x >= 2), None)


def test_eight_of_ten_against_a_coin_under_a_uniform_mixture():
    """The mixture over all chances q from 0 to 1 is 2^10 B(9, 3) = 1024/495.

    The upper side bets on q above one half, the lower one on q below; half each is all of them.
    A record without overlap holds half of its wealth in the first stream.
    """
    q = 0.5 + (np.arange(4000) + 0.5) / 8000
    calls = one_by_one([1] * 8 + [0] * 2)
    wealth = [
        2 * e_process(calls, as_of=10, side=side, odds=q / (1 - q)).value - 1
        for side in ("upper", "lower")
    ]
    assert sum(wealth) / 2 == pytest.approx(1024 / 495, abs=1e-6)
    assert 2**10 * math.factorial(8) * math.factorial(2) / math.factorial(11) == 1024 / 495


def test_a_case_by_hand():
    """At the factor 3 and chance 1/2 a bet is worth 3/2 if right and 1/2 if wrong."""
    rows = [
        (0, 4, 0.5, True, True),  # first stream
        (2, 6, 0.5, False, True),  # second stream, weight 1/6
        (4, 9, 0.5, True, False),  # first stream again, never settled
    ]
    found = e_process(record(rows), as_of=20, odds=[3])
    assert found.days.tolist() == [0, 2, 4, 6, 9]
    half, third = 1 / 2, 1 / 3  # of the first stream, of all streams that never opened
    by_hand = [
        half * 0.5 + half,
        half * 0.5 + 0.5 / 6 + third,
        half * 1.5 * 0.5 + 0.5 / 6 + third,
        half * 1.5 * 0.5 + 0.5 / 6 + third,
        half * 1.5 * 0.5 + 0.5 / 6 + third,
    ]
    assert values(found) == pytest.approx(by_hand, rel=1e-14)
    assert (found.n_streams, found.peak, found.passed) == (2, 1.0, None)


@pytest.mark.parametrize("as_of", [-1, 0, 100])
def test_a_record_without_calls_is_worth_one(as_of):
    found = e_process(record([]), as_of=as_of)
    assert found.days.tolist() == found.log_values.tolist() == found.log_peaks.tolist() == []
    assert (found.value, found.peak, found.passed, found.n_streams) == (1.0, 1.0, None, 0)


def test_calls_that_have_not_started_do_not_exist():
    found = e_process(record([(5, 9, 0.5, True, True)]), as_of=4)
    assert (len(found.days), found.value, found.n_streams) == (0, 1.0, 0)


@given(CALLS, SIDES)
def test_wrong_calls_are_right_calls_of_the_other_side(rows, side):
    other = {"upper": "lower", "lower": "upper"}[side]
    turned = [(s, e, 1 - p, not right, known) for s, e, p, right, known in rows]
    if len({row[0] for row in rows}) < len(rows):
        return  # the smaller chance goes first, so calls with the same start change places
    one = e_process(record(rows), as_of=30, side=side)
    two = e_process(record(turned), as_of=30, side=other)
    assert values(one) == pytest.approx(values(two), **EXACT)


@given(CALLS, st.randoms(use_true_random=False), SIDES)
def test_the_order_of_the_rows_does_not_matter(rows, random, side):
    first = {}
    rows = [row for row in rows if first.setdefault((row[0], row[2]), row) is row]
    shuffled = rows.copy()
    random.shuffle(shuffled)
    one = e_process(record(rows), as_of=30, side=side)
    assert one.log_values.tolist() == pytest.approx(
        e_process(record(shuffled), as_of=30, side=side).log_values.tolist(), abs=1e-12
    )


def test_calls_alike_in_start_and_chance_keep_their_order():
    twins = [(0, 5, 0.5, True, True), (0, 5, 0.5, False, True)]
    first = e_process(record(twins), as_of=5, odds=[3]).value
    second = e_process(record(twins[::-1]), as_of=5, odds=[3]).value
    assert first == pytest.approx(1.5 / 2 + 0.5 / 6 + 1 / 3)
    assert second == pytest.approx(0.5 / 2 + 1.5 / 6 + 1 / 3)


@given(CALLS, CALLS, SIDES)
def test_a_later_call_changes_no_earlier_value(rows, more, side):
    later = [row for row in more if row[0] > 6]
    before = e_process(record(rows), as_of=6, side=side)
    after = e_process(record(rows + later), as_of=40, side=side)
    early = after.days <= 6
    assert after.days[early].tolist() == before.days.tolist()
    assert after.log_values[early].tolist() == pytest.approx(
        before.log_values.tolist(), abs=1e-12
    )


@given(CALLS, st.integers(0, 20), SIDES)
def test_a_path_seen_from_an_earlier_day_is_its_beginning(rows, as_of, side):
    whole, part = (e_process(record(rows), as_of=day, side=side) for day in (40, as_of))
    seen = whole.days <= as_of
    assert part.days.tolist() == whole.days[seen].tolist()
    assert part.log_values == pytest.approx(whole.log_values[seen], abs=1e-12)


@given(CALLS, SIDES)
def test_settling_a_call_never_lowers_a_value(rows, side):
    is_open = [(*row[:4], False) for row in rows]
    for i in range(len(rows)):
        settled = [*is_open[:i], (*is_open[i][:4], True), *is_open[i + 1 :]]
        less = e_process(record(is_open), as_of=40, side=side).log_values
        more = e_process(record(settled), as_of=40, side=side).log_values
        assert (more >= less - 1e-12).all()
        is_open = settled


@given(CALLS, SIDES)
def test_what_is_not_settled_is_lost_and_its_outcome_is_not_read(rows, side):
    calls = record(rows)
    missing = replace(calls, settled=np.zeros(len(rows), dtype=bool))
    lost = replace(calls, settled=~missing.settled, right=~missing.settled ^ (side == "upper"))
    turned = replace(missing, right=~missing.right)
    one, two, three = (e_process(x, as_of=40, side=side) for x in (missing, lost, turned))
    assert one.log_values.tolist() == two.log_values.tolist() == three.log_values.tolist()


@given(CALLS, st.integers(0, 20))
def test_the_end_of_an_open_call_may_be_any_later_day(rows, as_of):
    moved = [(s, max(s, as_of) + 1 if e > as_of else e, *rest) for s, e, *rest in rows]
    one, two = (e_process(record(x), as_of=as_of) for x in (rows, moved))
    assert one.log_values.tolist() == two.log_values.tolist()


@given(CALLS, st.integers(-1000, 1000))
def test_the_clock_may_be_moved_and_made_finer(rows, move):
    finer = [(1440 * s + move, 1440 * e + move, *rest) for s, e, *rest in rows]
    one = e_process(record(rows), as_of=12)
    two = e_process(record(finer), as_of=12 * 1440 + move)
    assert (1440 * one.days + move).tolist() == two.days.tolist()
    assert one.log_values.tolist() == two.log_values.tolist()


def test_copied_calls_do_not_multiply():
    """Twenty copies of one right call are worth less than its best possible factor."""
    one = e_process(record([(0, 5, 0.5, True, True)]), as_of=5).value
    many = e_process(record([(0, 5, 0.5, True, True)] * 20), as_of=5)
    assert many.n_streams == 20
    factor = 2 * one - 1
    assert many.value == pytest.approx(factor * 20 / 21 + 1 / 21)


def test_the_first_day_at_the_level_is_kept_even_if_the_value_falls():
    found = e_process(one_by_one([1] * 10 + [0] * 10), as_of=20, level=0.1, odds=[3])
    # after i right calls the next one is open and counts as lost
    rising = [0.5 * 1.5**i * 0.5 + 0.5 for i in range(10)]
    assert values(found)[:10] == pytest.approx(rising)
    assert found.passed == next(i for i, value in enumerate(rising) if value >= 10) == 9
    assert found.value == pytest.approx(0.5 * 1.5**10 * 0.5**10 + 0.5)
    assert found.peak == pytest.approx(0.5 * 1.5**10 * 0.5 + 0.5)


def test_a_level_is_reached_at_exactly_its_inverse():
    # one right call at chance 1/4 and factor 9: q = 3/4, worth 3; half of it and a half are 2
    calls = record([(0, 1, 0.25, True, True)])
    assert e_process(calls, as_of=1, odds=[9], level=0.5).passed == 1
    assert e_process(calls, as_of=1, odds=[9], level=0.4999).passed is None


def test_long_records_neither_overflow_nor_vanish():
    up = e_process(one_by_one([1] * 10_000, 0.1), as_of=10_000)
    assert up.value == up.peak == pytest.approx(1e300)
    best = 10_000 * (math.log(5) - math.log1p(4 * 0.1))
    assert up.log_values[-1] == pytest.approx(best - math.log(2 * len(ODDS)), rel=1e-12)
    down = e_process(one_by_one([1] * 5_000 + [0] * 45_000, 0.5), as_of=50_000)
    assert down.value == pytest.approx(0.5, rel=1e-12)
    assert down.log_peaks[-1] > 1_000
    assert e_process(one_by_one([1] * 10_000, 1e-300), as_of=10_000).value == pytest.approx(
        1e300
    )


def test_a_record_of_ten_thousand_calls_holds_together():
    rng = np.random.default_rng(11)
    starts = rng.integers(0, 5_000, 10_000)
    calls = TimedCalls(
        starts,
        starts + rng.integers(1, 250, 10_000),
        rng.uniform(0.2, 0.8, 10_000),
        rng.random(10_000) < 0.5,
        rng.random(10_000) < 0.95,
    )
    found = e_process(calls, as_of=5_100)
    assert np.isfinite(found.log_values).all()
    assert len(found.days) == len(np.union1d(calls.starts, calls.ends[calls.ends <= 5_100]))
    early = e_process(calls, as_of=2_000)
    assert early.log_values == pytest.approx(
        found.log_values[: len(early.log_values)], abs=1e-10
    )


GOOD = one_by_one([1, 0, 1])


@pytest.mark.parametrize(
    ("changes", "named"),
    [
        ({"chances": np.array([0.5, 0.0, 0.5])}, r"chances holds 0.0, must lie strictly"),
        ({"chances": np.array([0.5, 1.0, 0.5])}, "chances holds 1.0"),
        ({"chances": np.array([0.5, 0.5, np.nan])}, "chances holds nan"),
        ({"chances": np.array([0.5])}, r"chances has shape \(1,\)"),
        ({"right": np.array([[True]])}, r"right has shape \(1, 1\)"),
        ({"settled": np.array([True] * 4)}, r"settled has shape \(4,\)"),
        ({"starts": np.array([0.0, 0.5, 2.0])}, "starts has dtype float64"),
        ({"ends": np.array([1, 1, 3])}, r"ends\[1\]=1 must lie after starts\[1\]=1"),
    ],
)
def test_bad_records_are_named(changes, named):
    with pytest.raises(ValueError, match=named):
        e_process(replace(GOOD, **changes), as_of=3)


@pytest.mark.parametrize(
    ("arguments", "named"),
    [
        ({"level": 0.0}, "level=0.0"),
        ({"level": 1.0}, "level=1.0"),
        ({"level": math.nan}, "level=nan"),
        ({"side": "both"}, "side='both'"),
        ({"odds": []}, r"odds=\[\]"),
        ({"odds": [2.0, 1.0]}, r"odds=\[2.0, 1.0\]"),
        ({"odds": [math.inf]}, r"odds=\[inf\]"),
        ({"odds": [math.nan]}, r"odds=\[nan\]"),
        ({"odds": 2.0}, "odds=2.0"),
    ],
)
def test_bad_arguments_are_named(arguments, named):
    with pytest.raises(ValueError, match=named):
        e_process(GOOD, as_of=3, **arguments)
