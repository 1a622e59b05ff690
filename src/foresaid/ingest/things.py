"""Instruments and forecasters (and actions): rows of a file to records, with their faults."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING, Literal

from foresaid.ingest.actions import parse_actions
from foresaid.ingest.faults import nearest
from foresaid.ingest.rows import RowReader, own_name, read_rows
from foresaid.ingest.tables import check_columns
from foresaid.model.issues import clip
from foresaid.model.records import Forecaster, Instrument, Parsed
from foresaid.model.said import zone_fault

if TYPE_CHECKING:
    from collections.abc import Collection

    from foresaid.ingest.tables import RawTable

__all__ = ["parse_actions", "parse_forecasters", "parse_instruments"]

INSTRUMENT_REQUIRED = ("instrument",)
INSTRUMENT_OPTIONAL = (
    "name", "currency", "zone", "opens", "closes", "sense", "kind", "market", "benchmark",
    "base", "term",
)  # fmt: skip
FORECASTER_REQUIRED = ("forecaster",)
FORECASTER_OPTIONAL = ("name", "role", "desk", "aliases")

_CLOCK = re.compile(r"([01][0-9]|2[0-3]):[0-5][0-9]")
_DEFAULT_KIND = "index"


# ------------------------------------------------------------------------------ instruments
def parse_instruments(
    table: RawTable, *, kinds: Collection[str], known: Collection[str] = ()
) -> Parsed[Instrument]:
    """Return the instruments of a file with every fault found in it.

    Parameters
    ----------
    table : RawTable
        A read file with a column ``instrument`` and any of ``INSTRUMENT_OPTIONAL``.
    kinds : collection of str
        The instrument kinds of the codebook.
    known : collection of str
        Symbols that the ledger holds, to which a benchmark may point.

    Returns
    -------
    Parsed of Instrument
        Rows without a fault. The faults of the table itself are not repeated.
    """
    issues = check_columns(table, INSTRUMENT_REQUIRED, INSTRUMENT_OPTIONAL)
    names = [name for name in table.cells.get("instrument", []) if name]
    symbols = {*names, *known}
    first: dict[str, int] = {}

    def read(row: RowReader) -> Instrument:
        own_name(row, "instrument", first)
        return _instrument(row, kinds, symbols)

    return read_rows(table, issues, read)


def _instrument(row: RowReader, kinds: Collection[str], symbols: Collection[str]) -> Instrument:
    opens, closes = _hours(row)
    kind = _choice(row, "kind", kinds, default=_DEFAULT_KIND)
    benchmark = row.text("benchmark")
    if benchmark and benchmark not in symbols:
        row.unknown("benchmark", symbols)
    elif benchmark and benchmark == row.cell("instrument"):
        row.fault("benchmark", "own-benchmark", "an instrument is not its own benchmark")
    base, term = _legs(row, kind)
    return Instrument(
        symbol=row.cell("instrument"),
        name=row.text("name"),
        currency=row.text("currency"),
        zone=_zone(row),
        opens=opens,
        closes=closes,
        sense=_sense(row),
        kind=kind,
        market=row.text("market"),
        benchmark=benchmark,
        base=base,
        term=term,
    )


def _zone(row: RowReader) -> str:
    zone = row.cell("zone")
    fault = zone_fault(zone) if zone else None
    if fault is not None:
        row.fault("zone", fault.code, fault.message, fault.hint)
    return zone


def _hours(row: RowReader) -> tuple[str, str]:
    """Return opening and closing time, both or neither."""
    opens, closes = row.cell("opens"), row.cell("closes")
    hint = "Write hours and minutes, such as 09:30 or 17:00."
    if opens and not _CLOCK.fullmatch(opens):
        row.fault("opens", "bad-time", f"`{clip(opens)}` is no time of day", hint)
    if closes and closes != "24:00" and not _CLOCK.fullmatch(closes):
        row.fault("closes", "bad-time", f"`{clip(closes)}` is no time of day", hint)
    if bool(opens) != bool(closes):
        empty, filled = ("opens", "closes") if closes else ("closes", "opens")
        message = f"`{filled}` is given and `{empty}` is not"
        row.fault(empty, "half-hours", message, "Write both, or neither.")
    elif opens and opens == closes:
        hint = "Write 00:00 and 24:00 for trading around the clock."
        row.fault("closes", "no-hours", "it closes at the minute it opens", hint)
    return opens, closes


def _sense(row: RowReader) -> Literal["direct", "inverse"]:
    sense = _choice(row, "sense", ("direct", "inverse"), default="direct")
    return "inverse" if sense == "inverse" else "direct"


def _choice(row: RowReader, column: str, allowed: Collection[str], *, default: str) -> str:
    """Return one of a closed list; letter case does not count, empty is the default."""
    value = row.cell(column).lower() or default
    if value not in allowed:
        close = nearest(value, allowed)
        hint = f"Write one of: {', '.join(allowed)}."
        hint = f"Was `{close}` meant? {hint}" if close else hint
        message = f"`{clip(row.cell(column) or default)}` is no {column}"
        row.fault(column, f"unknown-{column}", message, hint)
    return value


def _legs(row: RowReader, kind: str) -> tuple[str, str]:
    """Return base and term of a pair."""
    base, term = row.text("base"), row.text("term")
    if kind != "pair":
        return base, term
    for column, value in (("base", base), ("term", term)):
        if not value:
            hint = "A pair quotes units of `term` for one unit of `base`; write both."
            row.fault(column, "missing-leg", f"the pair has no {column}", hint)
    if base and base == term:
        row.fault("term", "one-leg", f"base and term are both `{clip(base)}`")
    return base, term


# ------------------------------------------------------------------------------ forecasters
def parse_forecasters(table: RawTable) -> Parsed[Forecaster]:
    """Return the forecasters of a file with every fault found in it.

    Parameters
    ----------
    table : RawTable
        A read file with a column ``forecaster`` and any of ``FORECASTER_OPTIONAL``; aliases
        have semicolons between them.

    Returns
    -------
    Parsed of Forecaster
        Rows without a fault. No two have a handle or alias in common. The faults of the
        table itself are not repeated.
    """
    issues = check_columns(table, FORECASTER_REQUIRED, FORECASTER_OPTIONAL)
    handles = dict(
        zip(reversed(table.cells.get("forecaster", [])), reversed(table.lines), strict=False)
    )
    first: dict[str, int] = {}
    taken: dict[str, int] = {}

    def read(row: RowReader) -> Forecaster:
        own_name(row, "forecaster", first)
        return Forecaster(
            handle=row.cell("forecaster"),
            name=row.text("name"),
            role=row.text("role"),
            desk=row.text("desk"),
            aliases=_aliases(row, handles, taken),
        )

    return read_rows(table, issues, read)


def _aliases(row: RowReader, handles: dict[str, int], taken: dict[str, int]) -> tuple[str, ...]:
    """Return the aliases of a row; each may stand once, and not for another's handle."""
    names = dict.fromkeys(part.strip() for part in row.text("aliases", limit=None).split(";"))
    aliases = [name for name in names if name and name != row.cell("forecaster")]
    for alias in aliases:
        row.check_text("aliases", alias)
        line = handles.get(alias, taken.get(alias, row.line))
        if line != row.line:
            message = f"`{clip(alias)}` stands for the forecaster of line {line}"
            hint = "An alias belongs to one forecaster."
            row.fault("aliases", "double-alias", message, hint)
        taken.setdefault(alias, row.line)
    return tuple(aliases)
