import datetime as dt
import warnings

import pytest

from foresaid.ingest.dates import parse_date, parse_said_at
from foresaid.model.said import CellFault, SaidAt

DAY = dt.date(2025, 3, 14)


@pytest.mark.parametrize(
    ("text", "order"),
    [
        ("2025-03-14", "iso"),
        ("20250314", "iso"),
        ("2025-03-14 00:00:00", "iso"),
        ("2025-03-14T00:00", "iso"),
        ("2025-03-14 00:00:00-05:00", "iso"),
        ("2025-03-14T00:00:00.000Z", "iso"),
        ("2025-03-14", "dmy"),
        ("14/03/2025", "dmy"),
        ("14.3.2025", "dmy"),
        ("14-03-2025", "dmy"),
        ("3/14/2025", "mdy"),
    ],
)
def test_dates_are_read(text, order):
    assert parse_date(text, order=order) == DAY


def test_an_ambiguous_date_shows_both_readings():
    fault = parse_date("03/04/2025")
    assert fault.code == "ambiguous-date"
    assert "3 April 2025" in fault.message
    assert "4 March 2025" in fault.message
    assert "--dates dmy" in fault.hint
    assert "--dates mdy" in fault.hint


def test_orders_decide_an_ambiguous_date():
    assert parse_date("03/04/2025", order="dmy") == dt.date(2025, 4, 3)
    assert parse_date("03/04/2025", order="mdy") == dt.date(2025, 3, 4)


@pytest.mark.parametrize(
    ("text", "order", "code", "hint"),
    [
        ("2025-02-31", "iso", "no-such-date", "The last day of February 2025 is 2025-02-28."),
        ("2024-02-30", "iso", "no-such-date", "The last day of February 2024 is 2024-02-29."),
        ("31/04/2025", "dmy", "no-such-date", "The last day of April 2025 is 2025-04-30."),
        (
            "14/03/2025",
            "iso",
            "not-iso-date",
            "Write 2025-03-14, or pass --dates dmy for the file.",
        ),
        (
            "04/04/2025",
            "iso",
            "not-iso-date",
            "Write 2025-04-04, or pass --dates dmy for the file.",
        ),
        ("2025/3/14", "iso", "not-iso-date", "Write 2025-03-14."),
        ("14/03/25", "dmy", "two-digit-year", "Write the year with four digits."),
        ("2025-03-14 16:30", "iso", "not-a-date", "Write 2025-03-14 alone."),
    ],
)
def test_a_wrong_date_comes_with_what_to_write(text, order, code, hint):
    fault = parse_date(text, order=order)
    assert (fault.code, fault.hint) == (code, hint)


@pytest.mark.parametrize(
    ("text", "code"),
    [("", "empty"), ("2025-13-01", "no-such-date"), ("2025-00-10", "no-such-date"),
     ("14 March", "not-a-date"), ("=TODAY()", "not-a-date"),
     ("1500-01-01", "year-out-of-range"), ("9999-01-01", "year-out-of-range"),
     ("0000-01-01", "year-out-of-range")],
)  # fmt: skip
def test_what_is_no_date_is_refused(text, code):
    assert parse_date(text).code == code


def test_a_spreadsheet_number_names_the_date_it_may_be():
    fault = parse_date("45730")
    assert fault.code == "serial-date"
    assert "2025-03-14" in fault.message


def test_a_day_in_the_other_order_is_pointed_out():
    fault = parse_date("03/14/2025", order="dmy")
    assert fault.code == "no-such-date"
    assert "2025-03-14" in fault.hint


def test_a_date_alone_has_no_instant():
    said = parse_said_at("2025-03-14")
    assert said == SaidAt(DAY, None, None, "", "2025-03-14")


