"""Settlement on real index histories against plain pandas and published counts.

Source of the prices: ``arch.data.sp500`` and ``arch.data.nasdaq`` (daily open, high, low and
close, 1999 to 2018), shipped with the arch package on the package registry. Expected outcomes
are recomputed here with pandas alone.
"""

import numpy as np
import pandas as pd
import pytest

from foresaid.claims.binding import UNIT_CODES
from foresaid.claims.phrases import parse_claim
from foresaid.market.histories import build_market
from foresaid.model.codebook import default_codebook
from foresaid.model.price_history import PriceHistory
from foresaid.model.records import Instrument
from foresaid.settle.outcomes import CallClaims, settle_calls
from foresaid.settle.windows import CallTimes

BOOK = default_codebook()
HORIZONS = (1, 5, 21, 252)


def _load(name):
    from arch.data import nasdaq, sp500

    return {"sp500": sp500, "nasdaq": nasdaq}[name].load()


@pytest.fixture(scope="module", params=["sp500", "nasdaq"])
def frame(request):
    return _load(request.param)


def _market(frame):
    day = frame.index.to_numpy().astype("datetime64[D]").astype(np.int64)
    history = PriceHistory(
        day,
        frame["High"].to_numpy(dtype=float),
        frame["Low"].to_numpy(dtype=float),
        frame["Close"].to_numpy(dtype=float),
    )
    as_of = frame.index[-1].date()
    return build_market([Instrument("IDX")], {"IDX": history}, [], {}, BOOK, as_of=as_of), day


def _settle_everywhere(frame, phrase, sessions):
    """Settle the phrase at every session; a date with no time counts as before its close."""
    market, day = _market(frame)
    claim = parse_claim(phrase)
    n = len(day)
    values, units = np.zeros((n, 2)), np.zeros((n, 2), dtype=np.int64)
    for column, quantity in enumerate(claim.quantities):
        values[:, column], units[:, column] = quantity.value, UNIT_CODES[quantity.unit]
    times = CallTimes(
        instrument=np.zeros(n, dtype=np.int64),
        said_day=day,
        said_minute=np.full(n, -1.0),
        deadline_day=np.zeros(n, dtype=np.int64),
        sessions=np.full(n, sessions),
    )
    claims = CallClaims(
        np.full(n, claim.kind, dtype=object), values, units, np.full(n, "", dtype=object)
    )
    return settle_calls(times, claims, market, np.zeros(n, dtype=bool), BOOK.settlement)


def _future(series, h, how):
    """The best of the next h sessions after each one, in plain pandas."""
    rolled = getattr(series[::-1].rolling(h), how)()[::-1]
    return rolled.shift(-1)


@pytest.mark.parametrize("h", HORIZONS)
def test_ends_higher_and_lower_at_every_start(frame, h):
    close = frame["Close"]
    move = (close.shift(-h) - close).dropna()
    for phrase, expected in (("ends higher", move > 0), ("ends lower", move < 0)):
        found = _settle_everywhere(frame, phrase, h)
        matured = found.resolved.matured
        assert matured.sum() == len(move)
        assert ((found.result[matured] == "hit") == expected.to_numpy()).all()
        assert set(found.result[~matured]) == {"open"}
        assert (found.tie[matured] == (move == 0).to_numpy()).all()


@pytest.mark.parametrize(
    ("h", "windows", "up"),
    # Counts of rising windows of the S&P 500 in arch.data.sp500, recomputed by
    # d = (c.shift(-h) - c).dropna(); (d > 0).sum(): a regression guard, no publication.
    [(1, 5030, 2672), (5, 5026, 2801), (21, 5010, 3070), (252, 4779, 3483), (756, 4275, 2865)],
)
def test_counts_of_rising_windows(h, windows, up):
    found = _settle_everywhere(_load("sp500"), "ends higher", h)
    assert found.resolved.matured.sum() == windows
    assert (found.result == "hit").sum() == up


@pytest.mark.parametrize("h", HORIZONS)
@pytest.mark.parametrize("size", [1, 10])
def test_sizes_at_the_end_and_on_the_way(frame, h, size):
    close = frame["Close"]
    end = close.shift(-h) / close - 1
    best = _future(close, h, "max") / close - 1
    worst = _future(close, h, "min") / close - 1
    x = size / 100
    cases = {
        f"ends higher by {size}%": end >= x,
        f"ends lower by {size}%": end <= -x,
        f"ends within {size}%": end.abs() <= x,
        f"rises {size}%": best >= x,
        f"falls {size}%": worst <= -x,
    }
    known = end.notna().to_numpy()
    for phrase, expected in cases.items():
        found = _settle_everywhere(frame, phrase, h)
        assert (found.resolved.matured == known).all()
        hit = found.result == "hit"
        assert (hit[known] == expected.to_numpy()[known]).all(), phrase


