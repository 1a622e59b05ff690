"""Horizons: by when a claim is judged, from words and the date of the statement.

Dates are counted from the publication date in the venue's zone. A number of months leads to
the same day of the month that many calendar months on, or to the month's last day where there
is no such day. A week ends on Sunday (ISO 8601: it begins on Monday), a quarter with March,
June, September and December. A deadline that is no session is rolled back when it is settled,
not here.
"""

from __future__ import annotations

import calendar
import difflib
import re
from dataclasses import dataclass, replace
from datetime import date, timedelta
from typing import TYPE_CHECKING

from foresaid.claims.claim import PhraseError

if TYPE_CHECKING:
    from foresaid.model.codebook import Codebook

LENGTH = re.compile(r"(\d{1,4}) (session|day|week|month|year)s?")
ISO_DATE = re.compile(r"\d{4}-\d{2}-\d{2}")
END_OF_DATED = re.compile(r"end of (?:(?P<month>[a-z]+) |q(?P<quarter>[1-4]) )?(?P<year>\d{4})")
PERIODS = ("week", "month", "quarter", "year")
MONTHS = {name.lower(): number for number, name in enumerate(calendar.month_name) if name}
MONTHS |= {name.lower(): number for number, name in enumerate(calendar.month_abbr) if name}
LAST_YEAR = 2199
FORMS = (
    "6 months",
    "2 weeks",
    "10 sessions",
    "2025-06-30",
    "end of June 2025",
    "end of 2025",
    "end of week",
    "end of quarter",
)


@dataclass(frozen=True, slots=True)
class Horizon:
    """When a claim is judged.

    Attributes
    ----------
    text : str
        Canonical form; empty when nothing was said.
    deadline : date or None
        Calendar date of the deadline; None when it is counted in sessions.
    sessions : int or None
        Sessions after the reference session; None when there is a date.
    imputed : bool
        Whether the codebook, not the statement, supplied it.
    """

    text: str
    deadline: date | None
    sessions: int | None
    imputed: bool = False


def add_months(start: date, months: int) -> date:
    """Return the same day ``months`` later, clamped to the end of the month.

    Examples
    --------
    >>> add_months(date(2024, 1, 31), 1)
    datetime.date(2024, 2, 29)
    """
    years, month = divmod(start.month - 1 + months, 12)
    year = start.year + years
    last = calendar.monthrange(year, month + 1)[1]
    return date(year, month + 1, min(start.day, last))


def parse_horizon(text: str, *, said: date, codebook: Codebook) -> Horizon:
    """Return the horizon that ``text`` means for a statement of that date.

    Parameters
    ----------
    text : str
        As typed; empty for none.
    said : date
        Publication date in the venue's zone.
    codebook : Codebook
        Supplies the lengths of words and of silence.

    Returns
    -------
    Horizon

    Raises
    ------
    PhraseError
        If the text is on no known form, or leads to a date before the statement.

    Examples
    --------
    >>> from foresaid.model.codebook import default_codebook
    >>> parse_horizon("6 months", said=date(2024, 8, 31), codebook=default_codebook()).deadline
    datetime.date(2025, 2, 28)
    """
    words = " ".join(text.lower().split()).removeprefix("by ").rstrip(".")
    try:
        horizon = _read(words, said, codebook)
    except (OverflowError, ValueError) as fault:
        if isinstance(fault, PhraseError):
            raise
        raise PhraseError(
            f"`{text}` leads beyond the calendar", "Write a nearer date."
        ) from None
    if horizon.deadline is not None and horizon.deadline < said:
        raise PhraseError(
            f"the deadline {horizon.deadline} is before the statement of {said}",
            "Write a later date, or mend the date of the statement.",
        )
    if horizon.deadline is not None and horizon.deadline.year > LAST_YEAR:
        raise PhraseError(f"`{text}` leads beyond the year {LAST_YEAR}", "Write a nearer date.")
    return horizon


def _read(words: str, said: date, codebook: Codebook) -> Horizon:
    if not words:
        return replace(_length(codebook.horizon_default.length, said), text="", imputed=True)
    if words in codebook.horizon_words:
        length = codebook.horizon_words[words].length
        return replace(_length(length, said), text=words, imputed=True)
    if LENGTH.fullmatch(words):
        return _length(words, said)
    if ISO_DATE.fullmatch(words):
        return _iso_date(words)
    if words.startswith("end of "):
        return _end_of(words, said, codebook)
    raise _unknown(words, codebook)


def _length(words: str, said: date) -> Horizon:
    match = LENGTH.fullmatch(words)
    if match is None:
        raise PhraseError(f"`{words}` is not a length", "Write one such as `6 months`.")
    count, unit = int(match[1]), match[2]
    if count == 0:
        raise PhraseError(f"`{words}` has no length", "Write a number of at least 1.")
    text = f"{count} {unit}" + ("" if count == 1 else "s")
    if unit == "session":
        return Horizon(text, None, count)
    if unit in ("day", "week"):
        days = count * (7 if unit == "week" else 1)
        return Horizon(text, said + timedelta(days=days), None)
    return Horizon(text, add_months(said, count * (12 if unit == "year" else 1)), None)


def _iso_date(words: str) -> Horizon:
    try:
        return Horizon(words, date.fromisoformat(words), None)
    except ValueError:
        raise PhraseError(f"there is no day {words}", "Write a date that exists.") from None


def _end_of(words: str, said: date, codebook: Codebook) -> Horizon:
    period = words.removeprefix("end of ").removeprefix("the ")
    if period in PERIODS:
        return Horizon(f"end of {period}", _end_of_running(period, said), None)
    match = END_OF_DATED.fullmatch(f"end of {period}")
    if match is None:
        if period in MONTHS:
            name = calendar.month_name[MONTHS[period]]
            raise PhraseError(
                f"`{words}` does not say of which year", f"Write `end of {name} {said.year}`."
            )
        raise _unknown(words, codebook)
    year = int(match["year"])
    if match["quarter"]:
        quarter = int(match["quarter"])
        return Horizon(f"end of Q{quarter} {year}", _month_end(year, 3 * quarter), None)
    if match["month"] is None:
        return Horizon(f"end of {year}", _month_end(year, 12), None)
    if match["month"] not in MONTHS:
        raise _unknown(words, codebook)
    month = MONTHS[match["month"]]
    return Horizon(f"end of {calendar.month_name[month]} {year}", _month_end(year, month), None)


def _end_of_running(period: str, said: date) -> date:
    if period == "week":
        return said + timedelta(days=6 - said.weekday())
    last_month = {"month": said.month, "quarter": (said.month + 2) // 3 * 3, "year": 12}
    return _month_end(said.year, last_month[period])


def _month_end(year: int, month: int) -> date:
    return date(year, month, calendar.monthrange(year, month)[1])


def _unknown(words: str, codebook: Codebook) -> PhraseError:
    known = [
        *codebook.horizon_words,
        *FORMS,
        *(f"end of {name.title()} 2025" for name in MONTHS),
    ]
    close = difflib.get_close_matches(words, known, n=1)
    if close:
        hint = f"The nearest horizon is `{close[0]}`."
    else:
        forms = ", ".join(f"`{form}`" for form in FORMS)
        hint = f"Write one of {forms}, a codebook word such as `soon`, or nothing."
    return PhraseError(f"the horizon `{words}` is not understood", hint)
