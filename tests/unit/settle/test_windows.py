"""Where calls are judged, against tables worked by hand from docs/settlement.md.

Day 0 of these tables is Monday 2025-03-10.
"""

from dataclasses import replace
from datetime import date, timedelta

import numpy as np
import pytest

from foresaid.market.histories import build_market
from foresaid.model.codebook import default_codebook
from foresaid.model.price_history import PriceHistory
from foresaid.model.records import Instrument
from foresaid.settle.windows import REASONS, CallTimes, resolve_windows

BOOK = default_codebook()
RULES = BOOK.settlement
MONDAY = date(2025, 3, 10)
DAY0 = (MONDAY - date(1970, 1, 1)).days
TWO_WEEKS = [0, 1, 2, 3, 4, 7, 8, 9, 10, 11]
DAY = Instrument("DAY", kind="share", opens="09:00", closes="17:30")
NIGHT = Instrument("NIGHT", kind="commodity", opens="18:00", closes="17:00")
COIN = Instrument("COIN", kind="coin")
UNKNOWN = Instrument("UNKNOWN", kind="share")


def clock(text):
    hours, minutes = text.split(":")
    return int(hours) * 60.0 + int(minutes)


def resolve(
    said,
    time=None,
    *,
    deadline=None,
    sessions=0,
    instrument=DAY,
    days=TWO_WEEKS,
    as_of=None,
    rules=RULES,
):
    """Return what is found for one call: reference, first, last (as days), and its state."""
    days = np.array(days, dtype=np.int64)
    close = np.arange(1.0, len(days) + 1)
    nan = np.full(len(days), np.nan)
    last = as_of if as_of is not None else (int(days[-1]) if len(days) else 0)
    market = build_market(
        [instrument],
        {instrument.symbol: PriceHistory(DAY0 + days, nan, nan, close)},
        [],
        {},
        BOOK,
        as_of=MONDAY + timedelta(days=last),
    )
    times = CallTimes(
        np.array([0]),
        np.array([DAY0 + said]),
        np.array([clock(time) if time else -1.0]),
        np.array([DAY0 + deadline if deadline is not None else 0]),
        np.array([sessions]),
    )
    found = resolve_windows(times, market, rules)
    windows = found.windows
    n = len(market.bars.day)
    for positions in (windows.reference, windows.first, windows.last):
        assert n == 0 or (positions[0] < n)
    known = market.bars.day - DAY0

    def at(positions):
        return int(known[positions[0]])

    state = "matured" if found.matured[0] else "running" if found.running[0] else ""
    assert not (found.matured[0] and found.running[0])
    reason = REASONS[found.reason[0]]
    if not state:
        assert reason
        return reason
    return at(windows.reference), at(windows.first), at(windows.last), state


@pytest.mark.parametrize(
    ("said", "time", "reference", "first"),
    [
        # a venue by day: opens 09:00, closes 17:30
        (0, "00:00", 0, 0),
        (0, "08:59", 0, 0),
        (0, "09:00", 0, 1),
        (0, "12:00", 0, 1),
        (0, "17:30", 0, 1),
        (0, "17:31", 1, 1),
        (0, "23:59", 1, 1),
        (4, "17:31", 7, 7),
        (5, "12:00", 7, 7),
        (6, "23:00", 7, 7),
        (7, "08:00", 7, 7),
        (-3, "12:00", 0, 0),
        # a date alone counts as before that day's close; its path starts the next session
        (0, None, 0, 1),
        (4, None, 4, 7),
        (5, None, 7, 7),
        (6, None, 7, 7),
    ],
)
def test_a_venue_by_day(said, time, reference, first):
    assert resolve(said, time, deadline=10) == (reference, first, 10, "matured")


