"""Someone who sees everything and stops when it suits him, against the e-process.

The best that he can do is worked out exactly, by dynamic programming over all that he may
see, and simulated on prices that walk at random.
"""

from fractions import Fraction
from functools import cache
from itertools import product

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.special import ndtr

from foresaid.score.e_process import ODDS, TimedCalls, e_process

FACTORS = (Fraction(3, 2), Fraction(4))
HALF, QUARTER = Fraction(1, 2), Fraction(1, 4)


# Ways to value a record on one day. A call is (start, end, chance); ``known`` holds True, False
# or None for each, None while it is open. All bets are on more right calls than by chance.


def streams_of(calls, day, late=0):
    """Return the calls of each stream, as positions; a call may start ``late`` days early."""
    streams = []
    for i in sorted(range(len(calls)), key=lambda i: (calls[i][0], calls[i][2], i)):
        if calls[i][0] <= day:
            fitting = [s for s in streams if calls[s[-1]][1] <= calls[i][0] + late]
            if fitting:
                fitting[0].append(i)
            else:
                streams.append([i])
    return streams


@cache
def bet(chance, right, theta):
    q = theta * chance / (1 - chance + theta * chance)
    return q / chance if right else (1 - q) / (1 - chance)


def wealth(stream, calls, known, open_counts):
    total = Fraction(0)
    for theta in FACTORS:
        one = Fraction(1)
        for i in stream:
            if known[i] is not None or open_counts:
                one *= bet(calls[i][2], bool(known[i]), theta)
        total += one / len(FACTORS)
    return total


def weighted(calls, known, day, *, open_counts=True, late=0):
    total, left = Fraction(0), Fraction(1)
    for number, stream in enumerate(streams_of(calls, day, late), 1):
        weight = Fraction(1, number * (number + 1))
        left -= weight
        total += weight * wealth(stream, calls, known, open_counts)
    return total + left


def marked_down(calls, known, day):
    return weighted(calls, known, day)


def open_ignored(calls, known, day):
    return weighted(calls, known, day, open_counts=False)


def one_day_of_overlap(calls, known, day):
    return weighted(calls, known, day, late=1)


def equal_average(calls, known, day):
    streams = streams_of(calls, day)
    held = [wealth(stream, calls, known, open_counts=True) for stream in streams]
    return sum(held) / len(held) if held else Fraction(1)


def one_product(calls, known, day):
    """Bets on all calls multiplied, whether they overlap or not, as each settles."""
    begun = [i for i, call in enumerate(calls) if call[0] <= day]
    return wealth(begun, calls, known, open_counts=True)


def by_the_package(calls, known, day):
    starts, ends, chances = (np.array(column) for column in zip(*calls, strict=True))
    settled = np.array([x is not None for x in known])
    right = np.array([x is True for x in known])
    timed = TimedCalls(starts, ends, chances.astype(float), right, settled)
    return e_process(timed, as_of=day, odds=[float(x) for x in FACTORS]).value


# First world: calls fixed beforehand, outcomes independent, and each outcome leaks halfway
# through its window: what is told is true with chance ``truth``.


def best_expectation(calls, truth, value):
    """Return the largest expected value over all rules to stop, what is told included."""
    days = sorted({d for s, e, _ in calls for d in (s, halfway(s, e), e)})
    worth = cache(lambda known, day: value(calls, known, day))

    def told_now(i, day):
        return calls[i][1] > halfway(*calls[i][:2]) == day

    def chance_right(i, told):
        p = calls[i][2]
        if told is None:
            return p
        good, bad = (truth, 1 - truth) if told else (1 - truth, truth)
        return p * good / (p * good + (1 - p) * bad)

    def branches(i, day, told):
        """Yield what may come to be known of one call on a day: chance, told, known."""
        if calls[i][1] == day:
            p = chance_right(i, told)
            yield from ((p, told, True), (1 - p, told, False))
        elif told_now(i, day):
            p = calls[i][2]
            hint = p * truth + (1 - p) * (1 - truth)
            yield from ((hint, True, None), (1 - hint, False, None))

    @cache
    def best(at, told, known):
        now = worth(known, days[at])
        return now if at + 1 == len(days) else max(now, go_on(at + 1, 0, told, known))

    def go_on(at, i, told, known):
        """Average over what the day reveals, call by call."""
        if i == len(calls):
            return best(at, told, known)
        found = list(branches(i, days[at], told[i]))
        if not found:
            return go_on(at, i + 1, told, known)
        return sum(
            chance * go_on(at, i + 1, replaced(told, i, hint), replaced(known, i, outcome))
            for chance, hint, outcome in found
            if chance
        )

    nothing = (None,) * len(calls)
    return go_on(0, 0, nothing, nothing)


def halfway(start, end):
    return start + (end - start + 1) // 2


def replaced(values, i, value):
    return (*values[:i], value, *values[i + 1 :])