@pytest.mark.parametrize("h", HORIZONS)
@pytest.mark.parametrize("share", [0.9, 1.1])
def test_levels_touched_at_every_start(frame, h, share):
    """A level a tenth away from each start's close, one call at a time by its own level."""
    close = frame["Close"]
    if share > 1:
        expected = _future(frame["High"], h, "max") >= close * share
    else:
        expected = _future(frame["Low"], h, "min") <= close * share
    market, day = _market(frame)
    n = len(day)
    values = np.zeros((n, 2))
    values[:, 0] = close.to_numpy() * share
    times = CallTimes(
        np.zeros(n, dtype=np.int64),
        day,
        np.full(n, -1.0),
        np.zeros(n, dtype=np.int64),
        np.full(n, h),
    )
    for kind, direct in (
        ("touches", True),
        ("trades above" if share > 1 else "trades below", False),
    ):
        claims = CallClaims(
            np.full(n, kind, dtype=object),
            values,
            np.zeros((n, 2), dtype=np.int64),
            np.full(n, "", dtype=object),
        )
        found = settle_calls(times, claims, market, np.zeros(n, dtype=bool), BOOK.settlement)
        known = found.resolved.matured
        assert known.sum() == n - h
        hit = found.result == "hit"
        assert (hit[known] == expected.to_numpy()[known]).all()
        if direct:
            _check_first_session(found, frame, h, share, known & hit)


def _check_first_session(found, frame, h, share, hits):
    """The deciding session is the first that reached the level, by a plain loop."""
    high, low, close = (frame[name].to_numpy() for name in ("High", "Low", "Close"))
    rng = np.random.default_rng(7)
    for t in rng.choice(np.flatnonzero(hits), size=min(200, int(hits.sum())), replace=False):
        level = close[t] * share
        for s in range(t + 1, t + h + 1):
            if (high[s] >= level) if share > 1 else (low[s] <= level):
                break
        assert found.decided[t] == s


def test_months_up_by_calendar_deadline():
    """145 of 239 months up: the last close of each month against the one before.

    Recomputed by ``c.resample('ME').last().diff().dropna() > 0``; no publication.
    """
    frame = _load("sp500")
    close = frame["Close"].resample("ME").last()
    market, _ = _market(frame)
    starts = close.index[:-1].to_numpy().astype("datetime64[D]").astype(np.int64)
    ends = close.index[1:].to_numpy().astype("datetime64[D]").astype(np.int64)
    sessions = frame.index.to_numpy().astype("datetime64[D]").astype(np.int64)
    said = sessions[np.searchsorted(sessions, starts, side="right") - 1]
    n = len(said)
    times = CallTimes(
        np.zeros(n, dtype=np.int64), said, np.full(n, -1.0), ends, np.zeros(n, dtype=np.int64)
    )
    claims = CallClaims(
        np.full(n, "ends higher", dtype=object),
        np.zeros((n, 2)),
        np.zeros((n, 2), dtype=np.int64),
        np.full(n, "", dtype=object),
    )
    found = settle_calls(times, claims, market, np.zeros(n, dtype=bool), BOOK.settlement)
    assert n == 239
    assert (found.result == "hit").sum() == 145


def test_closures_roll_deadlines_back():
    """No session on 2001-09-11 to 14, so a deadline there rolls back to Monday the 10th.

    Source: the exchange was shut from 11 to 14 September 2001 (common knowledge, no document).
    """
    frame = _load("sp500")
    market, _ = _market(frame)
    said = np.array([np.datetime64("2001-09-04").astype(np.int64)])
    due = np.array([np.datetime64("2001-09-14").astype(np.int64)])
    times = CallTimes(np.zeros(1, np.int64), said, np.array([-1.0]), due, np.zeros(1, np.int64))
    claims = CallClaims(
        np.array(["ends lower"], dtype=object),
        np.zeros((1, 2)),
        np.zeros((1, 2), dtype=np.int64),
        np.array([""], dtype=object),
    )
    found = settle_calls(times, claims, market, np.zeros(1, dtype=bool), BOOK.settlement)
    last = market.bars.day[found.resolved.windows.last[0]]
    assert np.datetime64(int(last), "D") == np.datetime64("2001-09-10")
    assert found.resolved.rolled_back[0]
    expected = pd.Timestamp("2001-09-10")
    assert frame.loc[expected, "Close"] < frame.loc["2001-09-04", "Close"]
    assert found.result[0] == "hit"
