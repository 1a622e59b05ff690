"""An independent slow settler: plain loops, written from docs/settlement.md and docs/claims.md.

It shares no code with the product: it reads a world of plain records and says of each call what
`foresaid calls` should list. Days are ordinals of the calendar, times are minutes.
"""

from __future__ import annotations

import calendar
import math
import re
import statistics
from dataclasses import dataclass, field, replace
from datetime import date, datetime, timedelta
from zoneinfo import ZoneInfo

TOLERANCE = 1e-9
LOOK_BACK = 252
ROLL_BACK = 10

NO_REFERENCE = "no price yet on or after the statement"
RUNS = "the window still runs"
NO_DEADLINE_PRICE = "no price at the deadline"
MISSING = "a price is missing: its market traded on a day that the call needs"
IN_QUERY = "a price in query decides it"
NO_LEG_PRICE = "no price of a compared instrument at the deadline"
NO_LEG_PAIR = "no pair converts the prices of a compared instrument"
NO_PAIR = "no pair converts the instrument's prices to the stated currency"
UNDECIDED = "its condition is not decided yet"
NOT_MET = "its condition was not met"
TOO_LATE = "its condition came true after its deadline"
BEFORE_REFERENCE = "the deadline is before the reference session"
IS_REFERENCE = "the deadline close is the reference close"
HALTED = "trading was halted through the whole window"
UNCOUNTABLE = "sessions cannot be counted on an instrument that has ended"
LEVEL_IS_REFERENCE = "the level is the reference price"
BOTH_TOUCHED = "both levels were touched in one session"
NOT_ABOVE_ZERO = "the reference price is not above zero"
NO_LEVELS = "a total-return series has no levels"
NO_PAST = "no price before the call"
TOO_FEW = "too few sessions for a volatility"
NO_LOGARITHM = "a price at or below zero has no volatility"
NO_RETURN = "quotes compared by difference have no return"
NO_LEG_REFERENCE = "no price of a compared instrument at the reference"


# ---------------------------------------------------------------------------- what is settled
@dataclass(frozen=True)
class Row:
    """One row of a price file; None for an empty cell."""

    day: int
    close: float
    high: float | None = None
    low: float | None = None
    volume: float | None = None
    total: float | None = None


@dataclass(frozen=True)
class Thing:
    """One instrument with its price file."""

    symbol: str
    kind: str = "share"
    currency: str = "KOR"
    zone: str = "Europe/Vienna"
    opens: str = "09:00"
    closes: str = "17:30"
    sense: str = "direct"
    market: str = ""
    base: str = ""
    term: str = ""
    series: str = "raw"
    rows: tuple[Row, ...] = ()


@dataclass(frozen=True)
class Deed:
    """One row of an actions file."""

    symbol: str
    day: int
    kind: str
    ratio: float | None = None
    amount: float | None = None
    into: str = ""


@dataclass(frozen=True)
class Said:
    """One row of a calls file; ``decision`` is what a person decided about its fact."""

    ref: str
    at: str
    symbol: str
    claim: str
    horizon: str
    currency: str = ""
    given: str = ""
    decision: tuple[bool, str] | None = None


@dataclass(frozen=True)
class World:
    """Everything a settlement rests on; ``confirmed`` holds symbols with days."""

    things: tuple[Thing, ...]
    deeds: tuple[Deed, ...]
    calls: tuple[Said, ...]
    as_of: int
    confirmed: tuple[tuple[str, int], ...] = ()


@dataclass
class Answer:
    """What is listed of a call; sessions are ordinals, prices stand as in the file."""

    result: str
    reason: str = ""
    reference: int | None = None
    reference_price: float | None = None
    first: int | None = None
    deadline: int | None = None
    decided: int | None = None
    price: float | None = None
    move: float | None = None
    measured: float | None = None
    matured: bool = False
    alternates: dict[str, str] = field(default_factory=dict)
    flags: set[str] = field(default_factory=set)
    moment: Moment | None = None


@dataclass(frozen=True)
class Moment:
    """A day with a minute of that day, or with none."""

    day: int
    minute: float | None


@dataclass
class Line:
    """The sessions of one instrument, in one currency and in the units of its first day."""

    thing: Thing
    day: list[int] = field(default_factory=list)
    high: list[float] = field(default_factory=list)
    low: list[float] = field(default_factory=list)
    close: list[float] = field(default_factory=list)
    ranged: list[bool] = field(default_factory=list)
    unit: list[float] = field(default_factory=list)  # a price times this is in first-day units
    total: list[float] = field(default_factory=list)
    total_until: int = -1  # a total column has no gap up to this day
    total_since: int = 10**9  # the day of the first dividend on record
    paid: list[tuple[int, float]] = field(default_factory=list)  # still to be reinvested
    halts: list[tuple[int, int]] = field(default_factory=list)
    stale: set[int] = field(default_factory=set)
    reach: int = -1
    ended: int | None = None  # day from which terms stand in for prices
    fixed: bool = False  # the terms are an amount for good
    queried: bool = False
    swapped: dict[int, float] = field(default_factory=dict)  # closes in query, a part of theirs


@dataclass
class Claim:
    """A phrase taken apart."""

    head: str
    numbers: list[tuple[float, str]]
    others: list[str]


@dataclass
class Window:
    """Positions on a line; ``last`` is the deadline session, None while it is not known."""

    reference: int | None = None
    first: int | None = None
    last: int | None = None
    end: int = -1
    deadline: int | None = None  # the calendar day, None where sessions are counted
    result: str = ""
    reason: str = ""


@dataclass
class Verdict:
    """Result of one judgement."""

    result: str
    reason: str = ""
    at: int | None = None
    price: float | None = None
    measured: float | None = None
    tie: bool = False


# ----------------------------------------------------------------------------------- phrases
def read_claim(text: str) -> Claim:
    """Take a phrase apart: words, numbers with units, symbols of others."""
    words = text.replace(",", " ").split()
    if words[0] in ("beats", "lags"):
        by = [(float(words[3].rstrip("%")), "%")] if len(words) > 2 else []
        return Claim(words[0] + (" by" if by else ""), by, [words[1]])
    if words[0] == "tops":
        return Claim("tops", [], words[1:])
    if words[0] == "quantiles":
        pairs = [part.split("=") for part in words[1:]]
        numbers = []
        for share, level in pairs:
            numbers += [(float(share.rstrip("%")), "%"), (float(level), "")]
        return Claim("quantiles", numbers, [])
    if words[0] == "bins":
        return Claim("bins", _bins(text.removeprefix("bins ")), [])
    numbers, kept = [], []
    for word in words:
        match = re.fullmatch(r"(-?\d+(?:\.\d+)?)(%|pt|pp|bp)?", word)
        if match:
            numbers.append((float(match[1]), match[2] or ""))
        else:
            kept.append(word)
    return Claim(" ".join(kept), numbers, [])


