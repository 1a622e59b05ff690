"""Simulated markets and forecasters, without skill or with a known edge.

Prices have a common factor, drift, fat tails and clusters of volatility. Forecasters see no
later price unless they are told to. Calls are settled by the kernels of the product.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import count

import numpy as np

from foresaid.chance.base_rate import Starts
from foresaid.claims.registry import KINDS
from foresaid.model.bars import Windows, concatenate_bars
from foresaid.model.codebook import default_codebook

TOLERANCE = default_codebook().settlement.tolerance
YEAR = 252
BATCH = 20  # worlds whose prices are drawn together
FIRST_DAY = 7305  # 1990-01-01, a Monday
HIGHER, LOWER = "ends higher", "ends lower"


@dataclass(frozen=True)
class Market:
    """How prices are drawn. Moves are in logarithms, drift and deviation a year."""

    years_before: int = 10  # of prices before the first call
    years: int = 10  # in which calls are made
    runs_on: bool = True  # whether prices go on until every window has ended
    instruments: int = 4
    drift: float = 0.07
    deviation: float = 0.18
    common: float = 0.6  # of the variance
    freedom: float = 5.0  # of the t distribution of shocks
    shock: float = 0.08  # weight of the last squared move in the variance
    memory: float = 0.90  # weight of the last variance
    has_regimes: bool = False  # whether rising and falling years take turns


@dataclass(frozen=True)
class Forecasters:
    """How calls are made."""

    size: int = 20
    calls_a_year: int = 10
    spans: tuple[int, ...] = (182,)  # days
    keeps: float = 0.9  # chance that the next view is the last one
    herding: float = 0.5  # chance that a call states the common view on a common day
    share_up: float = 0.5
    claims: str = "direction"  # or "mixed", or "volatility"
    sees: float = 0.0  # share of calls that know the direction of the coming move
    knowing: int | None = None  # how many of the forecasters do; all where it is None
    follows: int = 0  # 1 follows the last half year's move, -1 goes against it


@dataclass(frozen=True)
class Calls:
    """Calls with what came of them; arrays (n,), grouped in no order."""

    kind: np.ndarray
    starts: Starts
    came_true: np.ndarray
    turned: np.ndarray
    direction: np.ndarray  # of the claim as written
    moved: np.ndarray  # sign of the move from reference to deadline
    begin: np.ndarray  # day of the reference session
    end: np.ndarray  # day of the deadline session
    record: np.ndarray

    @property
    def right(self):
        return self.came_true ^ self.turned

    def take(self, rows):
        columns = {
            name: (column.take(rows) if name == "starts" else column[rows])
            for name, column in vars(self).items()
        }
        return Calls(**columns)

    def groups(self):
        return [(KINDS[str(k)], np.flatnonzero(self.kind == k)) for k in np.unique(self.kind)]


# ------------------------------------------------------------------------------------ prices


def session_days(n):
    """Return n days: weekdays less nine closures a year or so, always the same ones."""
    days = FIRST_DAY + np.arange(int(n * 1.6) + 20)
    weekdays = days[(days - FIRST_DAY) % 7 < 5]
    is_open = np.random.default_rng(252).random(len(weekdays)) >= 9 / 261
    return weekdays[is_open][:n]


def shocks(rng, market, shape):
    """Return moves of variance 1 with fat tails and clusters, time last."""
    burn = YEAR
    drawn = rng.standard_t(market.freedom, (*shape[:-1], shape[-1] + burn))
    drawn *= np.sqrt((market.freedom - 2) / market.freedom)
    variance, floor = np.ones(shape[:-1]), 1.0 - market.shock - market.memory
    for at in range(drawn.shape[-1]):
        drawn[..., at] *= np.sqrt(variance)
        variance = floor + market.memory * variance + market.shock * drawn[..., at] ** 2
    return drawn[..., burn:]


def regime_drift(rng, shape):
    """Return yearly drift by session: rising for three years, falling for one, on average."""
    worlds, sessions = shape
    is_rising = rng.random(worlds) < 0.75
    turns = rng.random((sessions, worlds))
    result = np.empty(shape)
    for at in range(sessions):
        is_rising ^= turns[at] < np.where(is_rising, 1 / (3 * YEAR), 1 / YEAR)
        result[:, at] = np.where(is_rising, 0.15, -0.20)
    return result


def many_bars(seed, market, longest):
    """Yield worlds without end: the prices of the instruments, the same for the same seed."""
    after = longest * YEAR // 365 + 15 if market.runs_on else 0
    n = (market.years_before + market.years) * YEAR + after
    day = session_days(n)
    closed = np.random.default_rng(253).random(n) < 10 / YEAR  # of the last instrument
    for batch in count():
        rng = np.random.default_rng([seed, 0, batch])
        moves = shocks(rng, market, (BATCH, market.instruments + 1, n))
        own, shared = np.sqrt(1 - market.common), np.sqrt(market.common)
        moves = shared * moves[:, :1] + own * moves[:, 1:]
        moves *= market.deviation / np.sqrt(YEAR)
        drift = regime_drift(rng, (BATCH, n)) if market.has_regimes else market.drift
        moves += np.asarray(drift / YEAR).reshape(-1, 1, n if market.has_regimes else 1)
        beyond = np.abs(rng.normal(0, 0.005, (2, BATCH, market.instruments, n)))
        for world in range(BATCH):
            yield bars_of(day, moves[world], beyond[:, world], closed)


def bars_of(day, moves, beyond, closed):
    """Return bars of these moves; highs and lows lie beyond the closes on either side."""
    log = np.cumsum(moves, axis=1) + np.log(100.0)
    before = np.column_stack([log[:, :1], log[:, :-1]])
    high = np.exp(np.maximum(log, before) + beyond[0])
    low = np.exp(np.minimum(log, before) - beyond[1])
    close, histories = np.exp(log), []
    for number in range(len(close)):
        kept = slice(None) if number < len(close) - 1 else ~closed
        histories.append(
            {
                "day": day[kept],
                "close": close[number][kept],
                "high": high[number][kept],
                "low": low[number][kept],
                "has_range": np.ones(len(day[kept]), dtype=bool),
                "factor": np.ones(len(day[kept])),
                "total": close[number][kept],
                "total_known": False,
            }
        )
    return concatenate_bars([f"I{number}" for number in range(len(close))], histories)


# ------------------------------------------------------------------------------------- calls


def sticky(rng, n, *, redraw, share_up):
    """Return views, 1 and -1: each is the last one unless it is drawn anew."""
    fresh = rng.random(n) < redraw
    drawn = np.where(rng.random(n) < share_up, 1, -1)
    last = np.maximum.accumulate(np.where(fresh, np.arange(n), 0))
    return drawn[last]


def calls_in(rng, bars, market, style):
    """Return the matured calls of all forecasters."""
    day = bars.day[: bars.offsets[1]]
    span_begin = market.years_before * YEAR
    days = day[span_begin : span_begin + market.years * YEAR]
    redraw = (1 - style.keeps) / (1 - style.share_up**2 - (1 - style.share_up) ** 2)
    common = sticky(
        rng, len(days), redraw=redraw * style.calls_a_year / YEAR, share_up=style.share_up
    )
    events = rng.choice(len(days), len(days) // 12, replace=False)
    n = style.calls_a_year * market.years
    at, view, record = [], [], []
    for number in range(style.size):
        joins = (rng.random(n) < style.herding) & (style.size > 1)
        when = np.sort(np.where(joins, rng.choice(events, n), rng.integers(0, len(days), n)))
        own = sticky(rng, n, redraw=redraw, share_up=style.share_up)
        joins = (rng.random(n) < style.herding) & (style.size > 1)
        at.append(when)
        view.append(np.where(joins, common[when], own))
        record.append(np.full(n, number))
    return settled(rng, bars, days[np.concatenate(at)], np.concatenate(view),
                   np.concatenate(record), style)  # fmt: skip


def settled(rng, bars, made, view, record, style):
    """Return calls made on these days, on instruments and with windows drawn at random."""
    n = len(made)
    instrument = rng.integers(0, len(bars.symbols), n)
    span = rng.choice(np.array(style.spans), n)
    reference = bars.at_or_before(instrument, made - 1) + 1
    known = reference < bars.offsets[instrument + 1]
    reference = np.minimum(reference, bars.offsets[instrument + 1] - 1)
    due = bars.day[reference] + span
    last = bars.at_or_before(instrument, due)
    moved = np.sign(bars.close[last] / bars.close[reference] - 1.0).astype(np.int64)
    floor = bars.offsets[instrument]
    if style.follows:
        past = bars.close[reference - 1] / bars.close[np.maximum(reference - 127, floor)]
        view = np.where(past >= 1, style.follows, -style.follows)
    knows = rng.random(n) < style.sees
    knows &= record < (style.size if style.knowing is None else style.knowing)
    view = np.where(knows & (moved != 0), moved, view)
    kind, marks, direction, turned = worded(rng, bars, reference, view, style)
    known &= due <= bars.last_day[instrument]
    starts = Starts(instrument, reference, span, np.zeros(n, dtype=bool),
                    np.ones(n, dtype=np.int64), np.zeros(n, dtype=bool), marks)  # fmt: skip
    windows = Windows(floor, reference, reference + 1, last, starts.additive)
    came_true = np.zeros(n, dtype=bool)
    for name in np.unique(kind):
        rows = np.flatnonzero((kind == name) & known)
        one = KINDS[str(name)]
        came_true[rows] = one.kernel.hits(
            bars, windows.take(rows), marks[rows, : len(one.marks)], TOLERANCE
        )
    found = Calls(
        kind=kind,
        starts=starts,
        came_true=came_true,
        turned=turned,
        direction=direction,
        moved=moved,
        begin=bars.day[reference],
        end=bars.day[last],
        record=record,
    )
    return found.take(np.flatnonzero(known))


def worded(rng, bars, reference, view, style):
    """Return kinds, marks, directions, and which calls are right when their claim fails."""
    n = len(view)
    marks = np.full((n, 2), np.nan)
    if style.claims == "direction":
        marks[:, 0] = 1.0
        kind = np.where(view > 0, HIGHER, LOWER).astype(object)
        return kind, marks, view, np.zeros(n, dtype=bool)
    if style.claims == "volatility":
        return by_volatility(bars, reference, view, marks)
    size = rng.choice(np.array([0.02, 0.05, 0.08]), n)
    up = view > 0
    wordings = [
        (np.where(up, HIGHER, LOWER), np.ones(n), view),
        (np.where(up, "ends above", "ends below"), 1 + view * size, view),
        (np.where(up, "ends above", "ends below"), 1 - view * size, view),
        (np.full(n, "touches"), 1 + view * size, view),
        (np.where(up, "rises", "falls"), 1 + view * 0.10, view),
        (np.where(up, "stays above", "stays below"), 1 - view * size, view),
        (np.full(n, "ends between and"), 1 - size, np.zeros(n, dtype=np.int64)),
    ]
    which = rng.integers(0, len(wordings), n)
    kind = np.choose(which, [w[0].astype(object) for w in wordings])
    marks[:, 0] = np.choose(which, [w[1] for w in wordings])
    marks[:, 1] = np.where(kind == "ends between and", 2 - marks[:, 0], np.nan)
    direction = np.choose(which, [w[2] for w in wordings])
    turned = rng.random(n) < 0.1
    return kind, marks, direction, turned


def by_volatility(bars, reference, view, marks):
    """Return claims of large moves after volatile months, of small ones after calm months."""
    moves = np.diff(np.log(bars.close), prepend=np.log(bars.close[0]))
    past = np.array([moves[max(r - 21, 1) : r].std() for r in reference])
    is_calm = past < 0.18 / np.sqrt(YEAR) * 0.9
    marks[:, 0] = np.where(is_calm, 0.95, 1 + view * 0.05)
    marks[:, 1] = np.where(is_calm, 1.05, np.nan)
    kind = np.where(is_calm, "stays between and", "touches").astype(object)
    return kind, marks, np.where(is_calm, 0, view), np.zeros(len(view), dtype=bool)
