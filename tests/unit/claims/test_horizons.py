import calendar
from datetime import date, timedelta

import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

from foresaid.claims.claim import PhraseError
from foresaid.claims.horizons import FORMS, Horizon, add_months, parse_horizon
from foresaid.model.codebook import default_codebook
from support.phrases import phrases_in

BOOK = default_codebook()
FRIDAY = date(2025, 3, 14)


def read(text, said=FRIDAY):
    return parse_horizon(text, said=said, codebook=BOOK)


def fault_of(text, said=FRIDAY):
    with pytest.raises(PhraseError) as caught:
        read(text, said)
    return caught.value


@pytest.mark.parametrize(
    ("typed", "text", "deadline"),
    [
        ("6 months", "6 months", date(2025, 9, 14)),
        ("1 month", "1 month", date(2025, 4, 14)),
        ("1 months", "1 month", date(2025, 4, 14)),
        ("2 week", "2 weeks", date(2025, 3, 28)),
        ("10 days", "10 days", date(2025, 3, 24)),
        ("1 year", "1 year", date(2026, 3, 14)),
        ("06 months", "6 months", date(2025, 9, 14)),
        ("  6   MONTHS. ", "6 months", date(2025, 9, 14)),
        ("2025-06-30", "2025-06-30", date(2025, 6, 30)),
        ("by 2025-06-30", "2025-06-30", date(2025, 6, 30)),
        ("2025-03-14", "2025-03-14", FRIDAY),
        ("end of June 2025", "end of June 2025", date(2025, 6, 30)),
        ("by end of jun 2025", "end of June 2025", date(2025, 6, 30)),
        ("end of Feb 2028", "end of February 2028", date(2028, 2, 29)),
        ("end of February 2100", "end of February 2100", date(2100, 2, 28)),
        ("end of May 2025", "end of May 2025", date(2025, 5, 31)),
        ("end of 2025", "end of 2025", date(2025, 12, 31)),
        ("end of Q1 2025", "end of Q1 2025", date(2025, 3, 31)),
        ("end of q2 2025", "end of Q2 2025", date(2025, 6, 30)),
        ("end of Q3 2025", "end of Q3 2025", date(2025, 9, 30)),
        ("end of Q4 2026", "end of Q4 2026", date(2026, 12, 31)),
        ("end of week", "end of week", date(2025, 3, 16)),
        ("by the end of week", "by the end of week", None),
        ("end of the week", "end of week", date(2025, 3, 16)),
        ("end of month", "end of month", date(2025, 3, 31)),
        ("End of Quarter", "end of quarter", date(2025, 3, 31)),
        ("end of the year", "end of year", date(2025, 12, 31)),
        ("2199-12-31", "2199-12-31", date(2199, 12, 31)),
    ],
)
def test_forms(typed, text, deadline):
    if deadline is None:
        assert "is not understood" in fault_of(typed).message
        return
    assert read(typed) == Horizon(text, deadline, None, imputed=False)


@pytest.mark.parametrize(
    ("typed", "text", "sessions"),
    [("10 sessions", "10 sessions", 10), ("1 session", "1 session", 1)],
)
def test_sessions_have_no_date(typed, text, sessions):
    assert read(typed) == Horizon(text, None, sessions, imputed=False)


@pytest.mark.parametrize("word", sorted(BOOK.horizon_words))
def test_words_are_imputed_by_the_codebook(word):
    found = read(word.upper())
    by_length = read(BOOK.horizon_words[word].length)
    assert found.imputed
    assert found.text == word
    assert (found.deadline, found.sessions) == (by_length.deadline, by_length.sessions)


@pytest.mark.parametrize("typed", ["", "   ", "."])
def test_silence_is_imputed(typed):
    assert read(typed) == Horizon("", date(2026, 3, 14), None, imputed=True)


@pytest.mark.parametrize("form", FORMS)
def test_every_form_that_is_offered_is_read(form):
    assert not read(form, said=date(2025, 1, 2)).imputed


@pytest.mark.parametrize(
    ("start", "months", "end"),
    [
        (date(2024, 1, 31), 1, date(2024, 2, 29)),
        (date(2023, 1, 31), 1, date(2023, 2, 28)),
        (date(2024, 8, 31), 6, date(2025, 2, 28)),
        (date(2024, 2, 29), 12, date(2025, 2, 28)),
        (date(2024, 2, 29), 48, date(2028, 2, 29)),
        (date(1900, 1, 29), 1, date(1900, 2, 28)),
        (date(2000, 1, 29), 1, date(2000, 2, 29)),
        (date(2024, 12, 15), 1, date(2025, 1, 15)),
        (date(2024, 11, 30), 3, date(2025, 2, 28)),
        (date(2024, 5, 31), 0, date(2024, 5, 31)),
    ],
)
def test_months_are_clamped(start, months, end):
    assert add_months(start, months) == end


