"""What a statement says: its moment, its horizon, its claim, and whether that comes true."""

import calendar
from dataclasses import dataclass, field
from datetime import date, datetime, time, timedelta
from zoneinfo import ZoneInfo

import numpy as np
from markets import LAST_DAY, Rng, Series
from phrases import DODGES, pick

# Days until the deadline of a word, only to choose sizes and levels that suit it.
IMPUTED = {"soon": 30, "near term": 91, "medium term": 365, "long term": 1095, "": 365}


@dataclass(frozen=True)
class Stamp:
    """When something was said: the day where it was said, and the text that states it."""

    day: date
    text: str
    moment: datetime | None

    def venue_day(self, series: Series) -> date:
        """Day of publication at the instrument's venue."""
        if self.moment is None:
            return self.day
        return self.moment.astimezone(ZoneInfo(series.zone)).date()

    def reference(self, series: Series) -> int:
        """Position of the first session whose close is at or after publication."""
        first = series.before(self.venue_day(series)) + 1
        if self.moment is None or not series.closes:
            return first
        local = self.moment.astimezone(ZoneInfo(series.zone))
        today = first < len(series.sessions) and series.sessions[first] == np.datetime64(
            local.date()
        )
        return first + int(today and local.time() > time.fromisoformat(series.closes))


@dataclass(frozen=True)
class Claim:
    """A claim phrase with what is needed to word it and, for end claims, to judge it."""

    head: str
    text: str
    up: bool = True
    level: float | None = None
    size: float = 0.0
    words: dict[str, str] = field(default_factory=dict)


# ------------------------------------------------------------------------------- when and what
def stamped(rng: Rng, day: date, zone: str) -> Stamp:
    """Write the moment in one of three ways: a date, with an offset, with a zone's name."""
    style = rng.random()
    if style < 0.5:
        return Stamp(day, day.isoformat(), None)
    clock = time(int(rng.integers(7, 21)), 5 * int(rng.integers(12)))
    moment = datetime.combine(day, clock, ZoneInfo(zone))
    if style < 0.8:
        return Stamp(day, moment.isoformat(timespec="minutes"), moment)
    return Stamp(day, f"{moment:%Y-%m-%d %H:%M} {zone}", moment)


def months_on(day: date, months: int) -> date:
    """Count months on: the same day, or the last one of a shorter month."""
    year, month = divmod(day.year * 12 + day.month - 1 + months, 12)
    return date(year, month + 1, min(day.day, calendar.monthrange(year, month + 1)[1]))


def month_end(day: date) -> date:
    """Find the last day of a month."""
    return day.replace(day=calendar.monthrange(day.year, day.month)[1])


def dated_horizon(rng: Rng, kind: str, day: date) -> tuple[str, date]:
    """Code a horizon that names a date, with that date."""
    if kind == "date":
        due = day + timedelta(int(rng.integers(20, 200)))
        return due.isoformat(), due
    if kind == "month end":
        due = month_end(months_on(day, int(rng.integers(1, 6))))
        return f"end of {due:%B %Y}", due
    if kind == "year end":
        year = day.year + int(day.month > 10)
        return f"end of {year}", date(year, 12, 31)
    if kind == "end of quarter":
        due = month_end(months_on(day, (3 - day.month) % 3))
        return (kind, due) if (due - day).days > 12 else ("3 months", months_on(day, 3))
    friday = day + timedelta(4 - day.weekday())
    return (kind, friday) if day.weekday() < 3 else ("2 weeks", day + timedelta(14))


def horizon(rng: Rng, kind: str, day: date) -> tuple[str, date]:
    """Code a horizon, with its day counted from the day given."""
    if kind in IMPUTED:
        return kind, day + timedelta(IMPUTED[kind])
    count, _, unit = kind.partition(" ")
    if not count.isdigit():
        return dated_horizon(rng, kind, day)
    if unit.startswith("month"):
        return kind, months_on(day, int(count))
    # Ten sessions are two weeks where no holiday falls between.
    return kind, day + timedelta(14)


def number(value: float) -> str:
    """Print a number without trailing zeros."""
    return f"{value:.4f}".rstrip("0").rstrip(".")


def nice(value: float, price: float, away: int) -> float:
    """Round a level to a spoken number, away from the price if asked."""
    decade = 10.0 ** np.floor(np.log10(0.005 * price))
    step = max(s * decade for s in (1, 2, 5) if s * decade <= 0.005 * price)
    return round(
        float((np.ceil, np.round, np.floor)[1 - away](round(value / step, 6)) * step), 4
    )