EIGHT = (
    (0, 6, HALF),
    (1, 3, Fraction(1, 3)),
    (2, 8, Fraction(2, 3)),
    (3, 5, HALF),
    (3, 9, QUARTER),
    (6, 8, HALF),
    (6, 10, Fraction(3, 4)),
    (8, 12, HALF),
)


@pytest.mark.parametrize("truth", [Fraction(3, 4), Fraction(1)])
def test_no_rule_to_stop_gains_on_eight_calls_that_overlap(truth):
    # whoever never stops gets exactly 1, so the best cannot be less
    assert best_expectation(EIGHT, truth, marked_down) == 1


def test_a_leak_beats_the_version_that_ignores_open_bets():
    assert best_expectation(EIGHT, Fraction(1), open_ignored) > Fraction(11, 10)
    assert best_expectation(EIGHT[:5], Fraction(3, 4), open_ignored) > 1
    assert best_expectation(EIGHT[:5], HALF, open_ignored) == 1  # nothing leaks


def test_one_call_and_a_leak_by_hand():
    """Stop when the leak says wrong: p q/p + (1 - p) 1 with open bets ignored."""
    calls = ((0, 4, HALF),)
    assert bet(HALF, True, FACTORS[0]) == Fraction(6, 5)
    assert bet(HALF, True, FACTORS[1]) == Fraction(8, 5)
    if_right = HALF * Fraction(14, 10) + HALF
    assert best_expectation(calls, Fraction(1), open_ignored) == HALF * if_right + HALF
    assert best_expectation(calls, Fraction(1), marked_down) == 1


def test_an_equal_average_gains_where_a_stream_opens_late():
    """Stop after a first right call; after a wrong one let a second stream lift the average."""
    calls = ((0, 2, HALF), (3, 5, HALF), (3, 5, HALF))
    won, lost = Fraction(14, 10), Fraction(6, 10)
    by_hand = HALF * won + HALF * (lost + 1) / 2
    assert best_expectation(calls, HALF, equal_average) == by_hand == Fraction(11, 10)
    assert best_expectation(calls, HALF, marked_down) == 1


SMALL = st.lists(
    st.tuples(st.integers(0, 5), st.integers(1, 4), st.sampled_from([QUARTER, HALF])),
    min_size=1,
    max_size=4,
).map(lambda drawn: tuple((start, start + length, p) for start, length, p in drawn))


@settings(max_examples=40, deadline=None)
@given(SMALL, st.sampled_from([HALF, Fraction(2, 3), Fraction(1)]))
def test_no_rule_to_stop_gains_on_any_small_record(calls, truth):
    assert best_expectation(calls, truth, marked_down) == 1


@settings(max_examples=15, deadline=None)
@given(SMALL, st.sampled_from([Fraction(2, 3), Fraction(1)]))
def test_no_rule_to_stop_gains_on_the_package(calls, truth):
    assert best_expectation(calls, truth, by_the_package) == pytest.approx(1, abs=1e-12)


@settings(max_examples=40, deadline=None)
@given(SMALL, st.data())
def test_the_package_marks_down_like_the_fractions(calls, data):
    day = data.draw(st.integers(0, 10))
    known = tuple(data.draw(st.booleans()) if end <= day else None for _, end, _ in calls)
    exact = float(marked_down(calls, known, day))
    assert by_the_package(calls, known, day) == pytest.approx(exact, rel=1e-12)


# Second world: a price that goes up or down by one, a forecaster who makes his calls as he
# goes, and sees the price and his record. Outcomes of calls that overlap depend on each other.

UP = Fraction(3, 5)
LAST_DAY = 4


@cache
def chance_of(length, rises):
    """Return the chance that the price ends higher (lower) after a number of days."""
    total = Fraction(0)
    for steps in product((1, -1), repeat=length):
        ups = steps.count(1)
        if sum(steps) * (1 if rises else -1) > 0:
            total += UP**ups * (1 - UP) ** (length - ups)
    return total


CHOICES = (
    (),
    ((1, True),),
    ((2, True),),
    ((3, False),),
    ((2, True), (2, True)),
)


def most_a_schemer_gains(value):
    """Return the largest expectation over all rules to call and to stop."""

    def known_of(calls, path):
        day = len(path) - 1
        return tuple(
            (path[end] - path[start]) * (1 if rises else -1) > 0 if end <= day else None
            for (start, end, _), rises in calls
        )

    def best(calls, path):
        day = len(path) - 1
        timed = tuple(call for call, _ in calls)
        now = value(timed, known_of(calls, path), day)
        if day == LAST_DAY:
            return now
        return max(now, *(step(calls, path, choice) for choice in CHOICES if fits(choice, day)))

    def fits(choice, day):
        return all(day + length <= LAST_DAY for length, _ in choice)

    def step(calls, path, choice):
        day = len(path) - 1
        made = tuple(
            ((day, day + length, chance_of(length, rises)), rises) for length, rises in choice
        )
        up, down = ((*path, path[-1] + move) for move in (1, -1))
        return UP * best(calls + made, up) + (1 - UP) * best(calls + made, down)

    return best((), (0,))