@given(st.dates(date(1900, 1, 1), date(2150, 12, 31)), st.integers(0, 600))
def test_added_months_never_leave_the_month(start, months):
    end = add_months(start, months)
    count = 12 * end.year + end.month - 12 * start.year - start.month
    assert count == months
    assert end.day <= start.day
    if end.day < start.day:
        assert end.day == calendar.monthrange(end.year, end.month)[1]
    assert end == (pd.Timestamp(start) + pd.DateOffset(months=months)).date()


# ISO 8601: a week runs from Monday to Sunday. The two dates are the standard's own examples of
# weeks that belong to another year: 2008-12-29 is 2009-W01-1, 2010-01-03 is 2009-W53-7.
@pytest.mark.parametrize(
    ("said", "end", "iso"),
    [
        (date(2008, 12, 29), date(2009, 1, 4), (2009, 1, 1)),
        (date(2010, 1, 3), date(2010, 1, 3), (2009, 53, 7)),
    ],
)
def test_weeks_of_iso_8601(said, end, iso):
    assert tuple(said.isocalendar()) == iso
    assert read("end of week", said).deadline == end
    assert end.isocalendar()[:2] == said.isocalendar()[:2]
    assert end.isocalendar().weekday == 7


@given(st.dates(date(1950, 1, 1), date(2150, 1, 1)))
def test_ends_of_the_running_period(said):
    week, month, quarter, year = (
        read(f"end of {period}", said).deadline
        for period in ("week", "month", "quarter", "year")
    )
    assert said <= week < said + timedelta(days=7)
    assert week.weekday() == 6
    assert said <= month <= quarter <= year == date(said.year, 12, 31)
    stamp = pd.Timestamp(said)
    assert month == (stamp + pd.offsets.MonthEnd(0)).date()
    assert quarter == (stamp + pd.offsets.QuarterEnd(0)).date()


@given(
    st.dates(date(1950, 1, 1), date(2150, 1, 1)),
    st.integers(1, 500),
    st.sampled_from(["session", "day", "week", "month"]),
)
def test_a_canonical_length_reads_as_itself(said, count, unit):
    found = read(f"{count} {unit}s", said)
    assert read(found.text, said) == found
    assert (found.deadline is None) == (unit == "session")


@pytest.mark.parametrize(
    ("typed", "message", "hint"),
    [
        ("0 months", "`0 months` has no length", "at least 1"),
        ("2025-02-30", "there is no day 2025-02-30", "a date that exists"),
        ("2025-13-01", "there is no day 2025-13-01", "a date that exists"),
        ("2025-03-13", "the deadline 2025-03-13 is before the statement", "mend the date"),
        ("end of 2024", "the deadline 2024-12-31 is before", "mend the date"),
        ("end of June", "does not say of which year", "`end of June 2025`"),
        ("end of sep", "does not say of which year", "`end of September 2025`"),
        ("end of Q2", "`end of q2` is not understood", "`end of"),
        ("end of Q5 2025", "is not understood", "`end of"),
        ("end of Juli 2025", "is not understood", "`end of Jul 2025`"),
        ("end of 0000", "leads beyond the calendar", "nearer"),
        ("9999 years", "leads beyond the calendar", "nearer"),
        ("2200-01-01", "beyond the year 2199", "nearer"),
        ("200 years", "beyond the year 2199", "nearer"),
        ("six months", "`six months` is not understood", "`"),
        ("6 monts", "is not understood", "`6 months`"),
        ("son", "is not understood", "`soon`"),
        ("10000 days", "is not understood", "`"),
        ("-3 months", "is not understood", "`"),
        ("2025-6-30", "is not understood", "`2025-06-30`"),
        ("30.06.2025", "is not understood", "`"),
        ("xyzzy", "is not understood", "`6 months`, `2 weeks`"),
    ],
)
def test_faults(typed, message, hint):
    fault = fault_of(typed)
    assert message in fault.message
    assert hint in fault.hint
    for form in phrases_in(fault.hint):
        assert read(form, said=date(2025, 1, 2)).text


@given(st.text(max_size=20), st.dates(date(1950, 1, 1), date(2150, 1, 1)))
def test_whatever_is_typed_is_a_horizon_or_a_fault(text, said):
    fault, found = None, None
    try:
        found = read(text, said)
    except PhraseError as raised:
        fault = raised
    if found is None:
        assert fault.hint
        return
    assert (found.deadline is None) != (found.sessions is None)
    assert found.deadline is None or found.deadline >= said
