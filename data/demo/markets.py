"""Invented markets: what is traded there, and simulated histories for it."""

from dataclasses import dataclass
from datetime import date, timedelta

import numpy as np

SEED = 1250
FIRST_DAY, LAST_DAY = date(2014, 1, 2), date(2025, 12, 31)
Rng = np.random.Generator
Row = dict[str, object]

# market -> (zone, opens, closes, holidays as month-day)
MARKETS = {
    "maravel": ("Europe/Vienna", "09:00", "17:15", "01-01 03-19 06-21 10-02 12-25 12-26"),
    "tessaline": ("Asia/Kathmandu", "10:30", "15:30", "01-01 02-11 05-06 08-17 11-08"),
    "ellaby": ("America/Halifax", "09:15", "14:45", "01-01 04-04 07-09 12-25"),
    "dealers": ("Europe/Vienna", "", "", "01-01 12-25"),
}

# symbol | name | currency | market | kind | sense | benchmark | base | term | start | own
# volatility | share of the common factor | decimals | volume | spoken name | the thing itself
INSTRUMENTS = """
MARB | Maravel Broad Index | VQN | maravel | index | direct | | | | 1840 | .05 | 1 | 2 | 90000
    | the Maravel Broad Index | the Maravel market
TESX | Tessaline Composite | QRT | tessaline | index | direct | | | | 612 | .15 | .55
    | 2 | 40000 | the Tessaline Composite | the Tessaline market
ODRL | Ondrel Ferries | VQN | maravel | share | direct | MARB | | | 28 | .21 | .9 | 2 | 2400
    | Ondrel Ferries | the Ondrel share
PVRN | Pavrin Foods | QRT | tessaline | share | direct | TESX | | | 145 | .2 | .4 | 2 | 800
    | Pavrin Foods | the Pavrin share
LNTF | Lantern Harvest Fund | VQN | maravel | fund | direct | MARB | | | 50 | .04 | .5 | 2 |
    | the Lantern Harvest Fund | the Lantern fund
VQNQRT | Velin in orrits | QRT | dealers | pair | direct | | VQN | QRT | 1.62 | .075 | .05 | 4 |
    | the velin against the orrit | the velin
MY10 | Maravel ten-year yield | VQN | dealers | yield | inverse | | | | 3.1 | .8 | 0 | 3 |
    | the Maravel ten-year yield | Maravel ten-year paper
BRLY | Ellaby barley | VQN | ellaby | commodity | direct | | | | 212 | .22 | .1 | 2 | 300
    | Ellaby barley | barley
MVOL | Maravel Swing Gauge | VQN | maravel | volatility | direct | MARB | | | 15 | .6 | 0 | 2 |
    | the Maravel Swing Gauge | the swing gauge
"""
SPLIT = ("ODRL", date(2020, 5, 18), 3)
# symbol -> (months, day of the month, part of the price paid each time)
DIVIDENDS = {
    "ODRL": ((3, 6, 9, 12), 12, 0.006),
    "PVRN": ((5,), 20, 0.021),
    "LNTF": ((1, 7), 15, 0.012),
}


@dataclass(frozen=True)
class Series:
    """One instrument and its simulated history, in the units of each day."""

    facts: dict[str, str]
    sessions: np.ndarray
    bars: np.ndarray  # open, high, low, close
    volume: np.ndarray
    units: np.ndarray  # raw price / units is comparable through time

    @property
    def symbol(self) -> str:
        """The instrument's short name."""
        return self.facts["symbol"]

    @property
    def kind(self) -> str:
        """The instrument's kind."""
        return self.facts["kind"]

    @property
    def zone(self) -> str:
        """The venue's time zone."""
        return MARKETS[self.facts["market"]][0]

    @property
    def closes(self) -> str:
        """The venue's closing time, empty where there is none."""
        return MARKETS[self.facts["market"]][2]

    @property
    def even(self) -> np.ndarray:
        """Closes in comparable units."""
        return self.bars[:, 3] / self.units

    def before(self, day: date) -> int:
        """Position of the last session before a day."""
        return int(np.searchsorted(self.sessions, np.datetime64(day))) - 1

    def sigma(self, day: date, days: int) -> float:
        """Typical size of a move over some days: a ratio, for a yield a difference."""
        path = self.even[max(0, self.before(day) - 252) : self.before(day)]
        moves = np.diff(path if self.kind == "yield" else np.log(path))
        return float(moves.std(ddof=1) * np.sqrt(252 * days / 365))


def table(text: str, names: str) -> list[dict[str, str]]:
    """Read a table of bars and line breaks; an indented line continues the one above."""
    rows = text.strip().replace("\n    |", " |").splitlines()
    return [
        dict(zip(names.split(), (cell.strip() for cell in row.split("|")), strict=True))
        for row in rows
    ]


def shocks(rng: Rng, n: int, volatility: float) -> tuple[np.ndarray, np.ndarray]:
    """Daily shocks with clustered volatility and fat tails, and their scale."""
    base = volatility**2 / 252
    draws = rng.standard_t(6, n) * np.sqrt(4 / 6)
    scale, out = np.empty(n), np.empty(n)
    now = base
    for i in range(n):
        scale[i] = np.sqrt(now)
        out[i] = np.clip(scale[i] * draws[i], -0.12, 0.12)
        now = 0.03 * base + 0.08 * out[i] ** 2 + 0.89 * now
    return out, scale


