import datetime as dt
import zoneinfo

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from foresaid.market.clock import DATE_ONLY, local_times

ZONES = [
    "Europe/Vienna",
    "America/New_York",
    "America/Sao_Paulo",
    "Asia/Tokyo",
    "Asia/Kolkata",
    "Australia/Lord_Howe",
    "Africa/Casablanca",
    "Pacific/Apia",
    "UTC",
]
EPOCH = dt.date(1970, 1, 1)


def expected(text, zone):
    """Return day and minute of one time, through the standard library."""
    if len(text) == 10:
        return (dt.date.fromisoformat(text) - EPOCH).days, DATE_ONLY
    moment = dt.datetime.fromisoformat(text)
    local = moment.astimezone(zoneinfo.ZoneInfo(zone)) if zone else moment
    return (local.date() - EPOCH).days, local.hour * 60 + local.minute + local.second / 60


def both(texts, zones):
    day, minute = local_times(texts, zones)
    assert day.dtype == np.int64
    return list(zip(day.tolist(), minute.tolist(), strict=True))


@st.composite
def written(draw):
    """A date or an instant with an offset, often in a week in which clocks are changed."""
    if draw(st.integers(0, 4)) == 0:
        return draw(st.dates(dt.date(1971, 1, 1), dt.date(2037, 12, 31))).isoformat()
    changes = st.sampled_from(
        [dt.date(y, m, d) for y in (1996, 2007, 2025) for m, d in ((3, 9), (3, 30), (10, 26))]
    )
    near = changes.flatmap(
        lambda at: st.dates(at - dt.timedelta(days=4), at + dt.timedelta(days=4))
    )
    day = draw(st.one_of(near, st.dates(dt.date(1971, 1, 1), dt.date(2037, 12, 31))))
    clock = draw(st.times()).replace(microsecond=0)
    offset = dt.timedelta(minutes=draw(st.sampled_from([-600, -240, 0, 60, 330, 765])))
    moment = dt.datetime.combine(day, clock, tzinfo=dt.timezone(offset))
    return moment.isoformat(timespec=draw(st.sampled_from(["seconds", "minutes"])))


@given(st.lists(st.tuples(written(), st.sampled_from(["", *ZONES])), max_size=12))
def test_each_row_against_the_standard_library(rows):
    texts, zones = [list(column) for column in zip(*rows, strict=True)] or [[], []]
    wanted = [expected(text, zone) for text, zone in rows]
    found = both(texts, zones)
    assert [day for day, _ in found] == [day for day, _ in wanted]
    assert [m for _, m in found] == pytest.approx([m for _, m in wanted], abs=1e-9)


@pytest.mark.parametrize(
    ("text", "zone", "day", "minute"),
    [
        # the two hours before and after clocks are put forward and back
        ("2025-03-30T00:59:59+00:00", "Europe/Vienna", "2025-03-30", 119 + 59 / 60),
        ("2025-03-30T01:00:00+00:00", "Europe/Vienna", "2025-03-30", 180),
        ("2025-10-26T00:30:00+00:00", "Europe/Vienna", "2025-10-26", 150),
        ("2025-10-26T01:30:00+00:00", "Europe/Vienna", "2025-10-26", 150),
        ("2025-03-14T23:30-04:00", "Europe/Vienna", "2025-03-15", 270),
        ("2025-03-14T23:30-04:00", "", "2025-03-14", 1410),
        ("2025-03-14T23:30:30-04:00", "", "2025-03-14", 1410.5),
        ("2025-03-14", "Europe/Vienna", "2025-03-14", DATE_ONLY),
        ("2025-03-14T00:00:00+00:00", "UTC", "2025-03-14", 0),
    ],
)
def test_known_times(text, zone, day, minute):
    ((found_day, found_minute),) = both([text], [zone])
    assert str(np.datetime64(found_day, "D")) == day
    assert found_minute == pytest.approx(minute, abs=1e-9)


def test_the_example_of_rfc_3339():
    # RFC 3339, section 5.8: "1996-12-19T16:39:57-08:00 ... is equivalent to
    # 1996-12-20T00:39:57Z in UTC"
    first, second = both(["1996-12-19T16:39:57-08:00", "1996-12-20T00:39:57Z"], ["UTC", "UTC"])
    assert first == second
    assert str(np.datetime64(first[0], "D")) == "1996-12-20"
    assert first[1] == pytest.approx(39.95, abs=1e-9)