def test_no_way_to_call_and_to_stop_gains():
    assert most_a_schemer_gains(marked_down) == 1


@pytest.mark.parametrize(
    "value", [open_ignored, one_day_of_overlap, equal_average, one_product]
)
def test_a_schemer_gains_on_every_other_version(value):
    assert most_a_schemer_gains(value) > 1


# Third: prices that walk at random, a forecaster without skill whose views stick, and someone
# who watches the prices.

N_DAYS, EVERY, LENGTHS = 400, 4, (20, 40, 60)


def sticky_record(rng):
    price = np.concatenate([[0.0], np.cumsum(rng.normal(size=N_DAYS))])
    starts = np.arange(0, N_DAYS - max(LENGTHS), EVERY)
    lengths = rng.choice(LENGTHS, len(starts))
    sign = np.where(np.cumsum(rng.random(len(starts)) < 0.1) % 2 == 0, 1, -1)
    mark = rng.choice([0.0, 0.25, 0.5], len(starts)) * np.sqrt(lengths)
    right = sign * (price[starts + lengths] - price[starts]) > mark
    calls = TimedCalls(
        starts,
        starts + lengths,
        ndtr(-mark / np.sqrt(lengths)),
        right,
        np.ones(len(starts), dtype=bool),
    )
    return price, sign, mark, calls


def textbook(calls, rows):
    """Return days of settlement and the mean over odds of the products, as calls settle."""
    order = rows[np.argsort(calls.ends[rows], kind="stable")]
    logs = np.array(
        [
            np.where(calls.right[order], np.log(theta), 0.0)
            - np.log1p((theta - 1) * calls.chances[order])
            for theta in ODDS
        ]
    )
    return calls.ends[order], np.exp(np.cumsum(logs, axis=1)).mean(axis=0)


def day_to_stop(price, sign, mark, calls):
    """Return the first day on which the open calls look bad, the last day if there is none."""
    for day in range(max(LENGTHS), N_DAYS):
        is_open = (calls.starts <= day) & (calls.ends > day)
        if is_open.any():
            ahead = sign * (price[day] - price[calls.starts]) - mark
            left = np.sqrt(np.maximum(calls.ends - day, 1))
            looks = ndtr(ahead / left) - calls.chances
            if looks[is_open].mean() < -0.25:
                return day
    return N_DAYS


def without_overlap(calls):
    """Return the rows of the first stream: calls one after the other."""
    rows, last = [], -1
    for row in np.argsort(calls.starts, kind="stable").tolist():
        if calls.starts[row] >= last:
            rows.append(row)
            last = calls.ends[row]
    return np.array(rows)


@pytest.mark.slow
def test_a_peeker_on_prices_that_walk_at_random():
    rng = np.random.default_rng(20)
    n_worlds = 400
    seen = []
    for _ in range(n_worlds):
        price, sign, mark, calls = sticky_record(rng)
        found = e_process(calls, as_of=N_DAYS)
        _, wealth_then = textbook(calls, np.arange(len(calls.starts)))
        stop = day_to_stop(price, sign, mark, calls)
        honest = e_process(calls, as_of=stop)
        first = without_overlap(calls)
        first_days, first_wealth = textbook(calls, first)
        ended = int(np.searchsorted(first_days, stop, side="right"))
        seen.append(
            (
                found.passed is not None,
                wealth_then.max() >= 20,
                honest.value,
                first_wealth[ended - 1] if ended else 1.0,
            )
        )
    passed, textbook_passed, at_stop, textbook_at_stop = np.array(seen, dtype=float).T
    band = 3 * np.sqrt(0.05 * 0.95 / n_worlds)
    assert passed.mean() <= 0.05 + band
    assert textbook_passed.mean() > 0.15
    assert at_stop.mean() <= 1 + 3 * at_stop.std() / np.sqrt(n_worlds)
    assert textbook_at_stop.mean() > 1 + 3 * textbook_at_stop.std() / np.sqrt(n_worlds)


@pytest.mark.slow
def test_false_alarms_of_calls_one_after_the_other_and_skill_that_is_found():
    """Only half of the wealth is bet here: few false alarms, and skill is still found."""
    rng = np.random.default_rng(21)
    days = np.arange(200)
    known = np.ones(200, dtype=bool)

    def share(rate, level):
        return np.mean(
            [
                e_process(
                    TimedCalls(
                        days, days + 1, np.full(200, 0.5), rng.random(200) < rate, known
                    ),
                    as_of=200,
                    level=level,
                ).passed
                is not None
                for _ in range(500)
            ]
        )

    assert 0.02 < share(0.5, 0.2) <= 0.2 + 3 * np.sqrt(0.2 * 0.8 / 500)
    assert share(0.5, 0.05) <= 0.05 + 3 * np.sqrt(0.05 * 0.95 / 500)
    assert share(0.65, 0.05) > 0.7