def regime(rng: Rng, n: int, up: int, down: int) -> np.ndarray:
    """Draw a two-state chain, True while rising; mean lengths in sessions."""
    state, out = True, np.empty(n, dtype=bool)
    for i, draw in enumerate(rng.random(n)):
        state = state != (draw < 1 / (up if state else down))
        out[i] = state
    return out


def simulated_closes(rng: Rng, facts: dict[str, str], common: tuple) -> tuple:
    """Simulate closes on every weekday and the daily scale of their relative moves."""
    factor, factor_scale = common
    n, start = len(factor), float(facts["start"])
    own, scale = shocks(rng, n, float(facts["own"]))
    if facts["kind"] == "volatility":
        mood = np.zeros(n)
        for i in range(1, n):
            mood[i] = 0.93 * mood[i - 1] + own[i]
        return 100 * np.sqrt(252) * factor_scale * np.exp(mood) + 1, scale
    if facts["kind"] == "yield":
        pull = np.where(regime(rng, n, 300, 260), 4.4, 2.0)
        path = np.full(n, start)
        for i in range(1, n):
            path[i] = path[i - 1] + 0.004 * (pull[i] - path[i - 1]) + own[i]
        return np.maximum(path, 0.4), scale / 3
    drift = {"pair": 0.05, "commodity": 0.12}.get(facts["kind"], 0.03)
    trend = np.where(regime(rng, n, 260, 240), drift, -drift) / 252
    share = float(facts["common"])
    total = np.hypot(scale, share * factor_scale)
    return start * np.exp(np.cumsum(share * factor + own + trend - total**2 / 2)), total


def pay_dividends(facts: dict[str, str], days: list[date], raw: np.ndarray) -> list[Row]:
    """Take each payment out of the later prices and list it."""
    months, due, part = DIVIDENDS.get(facts["symbol"], ((), 1, 0.0))
    paid = []
    for year in range(FIRST_DAY.year, LAST_DAY.year + 1):
        for month in months:
            i = next((k for k, day in enumerate(days) if day >= date(year, month, due)), 0)
            if i > 0:
                amount = round(part * raw[i - 1], 2)
                raw[i:] *= 1 - amount / raw[i - 1]
                paid.append(action(facts, days[i], "dividend", amount=amount))
    return paid


def action(facts: dict[str, str], day: date, kind: str, **terms: object) -> Row:
    """One row of the corporate actions."""
    row = {"instrument": facts["symbol"], "effective": day, "action": kind}
    return row | {"currency": facts["currency"] if "amount" in terms else ""} | terms


def candles(rng: Rng, closes: np.ndarray, scale: np.ndarray, decimals: int) -> np.ndarray:
    """Draw opens, highs and lows around the closes."""
    gap, above, below = rng.standard_normal((3, len(closes))) * scale
    opens = np.concatenate([closes[:1], closes[:-1]]) * np.exp(0.35 * gap)
    high = np.maximum(opens, closes) * np.exp(0.4 * np.abs(above))
    low = np.minimum(opens, closes) * np.exp(-0.4 * np.abs(below))
    return np.column_stack([opens, high, low, closes]).round(decimals)


def simulate(facts: dict[str, str], common: tuple, rng: Rng) -> tuple[Series, list[Row]]:
    """Make the history of one instrument with its corporate actions."""
    weekdays = all_weekdays()
    shut = MARKETS[facts["market"]][3].split()
    kept = np.array([f"{day:%m-%d}" not in shut for day in weekdays])
    days = [day for day, keep in zip(weekdays, kept, strict=True) if keep]
    closes, scale = (part[kept] for part in simulated_closes(rng, facts, common))
    symbol, split_day, ratio = SPLIT
    early = np.array([facts["symbol"] == symbol and day < split_day for day in days])
    units = np.where(early, float(ratio), 1.0)
    raw = closes * units
    actions = pay_dividends(facts, days, raw)
    if early.any():
        actions.append(action(facts, split_day, "split", ratio=ratio))
    bars = candles(rng, raw / units, scale, 9) * units[:, None]
    busy = float(facts["volume"] or 0) * np.exp(0.25 * rng.standard_normal(len(days)))
    series = Series(
        facts,
        np.array(days, dtype="datetime64[D]"),
        bars.round(int(facts["decimals"])),
        np.rint(busy * np.sqrt(scale / scale.mean()) / units).astype(int),
        units,
    )
    return series, actions


def all_weekdays() -> list[date]:
    """Mondays to Fridays of the whole span."""
    span = (LAST_DAY - FIRST_DAY).days + 1
    return [d for d in (FIRST_DAY + timedelta(k) for k in range(span)) if d.weekday() < 5]


def simulate_all() -> tuple[dict[str, Series], list[Row]]:
    """Every history, moved in part by one common factor."""
    names = (
        "symbol name currency market kind sense benchmark base term start own common decimals "
        "volume spoken thing"
    )
    rng = np.random.default_rng([SEED, 0])
    n = len(all_weekdays())
    moves, scale = shocks(rng, n, 0.14)
    rising = regime(rng, n, 460, 130)
    nerves = np.where(rising, 1.0, 1.3)
    common = (moves * nerves + np.where(rising, 0.19, -0.30) / 252, scale * nerves)
    made = [
        simulate(facts, common, np.random.default_rng([SEED, 1, k]))
        for k, facts in enumerate(table(INSTRUMENTS, names))
    ]
    actions = sorted(
        (row for _, rows in made for row in rows), key=lambda r: str(r["effective"])
    )
    return {series.facts["symbol"]: series for series, _ in made}, actions
