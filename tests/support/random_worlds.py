"""Random worlds of instruments, actions and calls, and the same worlds in a real ledger.

One generator serves both a seeded draw and a search that shrinks: it asks a `Source` for every
choice. The first option of a choice is the plainest one.
"""

from __future__ import annotations

import csv
import io
import json
import sqlite3
from dataclasses import replace
from datetime import date, datetime
from itertools import pairwise
from zoneinfo import ZoneInfo

import numpy as np
from hypothesis import strategies as st

from foresaid.ledger.store import Ledger
from foresaid.model.codebook import parse_codebook
from foresaid.pipeline.batches import ImportRequest
from foresaid.pipeline.confirming import Confirmation, confirm_prices
from foresaid.pipeline.deciding import DecisionRequest, decide_condition
from foresaid.pipeline.importing import import_file
from foresaid.pipeline.listing import call_rows
from foresaid.pipeline.settling import settle_ledger
from support.slow_settler import Answer, Deed, Row, Said, SlowSettler, Thing, World

TODAY = date(2026, 6, 30)
NOW = "2026-06-30T12:00:00+00:00"
MONDAY = date(2024, 1, 1).toordinal()


# -------------------------------------------------------------------------------- choices
class Seeded:
    """Choices from a seeded generator."""

    def __init__(self, seed):
        self.rng = np.random.default_rng(seed)

    def pick(self, options):
        return options[int(self.rng.integers(len(options)))]

    def whole(self, low, high):
        return int(self.rng.integers(low, high + 1))


class Drawn:
    """Choices from hypothesis, which shrinks towards the first and the lowest."""

    def __init__(self, data):
        self.data = data

    def pick(self, options):
        return options[self.data.draw(st.integers(0, len(options) - 1))]

    def whole(self, low, high):
        return self.data.draw(st.integers(low, high))


# ---------------------------------------------------------------------------- instruments
VENUES = (
    ("Europe/Vienna", "09:00", "17:30"),
    ("America/New_York", "09:30", "16:00"),
    ("America/Chicago", "17:00", "16:00"),
    ("Asia/Tokyo", "09:00", "15:00"),
    ("Europe/Vienna", "", ""),
    ("", "", ""),
    ("UTC", "00:00", "24:00"),
)
GAPS = (0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 1, 1, 2, 7)
FEW_GAPS = (0,) * 60 + (1, 1, 2, 9)
STEPS = (0, 0, 0, 1, 1, -1, -1, 2, -2, 3, -3)


def _days(source, n, *, weekends, gaps, begin=MONDAY):
    """Return session days with holes."""
    days, day = [], begin + source.whole(0, 4)
    while len(days) < n:
        if weekends or (day + 6) % 7 < 5:
            days.append(day)
            for _ in range(source.pick(gaps)):
                day += 1
        day += 1
    return days


