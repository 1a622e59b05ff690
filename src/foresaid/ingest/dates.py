"""Single cells: the text of a date or moment to a value or a fault."""

from __future__ import annotations

import calendar
import datetime as dt
import re

from foresaid.model.issues import clip
from foresaid.model.said import CellFault, SaidAt, rfc3339

DATE_ORDERS = ("iso", "dmy", "mdy")

_FIRST_YEAR, _LAST_YEAR = 1700, 2199
_MIDNIGHT = re.compile(r"[T ]00:00(?::00(?:\.0+)?)?(?:Z|[+-][0-9]{2}:?[0-9]{2})?")
_ISO = re.compile(r"([0-9]{4})-([0-9]{2})-([0-9]{2})")
_YEAR_FIRST = re.compile(r"([0-9]{4})[-/. ]?([0-9]{1,2})[-/. ]?([0-9]{1,2})")
_YEAR_LAST = re.compile(r"([0-9]{1,2})[-/. ]([0-9]{1,2})[-/. ]([0-9]{4}|[0-9]{2})")
_SERIAL = re.compile(r"[2-7][0-9]{4}(?:[.,][0-9]+)?")
_DATE_HINT = "Write year-month-day, such as 2025-03-14."

_MOMENT = re.compile(
    r"(?P<date>[^ Tt]+)[Tt ]\s*(?P<hour>[0-9]{1,2}):(?P<minute>[0-9]{2})"
    r"(?::(?P<second>[0-9]{2})(?:[.,][0-9]+)?)?\s*(?P<zone>.*)",
    re.DOTALL,
)
_OFFSET = re.compile(r"([+-])([0-9]{2}):?([0-9]{2})")
_MOMENT_HINT = (
    "Write `2025-03-14`, `2025-03-14T12:15-04:00` or `2025-03-14 12:15 America/New_York`."
)


def parse_date(text: str, *, order: str = "iso") -> dt.date | CellFault:
    """Return the calendar date in a cell.

    Parameters
    ----------
    text : str
        ``2025-03-14`` or ``20250314`` always; a time of midnight behind it is dropped. With
        ``order`` dmy or mdy also ``14/03/2025``, ``14.3.2025``, ``14-03-2025``.
    order : {"iso", "dmy", "mdy"}
        How dates are written in this file.

    Returns
    -------
    datetime.date or CellFault
        A date from 1700 to 2199, or what is wrong and what to write.

    Examples
    --------
    >>> parse_date("2025-03-14")
    datetime.date(2025, 3, 14)
    >>> parse_date("03/04/2025").message
    '`03/04/2025` may be 3 April 2025 or 4 March 2025'
    """
    text = text.strip()
    iso = _ISO.match(text)
    if iso and _MIDNIGHT.fullmatch(text, iso.end()):
        text = iso[0]
    if _ISO.fullmatch(text) or (
        len(text) == 8 and _YEAR_FIRST.fullmatch(text) and text.isdigit()
    ):
        digits = text.replace("-", "")
        return _day(int(digits[:4]), int(digits[4:6]), int(digits[6:]), text)
    written = _YEAR_LAST.fullmatch(text)
    if written and len(written[3]) == 4:
        return _year_last(written, order)
    return _date_fault(text)


def _day(year: int, month: int, day: int, text: str) -> dt.date | CellFault:
    if not _FIRST_YEAR <= year <= _LAST_YEAR:
        message = f"`{text}` is in the year {year}"
        hint = f"Years run from {_FIRST_YEAR} to {_LAST_YEAR}."
        return CellFault("year-out-of-range", message, hint)
    if not 1 <= month <= 12:
        return CellFault("no-such-date", f"`{text}` has no month {month}", _DATE_HINT)
    last = calendar.monthrange(year, month)[1]
    if not 1 <= day <= last:
        end = dt.date(year, month, last)
        hint = f"The last day of {end:%B %Y} is {end}."
        return CellFault("no-such-date", f"`{text}` is no day of the calendar", hint)
    return dt.date(year, month, day)


def _year_last(written: re.Match[str], order: str) -> dt.date | CellFault:
    first, second, year = (int(part) for part in written.groups())
    by_order = {
        "dmy": _day(year, second, first, written[0]),
        "mdy": _day(year, first, second, written[0]),
    }
    if order not in by_order:
        return _order_fault(written[0], by_order["dmy"], by_order["mdy"])
    other = by_order["mdy" if order == "dmy" else "dmy"]
    result = by_order[order]
    if isinstance(result, CellFault) and isinstance(other, dt.date):
        hint = f"In the other order it is {other}: is one --dates right for the whole file?"
        return CellFault(result.code, result.message, hint)
    return result