def _bins(text: str) -> list[tuple[float, str]]:
    """Return the share of each bin and the edge after it, in turn."""
    numbers: list[tuple[float, str]] = []
    for part in text.split(","):
        where, share = part.split(":")
        numbers.append((float(share.strip().rstrip("%")), "%"))
        where = where.strip()
        if where.startswith("<"):
            numbers.append((float(where[1:]), ""))
        elif not where.startswith(">"):
            numbers.append((float(where.split(" to ")[1]), ""))
    return numbers


# ---------------------------------------------------------------------------------- horizons
IMPUTED = {
    "immediately": ("1 week", "1 session", "2 weeks"),
    "soon": ("1 month", "2 weeks", "3 months"),
    "shortly": ("1 month", "2 weeks", "3 months"),
    "near term": ("3 months", "1 month", "6 months"),
    "short term": ("3 months", "1 month", "6 months"),
    "medium term": ("12 months", "6 months", "24 months"),
    "long term": ("36 months", "24 months", "60 months"),
    "": ("12 months", "6 months", "24 months"),
}
MONTHS = (
    "january", "february", "march", "april", "may", "june", "july", "august", "september",
    "october", "november", "december",
)  # fmt: skip


def _month_end(year: int, month: int) -> int:
    return date(year, month, calendar.monthrange(year, month)[1]).toordinal()


def _months_on(day: int, months: int) -> int:
    start = date.fromordinal(day)
    year, month = start.year, start.month + months
    while month > 12:
        year, month = year + 1, month - 12
    for number in (start.day, 30, 29, 28):
        if number <= start.day:
            try:
                return date(year, month, number).toordinal()
            except ValueError:
                continue
    raise AssertionError


def deadline_of(horizon: str, said: int) -> tuple[int | None, int]:
    """Return the calendar day and the number of sessions, one of which is set."""
    words = horizon.lower()
    if words in IMPUTED:
        words = IMPUTED[words][0]
    if re.fullmatch(r"\d{4}-\d{2}-\d{2}", words):
        return date.fromisoformat(words).toordinal(), 0
    count, _, unit = words.partition(" ")
    if count.isdigit():
        n = int(count)
        if unit.startswith("session"):
            return None, n
        if unit.startswith("day"):
            return said + n, 0
        if unit.startswith("week"):
            return said + 7 * n, 0
        return _months_on(said, n * (12 if unit.startswith("year") else 1)), 0
    rest = words.removeprefix("end of ").removeprefix("the ").split()
    start = date.fromordinal(said)
    if rest == ["week"]:
        day = said
        while date.fromordinal(day).weekday() != 6:
            day += 1
        return day, 0
    if rest == ["month"]:
        return _month_end(start.year, start.month), 0
    if rest == ["quarter"]:
        month = next(m for m in (3, 6, 9, 12) if m >= start.month)
        return _month_end(start.year, month), 0
    if rest == ["year"]:
        return _month_end(start.year, 12), 0
    year = int(rest[-1])
    if len(rest) == 1:
        return _month_end(year, 12), 0
    if re.fullmatch("q[1-4]", rest[0]):
        return _month_end(year, 3 * int(rest[0][1])), 0
    month = next(i for i, name in enumerate(MONTHS, 1) if name.startswith(rest[0][:3]))
    return _month_end(year, month), 0


# ------------------------------------------------------------------------------------- times
def _minutes(clock: str) -> int:
    hours, minutes = clock.split(":")
    return 60 * int(hours) + int(minutes)


def _local(moment: datetime) -> tuple[int, float]:
    return moment.toordinal(), moment.hour * 60 + moment.minute + moment.second / 60


def read_moment(text: str, zone: str) -> Moment:
    """Bring a time of publication to a venue's zone."""
    if len(text) == 10:
        return Moment(date.fromisoformat(text).toordinal(), None)
    stamp, name = (text, "") if text[10] == "T" else (text[:16].replace(" ", "T"), text[17:])
    moment = datetime.fromisoformat(stamp)
    if moment.tzinfo is None:
        moment = moment.replace(tzinfo=ZoneInfo(name or zone))
    return at_venue(moment, zone)


def at_venue(moment: datetime, zone: str) -> Moment:
    """Return an instant as a day and a minute of the venue, as written where it has no zone."""
    local = moment.astimezone(ZoneInfo(zone)) if zone else moment
    return Moment(*_local(local))


def hours_of(thing: Thing) -> tuple[int, int]:
    """Return when the sessions of a thing open and close, in minutes of their day."""
    if not thing.opens:
        return 0, 1440
    opens, closes = _minutes(thing.opens), _minutes(thing.closes)
    return (opens - 1440 if opens > closes else opens), closes


def _iso(day: int) -> str:
    return date.fromordinal(day).isoformat()


def _weekday(day: int) -> int:
    return (day + 6) % 7


# ------------------------------------------------------------------------------ price checks
def _distance(price: float, other: float, *, additive: bool) -> float:
    if additive:
        return price - other
    return math.log(price) - math.log(other)


def limit_at(close: list[float], i: int, *, additive: bool) -> float:
    """Return how far a price of session ``i`` may lie off before it is in query."""
    moves = [
        abs(_distance(close[j], close[j - 1], additive=additive))
        for j in range(max(1, i - 63), i)
    ]
    if len(moves) < 20:
        return 1.0 if additive else math.log(1.25)
    return max(20 * statistics.median(moves), 0.5 if additive else math.log(1.10))


def queries_at(line: Line, i: int, *, additive: bool) -> tuple[bool, bool, bool]:
    """Return whether close, high and low of a session are in query."""
    if i < 2:
        return False, False, False
    limit = limit_at(line.close, i, additive=additive)
    close, before = line.close[i], line.close[i - 1]

    def off(price: float, other: float) -> float:
        return _distance(price, other, additive=additive)

    bad_close = abs(off(close, before)) > limit and abs(off(close, line.close[i - 2])) > limit
    bad_high = off(line.high[i], before) > limit
    bad_low = off(before, line.low[i]) > limit
    if not bad_close:
        bad_high = bad_high and off(line.high[i], close) > limit
        bad_low = bad_low and off(close, line.low[i]) > limit
    return bad_close, bad_high, bad_low