@pytest.mark.parametrize(
    ("said", "time", "reference", "first"),
    [
        # the session of a day opens at 18:00 the evening before and closes at 17:00
        (0, "12:00", 0, 1),
        (0, "17:00", 0, 1),
        (0, "17:30", 1, 1),
        (0, "18:00", 1, 2),
        (0, "20:00", 1, 2),
        (4, "17:30", 7, 7),
        (4, "20:00", 7, 7),
        (6, "17:59", 7, 7),
        (6, "18:00", 7, 8),
        (6, "20:00", 7, 8),
        (0, None, 0, 1),
    ],
)
def test_a_venue_by_night(said, time, reference, first):
    found = resolve(said, time, deadline=10, instrument=NIGHT)
    assert found == (reference, first, 10, "matured")


@pytest.mark.parametrize(
    ("said", "time", "reference", "first"),
    [(0, "00:00", 0, 1), (0, "12:00", 0, 1), (0, "23:59", 0, 1), (5, "12:00", 7, 7)],
)
def test_unknown_hours_are_the_whole_day(said, time, reference, first):
    found = resolve(said, time, deadline=10, instrument=UNKNOWN)
    assert found == (reference, first, 10, "matured")


@pytest.mark.parametrize(
    ("said", "reference", "first"), [(0, 1, 1), (3, 4, 4), (4, 7, 7), (5, 7, 7)]
)
def test_a_date_alone_may_count_as_after_the_close(said, reference, first):
    rules = replace(RULES, day_only="after-close")
    assert resolve(said, deadline=10, rules=rules) == (reference, first, 10, "matured")
    # a stated time overrides it
    assert resolve(said, "08:00", deadline=10, rules=rules)[0] == (said if said < 5 else 7)


@pytest.mark.parametrize(
    ("deadline", "as_of", "expected"),
    [
        (3, 11, (0, 1, 3, "matured")),
        (4, 11, (0, 1, 4, "matured")),
        (5, 11, (0, 1, 4, "matured")),
        (6, 11, (0, 1, 4, "matured")),
        (7, 11, (0, 1, 7, "matured")),
        (11, 11, (0, 1, 11, "matured")),
        (1, 1, (0, 1, 1, "matured")),
        (12, 11, (0, 1, 11, "running")),
        (40, 11, (0, 1, 11, "running")),
        (3, 2, (0, 1, 2, "running")),
        (3, 0, "the window still runs"),
        # a share trades on no weekend: Sunday's close of business needs no Monday
        (5, 4, (0, 1, 4, "running")),
        (5, 5, (0, 1, 4, "matured")),
        (6, 5, (0, 1, 4, "running")),
        (6, 6, (0, 1, 4, "matured")),
        (0, 11, "the deadline close is the reference close"),
    ],
)
def test_deadlines_of_a_share(deadline, as_of, expected):
    days = [day for day in TWO_WEEKS if day <= as_of]
    assert resolve(0, "12:00", deadline=deadline, days=days, as_of=as_of) == expected


def test_a_coin_may_still_trade_at_the_weekend():
    days = [0, 1, 2, 3, 4]
    found = resolve(0, deadline=5, days=days, as_of=5, instrument=COIN)
    assert found == (0, 1, 4, "running")
    assert resolve(0, deadline=5, days=[*days, 5], as_of=5, instrument=COIN)[2:] == (
        5,
        "matured",
    )


def test_a_weekday_without_a_price_is_waited_for():
    # Friday has no price: it may be a holiday or a price that is not here yet
    days = [0, 1, 2, 3]
    assert resolve(0, deadline=6, days=days, as_of=6)[3] == "running"
    assert resolve(0, deadline=6, days=[*days, 7], as_of=7) == (0, 1, 3, "matured")


@pytest.mark.parametrize(
    ("gap", "expected"),
    [
        (10, (0, 1, 4, "matured")),
        # what is final before such a deadline stays so; the deadline session is not known
        (11, (0, 1, 4, "running")),
        (12, (0, 1, 4, "running")),
    ],
)
def test_a_deadline_rolls_back_no_further_than_the_codebook_allows(gap, expected):
    days = [0, 1, 2, 3, 4, 4 + gap + 2]
    assert resolve(0, deadline=4 + gap, days=days) == expected


def test_a_longer_roll_back():
    rules = replace(RULES, roll_back_days=30)
    found = resolve(0, deadline=25, days=[0, 1, 2, 40], rules=rules)
    assert found == (0, 1, 2, "matured")


