"""Falls of 20 % from the peak on a real index history.

Prices: ``arch.data.sp500`` (daily, 1999 to 2018). The sessions on which a close was first 20 %
below the running peak are recomputed with pandas in this file; that such a fall is called a
bear market is common practice (thebalance.com, article 2388520: a fall of 20 % from a recent
peak).
The peaks and falls agree with a published list: 2000-03-24 to 2002-10-09, -49.1 %, and
2007-10-09 to 2009-03-09, -56.8 % (bogleheads.org/wiki/Bear_market).
"""

import numpy as np
import pandas as pd
import pytest

from foresaid.claims.paths import LOOK_BACK
from foresaid.market.histories import build_market
from foresaid.model.codebook import default_codebook
from foresaid.model.price_history import PriceHistory
from foresaid.model.records import Instrument
from foresaid.settle.outcomes import CallClaims, settle_calls
from foresaid.settle.windows import CallTimes

BOOK = default_codebook()


@pytest.fixture(scope="module")
def frame():
    from arch.data import sp500

    return sp500.load()


def settle(frame, kind, percent, said, due):
    day = frame.index.to_numpy().astype("datetime64[D]").astype(np.int64)
    columns = (frame[name].to_numpy(dtype=float) for name in ("High", "Low", "Close"))
    history = PriceHistory(day, *columns)
    as_of = frame.index[-1].date()
    market = build_market([Instrument("IDX")], {"IDX": history}, [], {}, BOOK, as_of=as_of)
    n = len(said)
    times = CallTimes(
        np.zeros(n, dtype=np.int64),
        np.array(said, dtype="datetime64[D]").astype(np.int64),
        np.full(n, -1.0),
        np.array(due, dtype="datetime64[D]").astype(np.int64),
        np.zeros(n, dtype=np.int64),
    )
    values = np.zeros((n, 3))
    values[:, 0] = percent
    claims = CallClaims(
        np.full(n, kind, dtype=object),
        values,
        np.ones((n, 3), dtype=np.int64),
        np.full(n, "", dtype=object),
    )
    return settle_calls(times, claims, market, np.zeros(n, bool), BOOK.settlement), market


@pytest.mark.parametrize(
    ("said", "crossed"),
    # The first close 20 % under the peaks of 2000-03-24 and 2007-10-09.
    [("2001-01-02", "2001-03-12"), ("2008-06-02", "2008-07-09")],
)
def test_the_session_of_the_fall(frame, said, crossed):
    found, market = settle(frame, "drawdown", 20, [said], [np.datetime64(said) + 365])
    assert found.result[0] == "hit"
    decided = int(market.bars.day[found.decided[0]])
    assert np.datetime64(decided, "D") == np.datetime64(crossed)


def test_the_depth_of_the_published_falls(frame):
    close = frame["Close"]
    assert round(100 * (close["2002-10-09"] / close["2000-03-24"] - 1), 1) == -49.1
    assert round(100 * (close["2009-03-09"] / close["2007-10-09"] - 1), 1) == -56.8


def test_every_start_against_a_loop_over_windows(frame):
    """Newly crossed falls of 10 % in three months, from 200 starts, in plain pandas."""
    close = frame["Close"].to_numpy()
    index = frame.index
    rng = np.random.default_rng(5)
    starts = np.sort(rng.choice(np.arange(300, len(close) - 80), 200, replace=False))
    said = index[starts].to_numpy().astype("datetime64[D]")
    found, _ = settle(frame, "drawdown", 10, said, said + 91)
    for row, start in enumerate(starts):
        due = index.searchsorted(pd.Timestamp(said[row] + 91), side="right") - 1
        piece = pd.Series(close[start - LOOK_BACK : due + 1])
        under = piece <= piece.cummax() * 0.9
        new = (under & ~under.shift(fill_value=False)).to_numpy()
        inside = np.flatnonzero(new) + start - LOOK_BACK
        inside = inside[inside > start]
        assert (found.result[row] == "hit") == bool(len(inside))
        if len(inside):
            assert found.decided[row] == inside[0]


@pytest.mark.parametrize("side", ["above", "below"])
def test_volatility_of_every_quarter(frame, side):
    """Annualised volatility of each window against pandas' rolling deviation."""
    close = frame["Close"]
    moves = np.log(close).diff()
    starts = np.arange(0, len(close) - 70, 50)
    said = frame.index[starts].to_numpy().astype("datetime64[D]")
    found, _ = settle(frame, f"volatility {side}", 15, said, said + 91)
    last = found.resolved.windows.last
    expected = np.array(
        [
            moves.iloc[s + 1 : e + 1].std(ddof=1) * np.sqrt(252)
            for s, e in zip(starts, last, strict=True)
        ]
    )
    assert np.allclose(found.measured, expected, rtol=1e-10)
    hit = found.result == "hit"
    assert (hit == ((expected > 0.15) if side == "above" else (expected < 0.15))).all()