# ------------------------------------------------------------------------------- the settler
class SlowSettler:
    """Settles the calls of one world, one by one."""

    def __init__(self, world: World) -> None:
        self.world = world
        self.things = {thing.symbol: thing for thing in world.things}
        self.lines: dict[tuple[str, str, bool], Line | None] = {}

    # ------------------------------------------------------------------------------ actions
    def deeds(self, symbol: str, *kinds: str) -> list[Deed]:
        """Return the actions of an instrument that are known by the day of settlement."""
        found = [
            deed
            for deed in self.world.deeds
            if deed.symbol == symbol and deed.kind in kinds and deed.day <= self.world.as_of
        ]
        return sorted(found, key=lambda deed: deed.day)

    def unit(self, symbol: str, day: int) -> float:
        """Return what brings a price in the units of a day to those before all actions."""
        factor = 1.0
        for deed in self.world.deeds:
            if deed.symbol == symbol and deed.day <= day:
                if deed.kind == "split":
                    factor *= deed.ratio
                elif deed.kind == "rebase":
                    factor /= deed.ratio
        return factor

    def ending(self, symbol: str) -> Deed | None:
        """Return the first action by which an instrument ended."""
        return next(iter(self.deeds(symbol, "cash-out", "merger", "wind-up")), None)

    def halts(self, symbol: str) -> list[tuple[int, int]]:
        """Return the first day of each halt and the day on which trading went on."""
        spans, begin = [], None
        for deed in self.deeds(symbol, "halt", "resume"):
            if deed.kind == "halt" and begin is None:
                begin = deed.day
            elif deed.kind == "resume" and begin is not None:
                spans.append((begin, deed.day))
                begin = None
        if begin is not None:
            spans.append((begin, 10**9))
        return spans

    # -------------------------------------------------------------------------------- lines
    def line(self, symbol: str, currency: str, *, clean: bool) -> Line | None:
        """Return the sessions of an instrument in a currency, None without a pair."""
        currency = currency or self.things[symbol].currency
        key = (symbol, currency, clean)
        if key not in self.lines:
            self.lines[key] = self.built(symbol, currency, clean=clean)
        return self.lines[key]

    def built(self, symbol: str, currency: str, *, clean: bool) -> Line | None:
        """Return the sessions of an instrument and of what it became."""
        have, end = self.things[symbol].currency, self.ending(symbol)
        pair = self.pair(have, currency)
        if have != currency and pair is None:
            return None
        line = self.own_line(symbol, clean=clean)
        if pair is not None:
            line = self.converted(line, pair, have, clean=clean)
        self.reinvest(line)
        if end is not None:
            rate = 1.0 if pair is None else self.rate(pair, have, end.day, clean=clean)
            self.append_terms(line, end, currency, rate=rate, clean=clean)
        return line

    def pair(self, have: str, want: str) -> Thing | None:
        """Return the pair of two currencies."""
        for thing in self.world.things:
            if (
                have != want
                and thing.kind == "pair"
                and {thing.base, thing.term} == {have, want}
            ):
                return thing
        return None

    def rate(self, pair: Thing, have: str, day: int, *, clean: bool) -> float | None:
        """Return units of the other currency for one of ``have``, None before the first."""
        rates = self.line(pair.symbol, "", clean=clean)
        at = last_by(rates, day)
        if at is None:
            return None
        price = rates.close[at] / rates.unit[at]
        return price if pair.base == have else 1 / price

    def own_line(self, symbol: str, *, clean: bool) -> Line:
        """Return the sessions of an instrument in its own currency."""
        thing, end = self.things[symbol], self.ending(symbol)
        line = Line(thing)
        for begin, until in self.halts(symbol):
            until = min(until, end.day) if end else until  # an ending ends a halt as well
            if begin < until:
                line.halts.append((begin, until))
        rows = self.kept_rows(line, end)
        last_unit = self.unit(symbol, thing.rows[-1].day) if thing.rows else 1.0
        for row in rows:
            unit = {"raw": self.unit(symbol, row.day), "split-adjusted": last_unit}.get(
                thing.series, 1.0
            )
            has_range = row.high is not None and row.low is not None
            line.day.append(row.day)
            line.close.append(row.close * unit)
            line.high.append(row.high * unit if has_range else row.close * unit)
            line.low.append(row.low * unit if has_range else row.close * unit)
            line.ranged.append(has_range)
            line.unit.append(unit)
        in_file = [row.day for row in thing.rows if row.day <= self.world.as_of]
        line.reach = max((day for day in in_file if not end or day < end.day), default=-1)
        self.check_prices(line, clean=clean)
        self.place_totals(line, rows)
        return line

    def kept_rows(self, line: Line, end: Deed | None) -> list[Row]:
        """Return the rows that are sessions; note the stale ones."""
        kept: list[Row] = []
        traded, before = False, None
        for row in line.thing.rows:
            if row.day > self.world.as_of or (end is not None and row.day >= end.day):
                break
            repeats = before is not None and row.close == before.close
            flat = row.high in (None, row.close) and row.low in (None, row.close)
            stale = row.volume == 0 and traded and repeats and flat
            traded, before = traded or bool(row.volume), row
            if any(begin <= row.day < until for begin, until in line.halts):
                continue
            if stale:
                line.stale.add(row.day)
            else:
                kept.append(row)
        return kept

    def check_prices(self, line: Line, *, clean: bool) -> None:
        """Find the prices in query and, if wanted, put others in their place."""
        additive = line.thing.kind == "yield"
        found = []
        for i, day in enumerate(line.day):
            bad = queries_at(line, i, additive=additive)
            before = line.day[i - 1] if i else -1
            resumed = any(before < until <= day for _, until in line.halts)
            known = resumed or (line.thing.symbol, day) in self.world.confirmed
            if any(bad) and not known:
                found.append((i, bad))
        line.queried = bool(found)
        if not clean:
            return
        as_filed = list(line.close)
        for i, (bad_close, bad_high, bad_low) in found:
            before, close = as_filed[i - 1], as_filed[i]
            high, low = line.high[i], line.low[i]
            if bad_high:
                high = before if bad_close else max(before, close)
            elif bad_close:
                high = max(high, before)
            if bad_low:
                low = before if bad_close else min(before, close)
            elif bad_close:
                low = min(low, before)
            line.high[i], line.low[i] = high, low
            if bad_close:
                line.close[i] = before
                line.swapped[i] = before / close if close else 1.0

    def place_totals(self, line: Line, rows: list[Row]) -> None:
        """Take the total returns of the file as far as they go, and note the dividends."""
        symbol = line.thing.symbol
        found = self.deeds(symbol, "dividend")
        dividends = [one for one in found if one.amount and not self.is_after_end(one)]
        if line.thing.series == "total-return":
            line.total, line.total_until = list(line.close), 10**9
            return
        if dividends:
            line.total_since = dividends[0].day
        line.total = list(line.close)
        line.paid = [
            (deed.day, deed.amount * self.unit(symbol, deed.day)) for deed in dividends
        ]
        if not rows or rows[0].total is None:
            return
        line.total_until = 10**9
        for i, row in enumerate(rows):
            if row.total is None and line.total_until == 10**9:
                line.total_until = row.day - 1
                line.paid = [one for one in line.paid if one[0] >= row.day]
            filed = row.close * line.unit[i]
            if line.total_until == 10**9:
                line.total[i] = row.total * line.swapped.get(i, 1.0)
                worth = row.total / filed
            else:  # as the close does
                line.total[i] = worth * line.close[i]
        if line.total_until == 10**9:
            line.paid = []

    def is_after_end(self, deed: Deed) -> bool:
        """Whether an action came when its instrument had ended."""
        end = self.ending(deed.symbol)
        return end is not None and deed.day >= end.day

    def reinvest(self, line: Line) -> None:
        """Reinvest the dividends that are on record at the closes of their sessions."""
        shares, waiting = 1.0, list(line.paid)
        for i, day in enumerate(line.day):
            while waiting and waiting[0][0] <= day:
                _, amount = waiting.pop(0)
                shares *= 1 + amount / line.close[i]
            line.total[i] *= shares

    def append_terms(
        self, line: Line, end: Deed, currency: str, *, rate: float | None, clean: bool
    ) -> None:
        """Let the terms of an ended instrument go on in place of its prices."""
        symbol = line.thing.symbol
        line.ended, unit = end.day, self.unit(symbol, end.day)
        line.stale = {day for day in line.stale if day < end.day}
        shares = line.total[-1] / line.close[-1] if line.total else 1.0

        def add(day: int, high: float, low: float, close: float, *, ranged: bool) -> None:
            line.day.append(day)
            line.high.append(high * unit)
            line.low.append(low * unit)
            line.close.append(close * unit)
            line.ranged.append(ranged)
            line.unit.append(unit)
            line.total.append(shares * close * unit)

        if end.amount and rate is None:
            return  # the terms cannot be told in this currency
        cash = end.amount * rate if end.amount else 0.0
        if end.kind != "merger":
            add(end.day, cash, cash, cash, ranged=True)
            line.fixed, line.reach = True, end.day
            return
        into = self.line(end.into, currency, clean=clean)
        if into is None:
            return
        ratio = end.ratio / self.unit(end.into, end.day)
        for i, day in enumerate(into.day):
            if day < end.day:
                continue
            worth = ratio * into.close[i] + cash
            if i and day > end.day:
                growth = into.total[i] / into.total[i - 1]
                paid = into.close[i - 1] * growth - into.close[i]
                shares *= 1 + ratio * paid / worth if worth else 1.0
            add(
                day,
                ratio * into.high[i] + cash,
                ratio * into.low[i] + cash,
                worth,
                ranged=into.ranged[i],
            )
        line.queried = line.queried or into.queried
        line.fixed = into.fixed
        line.reach = max(line.reach, into.reach)
        line.halts += [(max(a, end.day), b) for a, b in into.halts if b > end.day]
        line.stale |= {day for day in into.stale if day >= end.day}

    def converted(self, line: Line, pair: Thing, have: str, *, clean: bool) -> Line:
        """Return a line in another currency, from the first close of the pair on."""
        bare = {"day": [], "high": [], "low": [], "close": [], "ranged": [], "unit": []}
        out = replace(line, **bare, total=[], paid=[])
        out.queried = line.queried or self.line(pair.symbol, "", clean=clean).queried
        for day, amount in line.paid:
            rate = self.rate(pair, have, day, clean=clean)
            paid = [] if rate is None else [(day, amount * rate)]
            out.paid = [*out.paid, *paid]
        for i, day in enumerate(line.day):
            rate = self.rate(pair, have, day, clean=clean)
            if rate is None:
                continue
            out.day.append(day)
            out.high.append(line.high[i] * rate)
            out.low.append(line.low[i] * rate)
            out.close.append(line.close[i] * rate)
            out.ranged.append(line.ranged[i])
            out.unit.append(line.unit[i])
            out.total.append(line.total[i] * rate)
        return out

    # ------------------------------------------------------------------------------ windows
    def reached(self, line: Line, day: int) -> bool:
        """Whether the close of a day, or of the session before it, is known."""
        if day <= line.reach or line.fixed:
            return True
        if line.reach < 0 or day > self.world.as_of:
            return False
        closed = line.thing.kind != "coin"
        return all(
            (closed and _weekday(one) >= 5) or in_halt(line, one)
            for one in range(line.reach + 1, day + 1)
        )

    def window(self, line: Line, start: Moment, deadline: int | None, sessions: int) -> Window:
        """Find the sessions that a call is about."""
        opens, closes = hours_of(line.thing)
        if (opens, closes) == (0, 1440):  # a time counts like a date alone
            start = Moment(start.day, None)
        found = Window(end=len(line.day) - 1, deadline=deadline)
        for i, day in enumerate(line.day):
            ahead, into = day - start.day, start.minute
            closed = ahead < 0 if into is None else ahead * 1440 + closes < into
            opened = ahead <= 0 if into is None else ahead * 1440 + opens <= into
            if found.reference is None and not closed:
                found.reference = i
            if found.first is None and not opened:
                found.first = i
        need = start.day
        if start.minute is not None and start.minute > closes:
            need += 1
        if sessions:
            self.place_sessions(line, found, sessions)
        else:
            self.place_date(line, found, deadline)
        self.mark_missing(line, found, need)
        return found

    def place_sessions(self, line: Line, found: Window, sessions: int) -> None:
        """Place the deadline of a horizon that counts sessions."""
        if found.reference is None:
            found.result, found.reason = "open", NO_REFERENCE
            if line.fixed:
                found.result, found.reason = "void", BEFORE_REFERENCE
            return
        last = found.reference + sessions
        if last < len(line.day):
            found.last = found.end = last
        elif line.fixed:
            found.last = len(line.day) - 1
            if found.last <= found.reference:
                found.result, found.reason = "void", IS_REFERENCE
        else:
            found.reason = RUNS

    def place_date(self, line: Line, found: Window, deadline: int) -> None:
        """Place a deadline that is a date."""
        if not self.reached(line, deadline):
            found.reason = RUNS if deadline > self.world.as_of else NO_DEADLINE_PRICE
            if found.reference is None:
                found.result, found.reason = "open", NO_REFERENCE
            return
        last = last_by(line, deadline)
        if found.reference is None or last is None or last <= found.reference:
            found.result, found.reason = "void", BEFORE_REFERENCE
            if found.reference is not None and last == found.reference:
                found.reason = IS_REFERENCE
            if in_halt(line, deadline):
                found.reason = HALTED
            found.last = last
            return
        found.end = last
        far = deadline - line.day[last] > ROLL_BACK
        if (
            far
            and not in_halt(line, deadline)
            and not (line.fixed and last == len(line.day) - 1)
        ):
            found.reason = NO_DEADLINE_PRICE
            return
        found.last = last

    def mark_missing(self, line: Line, found: Window, need: int) -> None:
        """Leave a call open for the rows that it needs and its file lacks.

        Without its reference it cannot be judged. Where the deadline session is missing, it is
        as if the window still ran.
        """
        due = found.deadline
        is_due = due is not None and self.reached(line, due)
        until = -1
        if found.reference is not None:
            until = line.day[found.reference] - 1
            until = until if due is None else min(until, due)
        elif is_due:
            until = due
        if self.is_missing(line, need, until):
            found.last, found.result, found.reason = None, "open", MISSING
            return
        last = last_by(line, due) if is_due else None
        begin = need if last is None else max(need, line.day[last] + 1)
        if is_due and self.is_missing(line, begin, due):
            found.last, found.result, found.reason = None, "", MISSING
            found.end = -1 if last is None else last

    def is_missing(self, line: Line, begin: int, until: int) -> bool:
        """Whether the market traded on a day for which the file lacks a row."""
        code = line.thing.market
        if not code or begin > until:
            return False
        own = self.line(line.thing.symbol, "", clean=False)
        for other in self.world.things:
            if other.market != code or other.symbol == line.thing.symbol:
                continue
            theirs = self.line(other.symbol, "", clean=False)
            for day in theirs.day:
                if theirs.ended is not None and day >= theirs.ended:
                    continue
                if line.ended is not None and day >= line.ended:
                    continue
                if day in own.day or day in own.stale or in_halt(own, day):
                    continue
                if begin <= day <= until:
                    return True
        return False

    # -------------------------------------------------------------------------------- calls
    def settle(self, call: Said) -> Answer:
        """Return what is listed of a call."""
        thing = self.things[call.symbol]
        zone = thing.zone
        said = read_moment(call.at, zone)
        start = said
        claim = read_claim(call.claim)
        senseless = self.senseless(call, claim, said)
        if senseless:
            return Answer("void", senseless)
        if call.given:
            start = self.started(call)
            if isinstance(start, Answer):
                return start
        deadline, sessions = deadline_of(call.horizon, start.day)
        if call.given and deadline is not None and start.day > deadline:
            return Answer("void", TOO_LATE)
        answer = self.judged(call, claim, said, start, deadline, sessions)
        if call.horizon in IMPUTED:
            for name, length in zip(
                ("shorter", "longer"), IMPUTED[call.horizon][1:], strict=True
            ):
                other = self.judged(call, claim, said, start, *deadline_of(length, start.day))
                kept = other.matured and other.result in ("hit", "miss")
                answer.alternates[name] = other.result if kept else ""
            answer.flags.add("imputed horizon")
        if answer.result in ("hit", "miss") and any(
            other and other != answer.result for other in answer.alternates.values()
        ):
            answer.flags.add("alternates disagree")
        return answer

    def senseless(self, call: Said, claim: Claim, said: Moment) -> str:
        """Return why a claim has no answer on its instruments whatever the prices."""
        thing = self.things[call.symbol]
        if thing.series == "total-return" and any(not unit for _, unit in claim.numbers):
            return NO_LEVELS
        if any(self.things[symbol].kind == "yield" for symbol in claim.others):
            return NO_RETURN
        _, sessions = deadline_of(call.horizon, said.day)
        line = self.line(thing.symbol, call.currency, clean=False)
        line = line or self.line(thing.symbol, "", clean=False)
        if claim.others and sessions and line.fixed:
            reference = self.window(line, said, None, sessions).reference
            if reference is None or reference + sessions > len(line.day) - 1:
                return UNCOUNTABLE
        return ""

    def started(self, call: Said) -> Moment | Answer:
        """Return when the clock of a conditional call starts, or what it came to without."""
        what, _, by = call.given.rpartition(" by ")
        zone = self.things[call.symbol].zone
        if what.startswith("fact:"):
            if call.decision is None or call.decision[1][:10] > _iso(self.world.as_of):
                return Answer("open", UNDECIDED)
            met, at = call.decision
            return read_moment(at, zone) if met else Answer("void", NOT_MET)
        symbol, _, claim = what.partition(" ")
        at = call.at
        if len(at) == 16:  # a bare time is one of the call's own venue
            at = datetime.fromisoformat(at).replace(tzinfo=ZoneInfo(zone)).isoformat()
        found = self.settle(Said("", at, symbol, claim, by))
        if found.result == "open":
            return Answer("open", UNDECIDED)
        if found.result != "hit":
            return Answer("void", NOT_MET)
        venue = self.things[symbol]
        if not venue.zone or not venue.opens:
            return Moment(found.decided, None)
        midnight = datetime.fromordinal(found.decided)
        _, closes = hours_of(venue)
        local = midnight + timedelta(minutes=closes - 1)
        start = at_venue(local.replace(tzinfo=ZoneInfo(venue.zone)), zone)
        return replace(start, minute=start.minute + 1)  # 24:00 is a time of the day it ends

    def judged(
        self,
        call: Said,
        claim: Claim,
        said: Moment,
        start: Moment,
        deadline: int | None,
        sessions: int,
    ) -> Answer:
        """Judge a call twice, once as filed and once without the prices in query."""
        job = Job(self, call, claim, said, start, deadline, sessions)
        answer = job.answer(clean=False)
        if job.is_queried():
            second = job.answer(clean=True)
            if (second.result, second.reason) != (answer.result, answer.reason):
                answer.result, answer.reason = "open", IN_QUERY
                answer.alternates = dict.fromkeys(answer.alternates, "")
        return answer


