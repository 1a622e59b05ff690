"""When a statement was made: a date, a local time, or an instant with its zone."""

from __future__ import annotations

import datetime as dt
import difflib
import zoneinfo
from dataclasses import dataclass, replace
from functools import cache

from foresaid.model.issues import clip

_ZONE_HINT = "Write a tz database name such as `Europe/Vienna`, or an offset such as `+01:00`."


@dataclass(frozen=True, slots=True)
class CellFault:
    """Why one cell could not be read.

    Attributes
    ----------
    code : str
        Stable short name, such as ``no-such-date``.
    message : str
        What is wrong, with the value.
    hint : str
        What to write instead; empty when there is nothing to add.
    """

    code: str
    message: str
    hint: str = ""


@dataclass(frozen=True, slots=True)
class SaidAt:
    """The moment of a statement, as far as it was written down.

    Attributes
    ----------
    date : datetime.date
        The calendar date as written.
    time : datetime.time or None
        The local time as written, to the second; None for a date alone.
    utc : datetime.datetime or None
        The instant, aware, in UTC; None for a date alone and for a time without a zone.
    zone : str
        A tz database name, an offset ``+HH:MM``, or empty when none was given.
    text : str
        Canonical form: ``YYYY-MM-DD``, or RFC 3339 with offset. A time whose zone is missing
        has no offset in it, and is not fit for the ledger before ``in_zone``.
    """

    date: dt.date
    time: dt.time | None = None
    utc: dt.datetime | None = None
    zone: str = ""
    text: str = ""

    def in_zone(self, name: str) -> SaidAt | CellFault:
        """Return this local time placed in the zone ``name``.

        Parameters
        ----------
        name : str
            A tz database name.

        Returns
        -------
        SaidAt or CellFault
            Itself where there is no time or the instant is known already; a fault where the
            zone is unknown, or the clock showed that time never or twice on that day.

        Examples
        --------
        >>> said = SaidAt(dt.date(2025, 3, 14), dt.time(12, 15))
        >>> said.in_zone("Europe/Vienna").text
        '2025-03-14T12:15:00+01:00'
        """
        if self.time is None or self.utc is not None:
            return self
        fault = zone_fault(name)
        if fault is not None:
            return fault
        zone = zoneinfo.ZoneInfo(name)
        wall = dt.datetime.combine(self.date, self.time)
        local = wall.replace(tzinfo=zone)
        utc = local.astimezone(dt.UTC)
        if utc.astimezone(zone).replace(tzinfo=None) != wall:
            return _skipped_time(wall, name)
        if wall.replace(tzinfo=zone, fold=1).utcoffset() != local.utcoffset():
            return _doubled_time(wall, zone, name)
        return replace(self, utc=utc, zone=name, text=rfc3339(local))


def rfc3339(moment: dt.datetime) -> str:
    """Return an aware moment as RFC 3339 text to the second.

    An offset that is no whole minute (local mean time, long ago) cannot be written; such a
    moment is given in UTC.

    Examples
    --------
    >>> rfc3339(dt.datetime(2025, 3, 14, 12, 15, tzinfo=dt.UTC))
    '2025-03-14T12:15:00+00:00'
    """
    offset = moment.utcoffset() or dt.timedelta(0)
    if offset.total_seconds() % 60:
        moment = moment.astimezone(dt.UTC)
    return moment.isoformat(timespec="seconds")


@cache
def known_zones() -> frozenset[str]:
    """Return the names of the tz database."""
    return frozenset(zoneinfo.available_timezones())


def zone_fault(name: str) -> CellFault | None:
    """Return why ``name`` is no time zone, None when it is one.

    Examples
    --------
    >>> zone_fault("Europe/Vienna")
    >>> zone_fault("Europe/Viena").hint
    'The nearest known is `Europe/Vienna`.'
    """
    if name in known_zones():
        return None
    close = _nearest_zone(name)
    hint = f"The nearest known is `{close}`." if close else _ZONE_HINT
    return CellFault("unknown-zone", f"`{clip(name)}` is no time zone", hint)


@cache
def _zone_spellings() -> dict[str, str]:
    """Return zone names by lower-case spelling, whole and by city alone."""
    spellings: dict[str, str] = {}
    for name in sorted(known_zones(), key=lambda zone: ("/" not in zone, zone)):
        spellings.setdefault(name.lower(), name)
        spellings.setdefault(name.rpartition("/")[2].lower(), name)
    return spellings


def _nearest_zone(name: str) -> str:
    wanted = name[:60].lower().replace(" ", "_")
    close = difflib.get_close_matches(wanted, _zone_spellings(), n=1, cutoff=0.75)
    return _zone_spellings()[close[0]] if close else ""


def _skipped_time(wall: dt.datetime, name: str) -> CellFault:
    message = (
        f"the clocks of {name} were put forward on {wall:%Y-%m-%d} and skipped {wall:%H:%M}"
    )
    return CellFault("no-such-time", message, "Mend the time, or give it with its offset.")


def _doubled_time(wall: dt.datetime, zone: zoneinfo.ZoneInfo, name: str) -> CellFault:
    first, second = (rfc3339(wall.replace(tzinfo=zone, fold=fold)) for fold in (0, 1))
    message = f"the clocks of {name} showed {wall:%H:%M} twice on {wall:%Y-%m-%d}"
    return CellFault("ambiguous-time", message, f"Write {first} or {second}.")
