"""Days as numbers, counted from 1970-01-01, the form in which arrays hold them."""

from __future__ import annotations

from datetime import date, timedelta

_FIRST = date(1970, 1, 1)


def day_number(day: date) -> int:
    """Return a date as days since 1970-01-01.

    Examples
    --------
    >>> day_number(date(1970, 1, 11))
    10
    """
    return (day - _FIRST).days


def day_of(number: int) -> date:
    """Return the date of a day number.

    Examples
    --------
    >>> day_of(10)
    datetime.date(1970, 1, 11)
    """
    return _FIRST + timedelta(days=number)