@pytest.mark.parametrize(
    ("text", "zone", "canonical"),
    [
        ("2025-03-14T12:15-04:00", "-04:00", "2025-03-14T12:15:00-04:00"),
        ("2025-03-14T12:15:30-0400", "-04:00", "2025-03-14T12:15:30-04:00"),
        ("2025-03-14T16:15Z", "+00:00", "2025-03-14T16:15:00+00:00"),
        ("2025-03-14 12:15 America/New_York", "America/New_York", "2025-03-14T12:15:00-04:00"),
        ("2025-03-14 9:05:07.25 Europe/Vienna", "Europe/Vienna", "2025-03-14T09:05:07+01:00"),
        ("2025-03-14T21:45 Asia/Kathmandu", "Asia/Kathmandu", "2025-03-14T21:45:00+05:45"),
    ],
)
def test_moments_become_rfc_3339(text, zone, canonical):
    said = parse_said_at(text)
    assert (said.zone, said.text) == (zone, canonical)
    assert said.utc == dt.datetime.fromisoformat(canonical)
    assert said.utc.utcoffset() == dt.timedelta(0)
    assert said.date == DAY
    assert said.time.isoformat() == canonical[11:19]


def test_a_time_without_a_zone_waits_for_one():
    said = parse_said_at("2025-03-14 12:15")
    assert (said.time, said.utc, said.zone) == (dt.time(12, 15), None, "")
    placed = said.in_zone("Europe/Vienna")
    assert placed.text == "2025-03-14T12:15:00+01:00"
    assert placed.in_zone("Asia/Tokyo") == placed


def test_a_date_alone_needs_no_zone():
    said = parse_said_at("2025-03-14")
    assert said.in_zone("Europe/Vienna") is said


def test_the_hour_that_clocks_skip_is_refused():
    fault = parse_said_at("2025-03-30 02:30 Europe/Vienna")
    assert fault.code == "no-such-time"


def test_the_hour_that_clocks_repeat_asks_for_the_offset():
    fault = parse_said_at("2025-10-26 02:30 Europe/Vienna")
    assert fault.code == "ambiguous-time"
    assert "2025-10-26T02:30:00+02:00" in fault.hint
    assert "2025-10-26T02:30:00+01:00" in fault.hint
    assert isinstance(parse_said_at("2025-10-26T02:30:00+02:00"), SaidAt)


@pytest.mark.parametrize(
    ("name", "meant"),
    [
        ("Europe/Viena", "Europe/Vienna"),
        ("new york", "America/New_York"),
        ("Tokyo", "Asia/Tokyo"),
    ],
)
def test_an_unknown_zone_names_the_nearest(name, meant):
    fault = parse_said_at(f"2025-03-14 12:15 {name}")
    assert fault.code == "unknown-zone"
    assert meant in fault.hint


@pytest.mark.parametrize(
    "name", ["../../etc/passwd", "/etc/localtime", "America", "x" * 5000, "EDT", "Europe/\0"]
)
def test_a_name_that_is_no_zone_is_a_fault(name):
    assert parse_said_at(f"2025-03-14 12:15 {name}").code == "unknown-zone"


@pytest.mark.parametrize(
    ("text", "code"),
    [("2025-03-14T25:15Z", "bad-time"), ("2025-03-14T12:60Z", "bad-time"),
     ("2025-03-14 02:15 pm", "bad-time"), ("2025-03-14T12:15+15:00", "bad-offset"),
     ("2025-02-30T12:15Z", "no-such-date"), ("03/04/2025 12:15", "ambiguous-date"),
     ("yesterday", "not-a-date"), ("", "empty")],
)  # fmt: skip
def test_what_is_no_moment_is_refused(text, code):
    fault = parse_said_at(text)
    assert isinstance(fault, CellFault)
    assert fault.code == code


def test_the_date_part_may_have_another_order():
    assert parse_said_at("14/03/2025 12:15 Europe/Vienna", order="dmy").date == DAY


def test_local_mean_time_is_written_in_utc():
    said = parse_said_at("1850-03-14 12:15 Europe/Vienna")
    assert said.text.endswith("+00:00")
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        assert dt.datetime.fromisoformat(said.text) == said.utc