def in_halt(line: Line, day: int) -> bool:
    """Whether trading was halted on a day."""
    return any(begin <= day < until for begin, until in line.halts)


def last_by(line: Line, day: int) -> int | None:
    """Return the last session on or before a day."""
    found = None
    for i, session in enumerate(line.day):
        if session > day:
            break
        found = i
    return found


# ----------------------------------------------------------------------------- one judgement
COMPARISONS = ("beats", "beats by", "lags", "lags by", "tops")
BY_LEVEL_AT_END = {
    "ends above": (1, True), "ends below": (-1, True),
    "ends at least": (1, False), "ends at most": (-1, False),
}  # fmt: skip
ANY_LEVEL = {
    "closes above": (1, True, False), "closes below": (-1, True, False),
    "trades above": (1, True, True), "trades below": (-1, True, True),
    "touches": (0, False, True),
}  # fmt: skip
STAYS = ("stays above", "stays below", "stays between and")
RANGES = ("ends within", "ends between and", "range to at", "quantiles", "bins")


class Job:
    """One call with one horizon."""

    def __init__(self, settler, call, claim, said, start, deadline, sessions):
        self.settler, self.call, self.claim = settler, call, claim
        self.said, self.start, self.deadline, self.sessions = said, start, deadline, sessions
        self.thing = settler.things[call.symbol]
        self.additive = self.thing.kind == "yield"
        self.scale = settler.unit(call.symbol, said.day)
        if self.thing.series == "total-return":
            self.scale = 1.0
        self.compares = claim.head in COMPARISONS

    def get(self, symbol: str, *, clean: bool) -> Line | None:
        currency = self.call.currency
        if self.compares:
            currency = currency or self.thing.currency  # the legs are brought to it as well
        return self.settler.line(symbol, currency, clean=clean)

    def is_queried(self) -> bool:
        """Whether any instrument of the call has a price in query at all."""
        lines = [self.get(one, clean=False) for one in (self.call.symbol, *self.claim.others)]
        return any(line is not None and line.queried for line in lines)

    def levels(self) -> list[float]:
        """Return the levels named, in the units of the first day."""
        return [value * self.scale for value, unit in self.claim.numbers if unit == ""]

    def answer(self, *, clean: bool) -> Answer:
        """Judge the call on one reading of the prices."""
        line = self.get(self.call.symbol, clean=clean)
        if line is None:
            return Answer("open", NO_PAIR)
        legs = [self.get(symbol, clean=clean) for symbol in self.claim.others]
        if any(leg is None for leg in legs):
            return Answer("open", NO_LEG_PAIR)
        window = self.settler.window(line, self.start, self.deadline, self.sessions)
        if self.compares:
            self.wait_for_legs(line, legs, window)
        answer = self.placed(line, window)
        verdict = Verdict(window.result, window.reason)
        begun = window.reference is not None and len(self.path(line, window)) > 0
        if begun and not window.result:
            verdict = self.judge(line, legs, window, window.reference)
        if verdict.result == "open" and not verdict.reason:
            verdict.reason = window.reason
        answer.result, answer.reason = verdict.result, verdict.reason
        if not verdict.result:
            answer.result = "open"
        answer.matured = window.last is not None
        if verdict.at is not None and verdict.result in ("hit", "miss"):
            self.tell(answer, line, window, verdict)
        if window.last is not None and not window.result:
            answer.alternates = self.alternates(line, legs, window)
        return answer

    def wait_for_legs(self, line: Line, legs: list[Line], window: Window) -> None:
        """A comparison on an ended instrument waits for its deadline day."""
        if not line.fixed or window.last not in (None, len(line.day) - 1):
            return
        if window.reason == MISSING:
            return
        if window.deadline is None:
            if window.reference is None or window.reference + self.sessions >= len(line.day):
                window.result, window.reason = "void", UNCOUNTABLE
            return
        every = all(leg.fixed for leg in legs)
        if not every and window.deadline > self.settler.world.as_of:
            window.last, window.result = None, ""
            window.reason = NO_REFERENCE if window.reference is None else RUNS

    def placed(self, line: Line, window: Window) -> Answer:
        """Return an answer with its sessions."""
        answer = Answer("")
        answer.moment = self.start
        if window.reference is not None:
            at = window.reference
            answer.reference = line.day[at]
            answer.reference_price = line.close[at] / line.unit[at]
        if window.first is not None:
            answer.first = line.day[window.first]
        if window.last is not None and not window.result:
            answer.deadline = line.day[window.last]
        return answer

    def tell(self, answer: Answer, line: Line, window: Window, verdict: Verdict) -> None:
        """Fill in what decided a call."""
        at, base = verdict.at, line.close[window.reference]
        answer.decided = line.day[at]
        answer.price = verdict.price / line.unit[at]
        answer.move = None if self.additive else verdict.price / base - 1
        answer.measured = verdict.measured
        if verdict.tie:
            answer.flags.add("tie")
        if window.last is None:
            answer.flags.add("early")

    # --------------------------------------------------------------------------- comparing
    def near(self, price: float, mark: float, base: float) -> bool:
        return abs(price - mark) <= TOLERANCE * max(abs(mark), abs(base))

    def beyond(
        self, price: float, mark: float, side: int, *, strict: bool, base: float
    ) -> bool:
        """Whether a price lies on one side of a mark; an equal one does unless strict."""
        if self.near(price, mark, base):
            return not strict
        return price > mark if side > 0 else price < mark

    def moved(self, base: float, side: int, *, of_thing: bool = False) -> float:
        """Return the price that lies the claim's size off the reference."""
        value, unit = next(one for one in self.claim.numbers if one[1])
        if unit == "%":
            if of_thing:  # an inverse quote: the thing gains as the quote falls
                return base / (1 - side * value / 100)
            return base * (1 + side * value / 100)
        step = {"pt": self.scale, "pp": 1.0, "bp": 0.01}[unit] * value
        return base + side * step

    def measure(self, price: float, base: float) -> float:
        return price - base if self.additive else price / base - 1

    # ----------------------------------------------------------------------------- judging
    def judge(self, line: Line, legs: list[Line], window: Window, reference: int) -> Verdict:
        """Judge a call whose window is sound."""
        head, base = self.claim.head, line.close[reference]
        if not self.additive and base <= 0:
            return Verdict("void", NOT_ABOVE_ZERO)
        if self.compares:
            return self.race_of_returns(line, legs, window, reference)
        if head in ("low holds", "high holds"):
            return self.old_extreme(line, window, reference)
        if head == "drawdown":
            return self.drawdown(line, window, reference)
        if head.startswith("volatility"):
            return self.volatility(line, window, reference)
        if head == "touches before":
            return self.race(line, window, base)
        if head in ("targets", "touches") and self.near(self.levels()[0], base, base):
            return Verdict("void", LEVEL_IS_REFERENCE)
        if head in ANY_LEVEL or head in ("rises", "falls"):
            return self.any_session(line, window, base)
        if head in STAYS:
            return self.every_session(line, window, base)
        if window.last is None:
            return Verdict("open")
        return self.at_end(line, window.last, base)

    def marks(self, base: float) -> list[tuple[float, int, bool]]:
        """Return the mark, side and strictness of what a price must keep, one or two."""
        head, levels = self.claim.head, self.levels()
        inverse = self.thing.sense == "inverse"
        if head in ("ends higher", "strengthens", "ends lower", "weakens"):
            side = 1 if head in ("ends higher", "strengthens") else -1
            if inverse and head in ("strengthens", "weakens"):
                side = -side
            return [(base, side, True)]
        if head in ("ends higher by", "ends lower by", "rises", "falls"):
            side = 1 if head in ("ends higher by", "rises") else -1
            return [(self.moved(base, side), side, False)]
        if head in ("strengthens by", "weakens by"):
            side = 1 if head == "strengthens by" else -1
            side = -side if inverse else side
            return [(self.moved(base, side, of_thing=inverse), side, False)]
        if head == "ends within":
            return [(self.moved(base, -1), 1, False), (self.moved(base, 1), -1, False)]
        if head in BY_LEVEL_AT_END:
            side, strict = BY_LEVEL_AT_END[head]
            return [(levels[0], side, strict)]
        if head in ("targets", "touches"):
            return [(levels[0], 1 if levels[0] > base else -1, False)]
        if head in ANY_LEVEL:
            side, strict, _ = ANY_LEVEL[head]
            return [(levels[0], side, strict)]
        if head in ("stays above", "stays below"):
            return [(levels[0], 1 if head == "stays above" else -1, False)]
        return [(levels[0], 1, False), (levels[-1], -1, False)]  # a range, or quantiles

    def keeps(self, price: float, base: float) -> tuple[bool, bool]:
        """Return whether a price keeps every mark, and whether a strict one is a tie."""
        if self.claim.head == "bins":
            return self.in_best_bin(price, base), False
        marks = self.marks(base)
        good = all(self.beyond(price, m, s, strict=t, base=base) for m, s, t in marks)
        return good, any(t and self.near(price, m, base) for m, _, t in marks)

    def in_best_bin(self, price: float, base: float) -> bool:
        shares = [value for value, unit in self.claim.numbers if unit == "%"]
        edges = self.levels()
        place = 0
        for number, edge in enumerate(edges):
            # the lowest edge belongs to the bin above it, and so does the only one
            above = number == 0 if self.near(price, edge, base) else price > edge
            if above:
                place = number + 1
        return shares[place] == max(shares)

    def at_end(self, line: Line, last: int, base: float) -> Verdict:
        price = line.close[last]
        good, tie = self.keeps(price, base)
        return Verdict(
            "hit" if good else "miss", "", last, price, self.measure(price, base), tie
        )

    def any_session(self, line: Line, window: Window, base: float, *, closes=False) -> Verdict:
        """Hit by the first session that gets there."""
        head = self.claim.head
        ((mark, side, strict),) = self.marks(base)
        prices = line.close
        if head in ANY_LEVEL and ANY_LEVEL[head][2] and not closes:
            prices = line.high if side > 0 else line.low
        tie = False
        for i in self.path(line, window):
            if self.beyond(prices[i], mark, side, strict=strict, base=base):
                return Verdict("hit", "", i, prices[i], self.measure(prices[i], base))
            tie = tie or self.near(prices[i], mark, base)
        if window.last is None:
            return Verdict("open")
        price = prices[window.last]
        return Verdict("miss", "", window.last, price, self.measure(price, base), tie)

    def path(self, line: Line, window: Window) -> range:
        begin = len(line.day) if window.first is None else window.first
        return range(begin, window.end + 1)

    def every_session(
        self, line: Line, window: Window, base: float, *, closes=False
    ) -> Verdict:
        """Missed by the first session that does not keep the level."""
        marks = self.marks(base)
        for i in self.path(line, window):
            for mark, side, strict in marks:
                prices = line.low if side > 0 else line.high
                price = line.close[i] if closes else prices[i]
                if not self.beyond(price, mark, side, strict=strict, base=base):
                    return Verdict("miss", "", i, price, self.measure(price, base))
        if window.last is None:
            return Verdict("open")
        price = (line.low if marks[0][1] > 0 else line.high)[window.last]
        return Verdict("hit", "", window.last, price, self.measure(price, base))

    def race(self, line: Line, window: Window, base: float) -> Verdict:
        levels = self.levels()
        if any(self.near(level, base, base) for level in levels):
            return Verdict("void", LEVEL_IS_REFERENCE)
        for i in self.path(line, window):
            touched = []
            for level in levels:
                side = 1 if level > base else -1
                price = line.high[i] if side > 0 else line.low[i]
                touched.append(self.beyond(price, level, side, strict=False, base=base))
            if all(touched):
                return Verdict("void", BOTH_TOUCHED)
            if any(touched):
                level = levels[0] if touched[0] else levels[1]
                price = line.high[i] if level > base else line.low[i]
                result = "hit" if touched[0] else "miss"
                return Verdict(result, "", i, price, self.measure(price, base))
        if window.last is None:
            return Verdict("open")
        price = line.close[window.last]
        return Verdict("miss", "", window.last, price, self.measure(price, base))

    def drawdown(self, line: Line, window: Window, reference: int) -> Verdict:
        begin = max(0, reference - LOOK_BACK)
        peak, was_under, deepest, crossed = line.close[begin], False, None, None
        path = self.path(line, window)
        for i in range(begin, window.end + 1):
            close = line.close[i]
            peak = max(peak, close)
            under = self.beyond(
                close, self.moved(peak, -1), -1, strict=False, base=line.close[reference]
            )
            if i in path:
                fall = peak - close if self.additive else 1 - close / peak
                if under and not was_under and crossed is None:
                    crossed = i
                if deepest is None or fall > deepest:
                    deepest = fall
            was_under = under
        if crossed is not None:
            return Verdict("hit", "", crossed, line.close[crossed], deepest)
        if window.last is None:
            return Verdict("open")
        return Verdict("miss", "", window.last, line.close[window.last], deepest)

    def old_extreme(self, line: Line, window: Window, reference: int) -> Verdict:
        before = line.close[max(0, reference - LOOK_BACK) : reference]
        if not before:
            return Verdict("void", NO_PAST)
        side = 1 if self.claim.head == "low holds" else -1
        level = min(before) if side > 0 else max(before)
        base = line.close[reference]
        for i in self.path(line, window):
            close = line.close[i]
            if not self.beyond(close, level, side, strict=False, base=base):
                return Verdict("miss", "", i, close, self.measure(close, level))
        if window.last is None:
            return Verdict("open")
        close = line.close[window.last]
        return Verdict("hit", "", window.last, close, self.measure(close, level))

    def volatility(self, line: Line, window: Window, reference: int) -> Verdict:
        closes = line.close[reference : window.end + 1]
        if window.last is not None and len(closes) < 3:
            return Verdict("void", TOO_FEW)
        if any(close <= 0 for close in closes):  # no later session can mend that
            return Verdict("void", NO_LOGARITHM)
        if window.last is None:
            return Verdict("open")
        moves = [math.log(closes[i]) - math.log(closes[i - 1]) for i in range(1, len(closes))]
        found = statistics.stdev(moves) * math.sqrt(252)
        mark = self.claim.numbers[0][0] / 100
        tie = abs(found - mark) <= TOLERANCE * max(mark, found)
        side = 1 if self.claim.head == "volatility above" else -1
        good = not tie and side * (found - mark) > 0
        price = line.close[window.last]
        return Verdict("hit" if good else "miss", "", window.last, price, found, tie)

    # ---------------------------------------------------------------------------- compared
    def race_of_returns(
        self,
        line: Line,
        legs: list[Line],
        window: Window,
        reference: int,
        *,
        by_price: bool = False,
    ) -> Verdict:
        if self.additive or any(leg.thing.kind == "yield" for leg in legs):
            return Verdict("void", NO_RETURN)
        begin = [last_by(leg, line.day[reference]) for leg in legs]
        known = zip(legs, begin, strict=True)
        day = line.day[reference]
        if any(
            at is None or leg.close[at] <= 0 or self.was_over(leg, day) for leg, at in known
        ):
            return Verdict("void", NO_LEG_REFERENCE)
        if window.last is None:
            return Verdict("open")
        until = line.day[window.last]
        if line.fixed and window.last == len(line.day) - 1 and window.deadline is not None:
            until = window.deadline
        if not all(self.settler.reached(leg, until) for leg in legs):
            return Verdict("open", NO_LEG_PRICE)
        total = not by_price and all(
            until <= one.total_until or until >= one.total_since for one in (line, *legs)
        )
        own = self.grown(line, reference, window.last, total=total)
        others = [
            self.grown(leg, at, last_by(leg, until), total=total)
            for leg, at in zip(legs, begin, strict=True)
        ]
        size = self.claim.numbers[0][0] / 100 if self.claim.numbers else 0.0
        side = -1 if self.claim.head.startswith("lags") else 1
        strict = not self.claim.numbers
        lead = min(side * (own - other) for other in others) - size
        tie = abs(lead) <= TOLERANCE
        good = lead > 0 if not tie else not strict
        price = line.close[window.last]
        verdict = Verdict("hit" if good else "miss", "", window.last, price)
        verdict.tie = tie and strict
        verdict.measured = side * (lead + size)
        return verdict

    def was_over(self, leg: Line, day: int) -> bool:
        """Whether an instrument had come to an amount for good before a day."""
        return leg.fixed and day > leg.day[-1]

    def grown(self, line: Line, begin: int, end: int, *, total: bool) -> float:
        worth = line.total if total else line.close
        return worth[end] / worth[begin] - 1

    # --------------------------------------------------------------------- other readings
    def alternates(self, line: Line, legs: list[Line], window: Window) -> dict[str, str]:
        """Return what other readings would have given."""
        head, reference = self.claim.head, window.reference
        base = line.close[reference]
        levelled = self.thing.series == "total-return" and bool(self.levels())
        found = dict.fromkeys(
            ("any_time", "closes", "deadline", "price_return", "close_before"), ""
        )
        stuck = head in ("touches", "targets") and self.near(self.levels()[0], base, base)
        if not levelled and not stuck:
            if head in ANY_LEVEL or head in STAYS or head in ("rises", "falls"):
                good, _ = self.keeps(line.close[window.last], base)
                found["deadline"] = "hit" if good else "miss"
            if head == "touches" or head.startswith("trades"):
                found["closes"] = self.any_session(line, window, base, closes=True).result
            if head in STAYS:
                found["closes"] = self.every_session(line, window, base, closes=True).result
            if self.has_any_time():
                found["any_time"] = self.any_time(line, window, base)
        if self.compares:
            verdict = self.race_of_returns(line, legs, window, reference, by_price=True)
            found["price_return"] = verdict.result
        if reference > 0:
            found["close_before"] = self.judge(line, legs, window, reference - 1).result
        return {name: kept if kept in ("hit", "miss") else "" for name, kept in found.items()}

    def has_any_time(self) -> bool:
        head = self.claim.head
        by = ("ends higher by", "ends lower by", "strengthens by", "weakens by")
        along = ("closes above", "closes below", "rises", "falls", "targets")
        return head in BY_LEVEL_AT_END or head in by or head in along

    def any_time(self, line: Line, window: Window, base: float) -> str:
        ((mark, side, strict),) = self.marks(base)
        for i in self.path(line, window):
            price = line.high[i] if side > 0 else line.low[i]
            if self.beyond(price, mark, side, strict=strict, base=base):
                return "hit"
        return "miss"