def _order_fault(text: str, dmy: dt.date | CellFault, mdy: dt.date | CellFault) -> CellFault:
    """Return the fault of a date with the year last where only ISO dates are taken."""
    if isinstance(dmy, CellFault) and isinstance(mdy, CellFault):
        return dmy
    if isinstance(dmy, dt.date) and isinstance(mdy, dt.date) and dmy != mdy:
        message = f"`{text}` may be {_in_words(dmy)} or {_in_words(mdy)}"
        hint = f"Write {dmy} or {mdy}, or pass --dates dmy or --dates mdy for the file."
        return CellFault("ambiguous-date", message, hint)
    order, day = ("dmy", dmy) if isinstance(dmy, dt.date) else ("mdy", mdy)
    hint = f"Write {day}, or pass --dates {order} for the file."
    return CellFault("not-iso-date", f"`{text}` is not written year-month-day", hint)


def _in_words(day: dt.date) -> str:
    return f"{day.day} {calendar.month_name[day.month]} {day.year}"


def _date_fault(text: str) -> CellFault:
    """Return the fault of a text that is a date in no order we take."""
    if not text:
        return CellFault("empty", "there is no date", _DATE_HINT)
    if _ISO.match(text):
        message = f"`{clip(text)}` is more than a date"
        return CellFault("not-a-date", message, f"Write {text[:10]} alone.")
    if _SERIAL.fullmatch(text):
        day = dt.date(1899, 12, 30) + dt.timedelta(days=int(text[:5]))
        message = f"`{clip(text)}` is a spreadsheet's number for a date, perhaps {day}"
        hint = "Give the column a date format in the spreadsheet and save the file again."
        return CellFault("serial-date", message, hint)
    if _YEAR_LAST.fullmatch(text):
        message = f"`{text}` has a year of two digits"
        return CellFault("two-digit-year", message, "Write the year with four digits.")
    written = _YEAR_FIRST.fullmatch(text)
    if written:
        year, month, number = (int(part) for part in written.groups())
        meant = _day(year, month, number, text)
        hint = f"Write {meant}." if isinstance(meant, dt.date) else _DATE_HINT
        return CellFault("not-iso-date", f"`{text}` is not written year-month-day", hint)
    return CellFault("not-a-date", f"`{clip(text)}` is no date", _DATE_HINT)


# --------------------------------------------------------------------------------- moments
def parse_said_at(text: str, *, order: str = "iso") -> SaidAt | CellFault:
    """Return when something was said.

    Parameters
    ----------
    text : str
        A date; a time with its offset or ``Z``; a time with the name of its zone; or a time
        alone, which comes back with no zone and waits for one (``SaidAt.in_zone``).
    order : {"iso", "dmy", "mdy"}
        How the date part is written.

    Returns
    -------
    SaidAt or CellFault
        Seconds are kept, fractions of a second are dropped.

    Examples
    --------
    >>> parse_said_at("2025-03-14 12:15 America/New_York").text
    '2025-03-14T12:15:00-04:00'
    >>> parse_said_at("2025-03-14").text
    '2025-03-14'
    """
    text = text.strip()
    moment = _MOMENT.fullmatch(text)
    day = parse_date(moment["date"] if moment else text, order=order)
    if isinstance(day, CellFault):
        return _moment_fault(day, text) if moment is None else day
    if moment is None:
        return SaidAt(day, text=day.isoformat())
    parts = int(moment["hour"]), int(moment["minute"]), int(moment["second"] or 0)
    if parts > (23, 59, 59) or max(parts[1:]) > 59:
        hint = "Hours run from 00 to 23, minutes and seconds from 00 to 59."
        return CellFault("bad-time", f"`{clip(text)}` has no time of day", hint)
    wall = dt.datetime.combine(day, dt.time(*parts))
    return _placed(wall, moment["zone"].strip())


def _moment_fault(fault: CellFault, text: str) -> CellFault:
    if fault.code in ("empty", "not-a-date"):
        message = f"`{clip(text)}` is no date or time" if text else "there is no date"
        return CellFault(fault.code, message, _MOMENT_HINT)
    return fault


def _placed(wall: dt.datetime, zone: str) -> SaidAt | CellFault:
    """Return a local time with its zone or offset applied."""
    said = SaidAt(wall.date(), wall.time(), text=wall.isoformat(timespec="seconds"))
    if not zone:
        return said
    if zone in ("Z", "z"):
        zone = "+00:00"
    offset = _OFFSET.fullmatch(zone)
    if offset is None:
        if zone.lower() in ("am", "pm", "a.m.", "p.m."):
            hint = "Write 14:30 for half past two in the afternoon."
            return CellFault("bad-time", "the hours of a time run from 00 to 23", hint)
        return said.in_zone(zone)
    return _at_offset(said, wall, offset)


def _at_offset(said: SaidAt, wall: dt.datetime, offset: re.Match[str]) -> SaidAt | CellFault:
    hours, minutes = int(offset[2]), int(offset[3])
    if hours > 14 or minutes > 59:
        message = f"there is no offset `{offset[0]}`"
        return CellFault("bad-offset", message, "Offsets run from -12:00 to +14:00.")
    size = dt.timedelta(hours=hours, minutes=minutes) * (-1 if offset[1] == "-" else 1)
    local = wall.replace(tzinfo=dt.timezone(size))
    text = rfc3339(local)
    return SaidAt(said.date, said.time, local.astimezone(dt.UTC), text[-6:], text)