@dataclass(frozen=True)
class Scene:
    """What a speaker has before them: the price, and how far it tends to move by then."""

    series: Series
    day: date
    days: int

    @property
    def price(self) -> float:
        """The last close before the day."""
        return float(self.series.bars[self.series.before(self.day), 3])

    @property
    def spread(self) -> float:
        """A typical move until the deadline, in the units of the price."""
        sigma = self.series.sigma(self.day, min(self.days, 730))
        return sigma if self.series.kind == "yield" else sigma * self.price

    def level(self, low: float, high: float, up: bool, rng: Rng) -> float:
        """Draw a level some typical moves above the price, or below it."""
        sign = 1 if up else -1
        aim = self.price + sign * rng.uniform(low, high) * self.spread
        return max(nice(aim, self.price, sign), nice(0.3 * self.price, self.price, 1))

    def size(self, rng: Rng) -> tuple[str, str, float]:
        """Draw a size of move: as coded, as spoken, and as a number."""
        move = float(rng.uniform(0.25, 0.9)) * self.spread
        if self.series.kind == "yield":
            points = max(5, 5 * round(20 * move))
            if points % 25 == 0 and points >= 50:
                return (
                    f"{points / 100:g}pp",
                    f"{points / 100:g} percentage points",
                    points / 100,
                )
            return f"{points}bp", f"{points} basis points", points / 100
        share = 100 * move / self.price
        share = float(round(share)) if share >= 4 else max(0.5, round(2 * share) / 2)
        return f"{share:g}%", f"{share:g} per cent", share / 100


def level_claim(scene: Scene, rng: Rng, family: str, up: bool) -> Claim:
    """Make a claim about one level."""
    side = "above" if up else "below"
    if family == "stay":
        return one_level(f"stays {side}", scene.level(0.5, 1.6, not up, rng), up)
    if family == "path":
        head = pick(rng, (f"closes {side}", f"trades {side}", "touches"))
        return one_level(head, scene.level(0.3, 1.2, up, rng), up)
    heads = (f"ends {side}", f"ends {side}", "ends at least" if up else "ends at most")
    head = heads[0] if family == "above" else pick(rng, heads)
    return one_level(head, scene.level(-0.3, 0.5, up, rng), up)


def one_level(head: str, level: float, up: bool) -> Claim:
    """Put a head and a level together."""
    text = number(level)
    return Claim(head, f"{head} {text}", up, level, words={"level": text})


def range_claim(scene: Scene, rng: Rng, family: str) -> Claim:
    """Make a claim about a corridor or a small move."""
    if family == "range" and rng.random() < 0.4:
        coded, spoken, size = scene.size(rng)
        return Claim("ends within", f"ends within {coded}", size=size, words={"size": spoken})
    head = "stays between" if family == "stay" else "ends between"
    near, far = (0.9, 1.8) if family == "stay" else (0.5, 1.3)
    low, high = (number(scene.level(near, far, up, rng)) for up in (False, True))
    return Claim(head, f"{head} {low} and {high}", words={"low": low, "high": high})


def build_claim(scene: Scene, rng: Rng, family: str, up: bool) -> Claim:
    """Make a claim of a family that suits the view."""
    if family == "nothing":
        return Claim("", f"not a call: {pick(rng, tuple(DODGES))}")
    if family == "range" or (family == "stay" and rng.random() < 0.4):
        return range_claim(scene, rng, family)
    if family in ("level", "above", "path", "stay"):
        return level_claim(scene, rng, family, up)
    verbs = {
        "sense": ("strengthens", "weakens"),
        "sense sized": ("strengthens", "weakens"),
        "move": ("rises", "falls"),
    }.get(family, ("ends higher", "ends lower"))
    head = verbs[0] if up else verbs[1]
    if family in ("direction", "sense"):
        return Claim(head, head, up)
    coded, spoken, size = scene.size(rng)
    head = head if family == "move" else f"{head} by"
    return Claim(head, f"{head} {coded}", up, size=size, words={"size": spoken})


# ------------------------------------------------------------------------------------ judging
def judged(claim: Claim, stamp: Stamp, series: Series, text: str, due: date) -> bool | None:
    """Whether an end claim comes true in the simulated future; None while that is open."""
    start = stamp.reference(series)
    end = start + 10 if text == "10 sessions" else series.before(due + timedelta(1))
    if due > LAST_DAY or end >= len(series.even):
        return None
    base = series.even[start]
    if claim.level is not None:
        base = claim.level / series.units[series.before(stamp.day)]
    move = float(series.even[end] / base - 1) * (1 if claim.up else -1)
    return move > 0 if claim.size == 0 else move >= claim.size


def earlier_share(claim: Claim, scene: Scene) -> float:
    """How often the same claim came true before, for a price scaled to its day."""
    past = scene.series.even[: scene.series.before(scene.day) + 1]
    span = max(1, round(scene.days * 252 / 365))
    moves = past[span:] / past[:-span] - 1
    bar = claim.size if claim.level is None else abs(claim.level / scene.price - 1)
    bar = bar if claim.level is None or (claim.level > scene.price) == claim.up else -bar
    share = np.mean(moves > bar if claim.up else moves < -bar)
    return float(np.clip(share, 0.12, 0.88))