def test_sessions_do_not_roll_back():
    assert resolve(0, sessions=3, days=[0, 1, 2, 60]) == (0, 1, 60, "matured")


@pytest.mark.parametrize(
    ("sessions", "expected"),
    [
        (1, (0, 1, 1, "matured")),
        (5, (0, 1, 7, "matured")),
        (9, (0, 1, 11, "matured")),
        (10, (0, 1, 11, "running")),
        (9_999, (0, 1, 11, "running")),
    ],
)
def test_sessions_are_counted_from_the_reference(sessions, expected):
    assert resolve(0, "12:00", sessions=sessions) == expected


def test_sessions_after_the_close_count_from_the_next():
    assert resolve(0, "18:00", sessions=1) == (1, 1, 2, "matured")
    assert resolve(11, "12:00", sessions=1) == "the window still runs"
    assert resolve(11, "18:00", sessions=1) == "no price yet on or after the statement"


@pytest.mark.parametrize(
    ("said", "time", "deadline", "reason"),
    [
        (12, "12:00", 20, "no price yet on or after the statement"),
        (11, "18:00", 20, "no price yet on or after the statement"),
        (5, "12:00", 6, "the deadline is before the reference session"),
        (4, "18:00", 4, "the deadline is before the reference session"),
        (7, "12:00", 7, "the deadline close is the reference close"),
        (5, "12:00", 7, "the deadline close is the reference close"),
    ],
)
def test_windows_that_are_none(said, time, deadline, reason):
    assert resolve(said, time, deadline=deadline) == reason


@pytest.mark.parametrize("sessions", [0, 5])
def test_an_empty_history_has_no_reference(sessions):
    found = resolve(3, "12:00", deadline=9, sessions=sessions, days=[], as_of=11)
    assert found == "no price yet on or after the statement"


def test_an_empty_history_after_long_ones_has_no_reference():
    day = np.arange(0, 40_000, dtype=np.int64)
    nan = np.full(len(day), np.nan)
    long = PriceHistory(day, nan, nan, nan + 1.0)
    long = replace(long, close=np.ones(len(day)))
    market = build_market(
        [Instrument("LONG"), Instrument("NONE"), Instrument("TAIL")],
        {"LONG": long, "TAIL": long},
        [],
        {},
        BOOK,
        as_of=date(2060, 1, 1),
    )
    times = CallTimes(
        np.array([1]), np.array([DAY0]), np.array([-1.0]), np.array([DAY0 + 30]), np.array([0])
    )
    found = resolve_windows(times, market, RULES)
    assert REASONS[found.reason[0]] == "no price yet on or after the statement"
    assert not found.running[0]


def test_what_is_rolled_back_is_told():
    def rolled(**horizon):
        days = np.array(TWO_WEEKS)
        nan = np.full(len(days), np.nan)
        market = build_market(
            [DAY],
            {"DAY": PriceHistory(DAY0 + days, nan, nan, days + 1.0)},
            [],
            {},
            BOOK,
            as_of=MONDAY + timedelta(days=11),
        )
        times = CallTimes(
            np.array([0]),
            np.array([DAY0]),
            np.array([-1.0]),
            np.array([DAY0 + horizon.get("deadline", 0)]),
            np.array([horizon.get("sessions", 0)]),
        )
        return bool(resolve_windows(times, market, RULES).rolled_back[0])

    assert rolled(deadline=6)
    assert not rolled(deadline=7)
    assert not rolled(deadline=40)
    assert not rolled(sessions=5)


def test_no_calls_at_all():
    nan = np.full(2, np.nan)
    market = build_market(
        [DAY],
        {"DAY": PriceHistory(np.array([1, 2]), nan, nan, np.ones(2))},
        [],
        {},
        BOOK,
        as_of=MONDAY,
    )
    none = np.zeros(0, dtype=np.int64)
    found = resolve_windows(
        CallTimes(none, none, none.astype(float), none, none), market, RULES
    )
    assert len(found.windows) == 0