def _walk(source, days, *, start, jumps, floor):
    """Return close, high, low of each day in whole numbers, with rare leaps."""
    rows, close = [], start
    for _ in days:
        step = source.pick(STEPS)
        kept = close
        if jumps and source.whole(0, 60) == 60:
            step = source.pick((start // 2, -start // 2, start, start // 3))
        close = max(close + step, floor)
        high, low = (
            (max(close, kept) + source.pick((0, 0, 1, 2))),
            close - source.pick((0, 1, 2)),
        )
        low = max(low, floor)
        if jumps and source.whole(0, 80) == 80:
            high, low = source.pick(
                ((high + start // 2, low), (high, min(low, max(low // 2, floor))))
            )
        rows.append((close, high, low))
        if step > 3 and source.whole(0, 1):
            close = kept  # a leap that lasts for one session
    return rows


def _rows(source, days, walk, *, plain):
    """Return the rows of a file: highs and lows, volumes and totals where it has them."""
    has_range, has_volume = source.pick((True, True, False)), source.pick((False, True))
    has_total = not plain and source.pick((False, False, False, True))
    total_gap = source.pick((False, True)) if has_total else False
    rows, shares = [], 1.0
    for i, (day, (close, high, low)) in enumerate(zip(days, walk, strict=True)):
        volume = source.pick((100, 100, 100, 0)) if has_volume else None
        if has_total and source.whole(0, 9) == 9:
            shares *= 1.01
        ranged = has_range and source.whole(0, 30) < 30
        if volume == 0 and i and source.whole(0, 2) < 2:
            close = high = low = rows[-1].close
        total = None
        if has_total and not (total_gap and i == len(days) // 2):
            total = close * shares
        rows.append(
            Row(
                day,
                float(close),
                float(high) if ranged else None,
                float(low) if ranged else None,
                volume,
                total,
            )
        )
    return rows


def things(source, sizes, *, jumps=True, gaps=GAPS):
    """Return the instruments of a world with their prices."""
    found = []
    n_shares = source.whole(1, 5)
    shared = source.pick(VENUES)
    for number in range(n_shares):
        venue = source.pick(VENUES)
        market = source.pick(("", "", "XORV"))
        venue = shared if market else venue
        kind = source.pick(("share", "share", "index", "fund", "commodity"))
        days = _days(source, source.whole(*sizes), weekends=False, gaps=gaps)
        walk = _walk(
            source, days, start=source.pick((100, 50)), jumps=jumps and source.whole(0, 1),
            floor=5,
        )  # fmt: skip
        found.append(
            Thing(
                f"S{number}", kind, source.pick(("KOR", "KOR", "SEL")), *venue,
                source.pick(("direct", "direct", "inverse")), market,
                series=source.pick(("raw", "raw", "raw", "split-adjusted", "total-return")),
                rows=tuple(_rows(source, days, walk, plain=False)),
            )
        )  # fmt: skip
    if source.whole(0, 1):
        days = _days(source, source.whole(*sizes), weekends=False, gaps=gaps)
        walk = _walk(source, days, start=source.pick((400, 20)), jumps=True, floor=-50)
        rows = _rows(source, days, walk, plain=True)
        found.append(
            Thing(
                "Y", "yield", "KOR", *source.pick(VENUES),
                source.pick(("inverse", "direct")), rows=tuple(map(_hundredth, rows)),
            )
        )  # fmt: skip
    if len({thing.currency for thing in found}) > 1 and source.whole(0, 9) < 9:
        begin = MONDAY - source.pick((7, 7, 7, 7, -14))  # a pair may come late
        days = _days(source, sizes[1], weekends=False, gaps=gaps, begin=begin)
        walk = _walk(source, days, start=125, jumps=source.pick((False, True)), floor=20)
        rows = _rows(source, days, walk, plain=True)
        base, term = source.pick((("KOR", "SEL"), ("SEL", "KOR")))
        found.append(
            Thing(
                "P", "pair", term, *source.pick(VENUES), source.pick(("direct", "inverse")),
                "", base, term, rows=tuple(map(_hundredth, rows)),
            )
        )  # fmt: skip
    if source.whole(0, 3) == 3:
        days = _days(source, source.whole(*sizes), weekends=True, gaps=gaps)
        walk = _walk(source, days, start=300, jumps=True, floor=5)
        found.append(
            Thing(
                "C", "coin", "KOR", "UTC", "00:00", "24:00",
                rows=tuple(_rows(source, days, walk, plain=True)),
            )
        )  # fmt: skip
    return found


def _hundredth(row):
    def part(value):
        return None if value is None else round(value / 100, 4)

    return replace(row, close=part(row.close), high=part(row.high), low=part(row.low))


# ---------------------------------------------------------------------------------- actions
def with_actions(source, found):
    """Return the instruments in the units of their days, and their actions."""
    deeds, out, latest = [], [], {}
    shares = [thing for thing in found if thing.symbol.startswith("S")]
    for thing in found:
        if thing not in shares or not source.whole(0, 2):
            out.append(thing)
            continue
        own = _steps(source, thing) + _halts(source, thing) + _dividends(source, thing)
        if source.whole(0, 3) == 3:
            others = [
                one
                for one in shares
                if one.symbol > thing.symbol and one.series != "total-return"
            ]
            own += _ending(source, thing, others, latest)
        end = min((d.day for d in own if d.kind in ENDINGS), default=10**9)
        own = [d for d in own if d.kind in ENDINGS or d.day < end]
        deeds += own
        out.append(_in_units_of_the_day(thing, own))
    return out, deeds


ENDINGS = ("cash-out", "merger", "wind-up")


def _some_day(source, thing):
    """Return a session or a day near one."""
    return source.pick(thing.rows).day + source.pick((0, 0, 0, 1, 2))


def _steps(source, thing):
    deeds = {}
    if thing.series == "total-return":
        return []
    for _ in range(source.pick((0, 0, 1, 2))):
        kind = "split" if thing.kind in ("share", "fund") else "rebase"
        ratio = source.pick((2.0, 3.0, 0.5, 0.1, 1.5))
        day = _some_day(source, thing)
        deeds[day] = Deed(thing.symbol, day, kind, ratio)
    return list(deeds.values())


def _halts(source, thing):
    if source.whole(0, 2) < 2:
        return []
    begin = _some_day(source, thing)
    deeds = [Deed(thing.symbol, begin, "halt")]
    if source.whole(0, 3):
        deeds.append(Deed(thing.symbol, begin + source.pick((1, 3, 7, 12, 20)), "resume"))
    return deeds


def _dividends(source, thing):
    if thing.series == "total-return":
        return []
    days = {_some_day(source, thing) for _ in range(source.pick((0, 1, 3)))}
    return [
        Deed(thing.symbol, day, "dividend", amount=source.pick((1.0, 2.0, 0.5, 0.0)))
        for day in sorted(days)
    ]


def _ending(source, thing, others, latest):
    """Return how an instrument ended, after everything that became it."""
    day = max(_some_day(source, thing), thing.rows[0].day + 1, latest.get(thing.symbol, 0))
    kinds = ["cash-out", "wind-up"] + ["merger"] * 2 * bool(others)
    kind = source.pick(kinds)
    last = next((row.close for row in reversed(thing.rows) if row.day < day), 100.0)
    if kind == "wind-up":
        return [Deed(thing.symbol, day, kind, amount=source.pick((0.0, 1.0, last)))]
    if kind == "cash-out":
        amount = last + source.pick((0, 5, -5, 60))
        return [Deed(thing.symbol, day, kind, amount=max(amount, 1.0))]
    amount = source.pick((None, None, 3.0))
    ratio = source.pick((1.0, 0.5, 0.3))
    into = source.pick(others).symbol
    latest[into] = max(latest.get(into, 0), day + 1)
    return [Deed(thing.symbol, day, kind, ratio, amount, into)]


def _in_units_of_the_day(thing, deeds):
    """Return a thing whose raw prices follow its splits."""
    if thing.series != "raw":
        return thing
    rows = []
    for row in thing.rows:
        factor = 1.0
        for deed in deeds:
            if deed.day <= row.day and deed.kind in ("split", "rebase"):
                factor *= deed.ratio if deed.kind == "rebase" else 1 / deed.ratio

        def cut(value, factor=factor):
            return None if value is None else round(value * factor, 10)

        rows.append(replace(row, close=cut(row.close), high=cut(row.high), low=cut(row.low)))
    return replace(thing, rows=tuple(rows))


# ------------------------------------------------------------------------------------ calls
LEVEL_KINDS = (
    "ends above L", "ends below L", "ends at least L", "ends at most L",
    "ends between L and M", "targets L", "range L to M at 80%", "closes above L",
    "closes below L", "touches L", "trades above L", "trades below L", "stays above L",
    "stays below L", "stays between L and M", "touches L before M", "touches M before L",
    "Q", "B",
)  # fmt: skip
OTHER_KINDS = (
    "ends higher", "ends lower", "ends higher by S", "ends lower by S", "strengthens",
    "weakens", "strengthens by S", "weakens by S", "ends within S", "rises S", "falls S",
    "drawdown S", "low holds", "high holds", "volatility above V", "volatility below V",
)  # fmt: skip
LEG_KINDS = ("beats O", "lags O", "beats O by V", "lags O by V", "tops OO")
HORIZONS = (
    "DATE", "DATE", "DATE", "SESSIONS", "SESSIONS", "SESSIONS", "DAYS", "2 weeks", "1 month",
    "1 year", "end of week", "end of month", "end of quarter", "end of year", "YEAR", "MONTH",
    "QUARTER", "soon", "immediately", "near term", "",
)  # fmt: skip
CLOCKS = (None, None, "OPEN", "CLOSE", "LATE", "EARLY", "08:00", "12:00", "16:15", "17:31",
          "23:30", "00:00")  # fmt: skip
OTHER_ZONES = ("", "+00:00", "-05:00", "+09:00", " Asia/Tokyo", " America/New_York")


def _number(value):
    text = f"{value:.6f}".rstrip("0").rstrip(".")
    return text or "0"


def _level(source, thing, near):
    """Return a level: a price of the file near a day, or one not far from it."""
    rows = thing.rows
    at = min(max(near + source.whole(-3, 12), 0), len(rows) - 1)
    row = rows[at]
    prices = [one for one in (row.close, row.high, row.low) if one is not None]
    price = source.pick(prices)
    if source.whole(0, 2) == 2:
        price *= source.pick((1.02, 0.98, 1.3, 0.7, 2.0, 0.5))
    low = -20.0 if thing.kind == "yield" else 0.01
    return max(round(price, 4), low)


def _size(source, thing):
    if thing.kind == "yield":
        return source.pick(("0.05pp", "5bp", "0.02pp", "30bp", "1pp"))
    return source.pick(("2%", "1%", "5%", "10%", "25%", "2pt", "1pt", "5pt", "50%"))


def _phrase(source, thing, others, near):
    """Return a claim of any kind about a thing."""
    kinds = OTHER_KINDS + LEVEL_KINDS + (LEG_KINDS * 3 if others else ())
    form = source.pick(kinds)
    low = _level(source, thing, near)
    high = _level(source, thing, near)
    if form == "Q":
        return _quantiles(source, low)
    if form == "B":
        return _bins(source, low)
    if low > high:
        low, high = high, low
    if low == high:
        high = low + 1
    words = []
    for word in form.split():
        if word == "S":
            size = _size(source, thing)
            if form.startswith("drawdown") and size.endswith("pt"):
                size = "5%"
            word = size
        elif word == "V":
            word = f"{source.pick((1, 2, 5, 20, 40, 80))}%"
        elif word in ("L", "M"):
            word = _number(low if word == "L" else high)
        elif word == "O":
            word = source.pick(others)
        elif word == "OO":
            first = source.pick(others)
            rest = [one for one in others if one != first and source.whole(0, 1)]
            word = ", ".join([first, *rest])
        words.append(word)
    return " ".join(words)


def _quantiles(source, level):
    shares = source.pick(((10, 90), (10, 50, 90), (5, 25, 75, 95)))
    parts = []
    for share in shares:
        parts.append(f"{share}%={_number(level)}")
        level = round(level + source.pick((1.0, 2.0, 5.0)) * max(abs(level) / 100, 0.01), 4)
    return "quantiles " + ", ".join(parts)


def _bins(source, level):
    shares = source.pick(((40, 60), (60, 40), (20, 50, 30), (40, 20, 40), (25, 25, 25, 25),
                          (10, 20, 30, 40), (50, 50), (10, 60, 10, 20)))  # fmt: skip
    edges = []
    for _ in shares[1:]:
        edges.append(_number(level))
        level = round(level + source.pick((1.0, 2.0, 5.0)) * max(abs(level) / 100, 0.01), 4)
    parts = [f"<{edges[0]}: {shares[0]}%"]
    for share, (a, b) in zip(shares[1:-1], pairwise(edges), strict=True):
        parts.append(f"{a} to {b}: {share}%")
    parts.append(f">{edges[-1]}: {shares[-1]}%")
    return "bins " + ", ".join(parts)


def _clock(source, thing):
    """Return a time of day, or None for a date alone."""
    clock = source.pick(CLOCKS)
    if clock in ("OPEN", "CLOSE", "LATE", "EARLY"):
        if not thing.opens:
            return "10:00"
        name = thing.opens if clock in ("OPEN", "EARLY") else thing.closes
        minutes = int(name[:2]) * 60 + int(name[3:])
        minutes += {"LATE": 1, "EARLY": -1}.get(clock, 0)
        minutes %= 1440
        return f"{minutes // 60:02}:{minutes % 60:02}"
    return clock


def _said_at(source, thing, day):
    """Return a moment of publication as text, and its day at the venue."""
    text = date.fromordinal(day).isoformat()
    clock = _clock(source, thing)
    if clock is None:
        return text, day
    zone = source.pick(OTHER_ZONES)
    if not zone and not thing.zone:
        zone = "+00:00"
    if zone[:1] in ("+", "-"):
        moment = datetime.fromisoformat(f"{text}T{clock}{zone}")
        if thing.zone:
            moment = moment.astimezone(ZoneInfo(thing.zone))
        return f"{text}T{clock}{zone}", moment.toordinal()
    if zone:
        moment = datetime.fromisoformat(f"{text}T{clock}").replace(
            tzinfo=ZoneInfo(zone.strip())
        )
        if thing.zone:
            moment = moment.astimezone(ZoneInfo(thing.zone))
        return f"{text} {clock}{zone}", moment.toordinal()
    return f"{text}T{clock}", day


def _horizon(source, day):
    """Return a horizon that does not end before a day."""
    form = source.pick(HORIZONS)
    start = date.fromordinal(day)
    if form == "DATE":
        ahead = source.pick((1, 2, 3, 5, 7, 10, 14, 20, 30, 45, 0, 90))
        return date.fromordinal(day + ahead).isoformat()
    if form == "SESSIONS":
        return f"{source.whole(1, 25)} sessions".replace("1 sessions", "1 session", 1) if (
            source.whole(0, 9)
        ) else "60 sessions"  # fmt: skip
    if form == "DAYS":
        return f"{source.whole(2, 40)} days"
    if form == "YEAR":
        return f"end of {start.year}"
    if form == "MONTH":
        return f"end of {start:%B} {start.year}"
    if form == "QUARTER":
        return f"end of Q{(start.month + 2) // 3} {start.year}"
    return form


def calls(source, found, n):
    """Return calls about any of the things."""
    out = []
    rivals = [one.symbol for one in found if one.symbol[0] in "SC" or not source.whole(0, 9)]
    for number in range(n):
        thing = source.pick(found)
        near = source.whole(0, len(thing.rows) - 1)
        day = thing.rows[near].day + source.pick((0, 0, 0, 1, 2, -1))
        at, said = _said_at(source, thing, day)
        others = [one for one in rivals if one != thing.symbol]
        call = Said(
            f"R{number}",
            at,
            thing.symbol,
            _phrase(source, thing, others, near),
            _horizon(source, said),
        )
        if thing.symbol[0] == "S" and source.whole(0, 5) == 5:
            call = replace(call, currency=source.pick(("SEL", "KOR")))
        if source.whole(0, 11) == 11:
            call = _given(source, found, call, day)
        out.append(call)
    return out


def _given(source, found, call, day):
    """Return a call that depends on something."""
    by = date.fromordinal(day + source.whole(2, 20)).isoformat()
    if not source.whole(0, 3):
        call = replace(call, given=f"fact: the bridge opens by {by}")
        met = date.fromordinal(day + 2).isoformat()
        decision = source.pick((None, (True, met), (True, f"{met}T12:00+00:00"), (False, met)))
        return replace(call, decision=decision)
    other = source.pick(found)
    near = next((i for i, row in enumerate(other.rows) if row.day >= day), 0)
    legs = [one.symbol for one in found if one.symbol[0] in "SC" and one != other]
    phrase = _phrase(source, other, legs, near)
    return replace(call, given=f"{other.symbol} {phrase} by {by}")


def world(source, *, sizes, n_calls, gaps=GAPS):
    """Return a world with actions, calls and a day of settlement."""
    found, deeds = with_actions(source, things(source, sizes, gaps=gaps))
    last = max(thing.rows[-1].day for thing in found)
    first = min(thing.rows[0].day for thing in found)
    as_of = source.pick((last + 3, last, last + 1, last + 40, (first + 2 * last) // 3))
    confirmed = []
    for thing in found:
        leaps = [row.day for row in thing.rows if row.high and row.high > row.close * 1.2]
        confirmed += [(thing.symbol, day) for day in leaps if not source.whole(0, 2)]
    stated = [
        call
        for call in calls(source, found, n_calls)
        if date.fromisoformat(call.at[:10]).toordinal() <= as_of
    ]
    return World(tuple(found), tuple(deeds), tuple(stated), as_of, tuple(confirmed))


# -------------------------------------------------------------------------- the real ledger
def _csv(rows):
    names = list(dict.fromkeys(name for row in rows for name in row))
    text = io.StringIO()
    table = csv.DictWriter(text, names, lineterminator="\n")
    table.writeheader()
    table.writerows(rows)
    return text.getvalue()


def _iso(day):
    return date.fromordinal(day).isoformat()


def files(one):
    """Yield the files of a world: what, series, text."""
    names = ("kind", "currency", "zone", "opens", "closes", "sense", "market", "base", "term")
    yield (
        "instruments",
        "raw",
        _csv(
            [
                {"instrument": thing.symbol} | {name: getattr(thing, name) for name in names}
                for thing in one.things
            ]
        ),
    )
    for series in ("raw", "split-adjusted", "total-return"):
        rows = [
            {"instrument": thing.symbol, "session": _iso(row.day)}
            | {
                name: "" if getattr(row, name) is None else repr(getattr(row, name))
                for name in ("high", "low", "close", "volume", "total")
            }
            for thing in one.things
            if thing.series == series
            for row in thing.rows
        ]
        if rows:
            yield "prices", series, _csv(rows)
    rows = [
        {"instrument": deed.symbol, "effective": _iso(deed.day), "action": deed.kind}
        | {name: "" if getattr(deed, name) is None else getattr(deed, name)
           for name in ("ratio", "amount", "into")}
        for deed in one.deeds
    ]  # fmt: skip
    if rows:
        yield "actions", "raw", _csv(rows)
    yield "forecasters", "raw", "forecaster\nm.tarn\n"
    rows = [
        {
            "ref": call.ref, "forecaster": "m.tarn", "said_at": call.at,
            "instrument": call.symbol, "claim": call.claim, "horizon": call.horizon,
            "currency": call.currency, "given": call.given,
        }
        for call in one.calls
    ]  # fmt: skip
    if rows:
        yield "calls", "raw", _csv(rows)


class Bench:
    """Settles worlds in ledgers in memory, each a copy of an empty one."""

    def __init__(self, folder, source):
        self.folder = folder
        self.book = parse_codebook(source, file="test")
        empty = folder / "empty.foresaid"
        if not empty.exists():
            with Ledger.create(empty):
                pass
        self.empty = sqlite3.connect(empty)

    def close(self):
        self.empty.close()

    def ledger(self):
        """Return an empty ledger in memory."""
        opened = sqlite3.connect(":memory:")
        self.empty.backup(opened)
        opened.isolation_level = None
        opened.execute("PRAGMA foreign_keys = ON")
        return Ledger(self.folder / "memory.foresaid", opened)

    def listed(self, one):
        """Return the list of calls of a settled world by ref."""
        with self.ledger() as ledger:
            for what, series, text in files(one):
                path = self.folder / f"{what}.csv"
                path.write_text(text, encoding="utf-8")
                request = ImportRequest(what, path, today=TODAY, at=NOW, series=series)
                import_file(ledger, request, self.book)
            self.persons(ledger, one)
            day = date.fromordinal(one.as_of)
            settle_ledger(ledger, self.book, as_of=day, at=NOW)
            rows, _ = call_rows(ledger, {})
        return {row["ref"]: row for row in rows}

    def persons(self, ledger, one):
        """Keep the decisions and confirmations of a world."""
        for symbol, day in one.confirmed:
            confirm_prices(ledger, Confirmation(symbol, _iso(day), "m.tarn", "Bulletin 3", NOW))
        for call in one.calls:
            if call.decision is not None:
                met, at = call.decision
                decide_condition(
                    ledger,
                    DecisionRequest(call.ref, met, at, "m.tarn", "Gazette 4", TODAY, NOW),
                )


# -------------------------------------------------------------------------------- comparing
ALTERNATES = (
    "any_time", "closes", "deadline", "price_return", "close_before", "shorter", "longer"
)  # fmt: skip


def told(answer: Answer) -> dict[str, object]:
    """Return an answer of the slow settler in the words of the list of calls."""

    def iso(day):
        return "" if day is None else _iso(day)

    row = {"outcome": answer.result, "reason": answer.reason}
    if answer.moment is None:
        return row
    if answer.result in ("hit", "miss"):
        row |= {
            "reference_session": iso(answer.reference),
            "reference_price": answer.reference_price,
            "deadline_session": iso(answer.deadline),
            "decided_session": iso(answer.decided),
            "decided_price": answer.price,
            "first_session": iso(answer.first),
            "move_frac": answer.move,
            "measured": answer.measured,
            "matured": int(answer.matured),
        }
        row |= {f"alt_{name}": answer.alternates.get(name, "") for name in ALTERNATES}
    return row


def _same(mine, theirs):
    if isinstance(mine, float):
        if theirs in (None, ""):
            return False
        return abs(mine - theirs) <= 1e-9 * max(1.0, abs(mine), abs(theirs))
    return (mine in (None, "") and theirs in (None, "")) or mine == theirs


def differences(one, listed, settler=None):
    """Return for each ref what the two settlers say of it, where they differ."""
    settler = settler or SlowSettler(one)
    found = {}
    for call in one.calls:
        mine, theirs = told(settler.settle(call)), listed[call.ref]
        off = {
            name: (value, theirs[name])
            for name, value in mine.items()
            if not _same(value, theirs[name])
        }
        if off:
            found[call.ref] = off
    return found


# ----------------------------------------------------------------------------------- reducing
def reduced(one, ref, differs):
    """Return the smallest world found in which one call still differs.

    Where it takes the company of other calls, the world is returned as it is.
    """
    whole = one
    one = replace(one, calls=tuple(call for call in one.calls if call.ref == ref))

    def holds(candidate):
        try:
            return _is_sound(candidate) and differs(candidate)
        except Exception:  # noqa: BLE001 - a world that cannot be settled is no witness
            return False

    changed = holds(one)
    if not changed:
        return whole
    while changed:
        changed = False
        for candidate in _smaller(one):
            if holds(candidate):
                one, changed = candidate, True
                break
    return one


def _is_sound(one):
    """Whether every instrument that ended has a price before."""
    begins = {thing.symbol: thing.rows[0].day for thing in one.things if thing.rows}
    return all(
        begins.get(deed.symbol, deed.day) < deed.day
        for deed in one.deeds
        if deed.kind in ENDINGS
    )


def _smaller(one):
    """Yield worlds with something taken out, large pieces first."""
    for call in one.calls:
        for plainer in (replace(call, given="", decision=None), replace(call, currency="")):
            if plainer != call:
                yield replace(one, calls=(plainer,))
    for thing in one.things:
        yield replace(one, things=tuple(other for other in one.things if other is not thing))
    for name in ("deeds", "confirmed"):
        held = getattr(one, name)
        for at in range(len(held)):
            yield replace(one, **{name: held[:at] + held[at + 1 :]})
    for at, thing in enumerate(one.things):
        rows, size = thing.rows, len(thing.rows) // 2
        while size:
            for begin in range(0, len(rows), size):
                kept = replace(thing, rows=rows[:begin] + rows[begin + size :])
                yield replace(one, things=(*one.things[:at], kept, *one.things[at + 1 :]))
            size //= 2


def described(one, off):
    """Return a world in words that a person can check by hand."""
    lines = [f"as of {_iso(one.as_of)}"]
    for thing in one.things:
        lines.append(str(replace(thing, rows=())))
        for row in thing.rows:
            cells = (row.close, row.high, row.low, row.volume, row.total)
            weekday = date.fromordinal(row.day).strftime("%a")
            names = ("close", "high", "low", "volume", "total")
            held = [f"{n} {v:g}" for n, v in zip(names, cells, strict=True) if v is not None]
            lines.append(f"    {_iso(row.day)} {weekday} " + ", ".join(held))
    lines += [f"{_iso(deed.day)} {deed}" for deed in one.deeds]
    lines += [f"confirmed {symbol} {_iso(day)}" for symbol, day in one.confirmed]
    lines += [str(call) for call in one.calls]
    lines.append("slow settler, product: " + json.dumps(off, indent=1))
    return "\n".join(lines)
