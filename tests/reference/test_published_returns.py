"""Splits and dividends against the published formula for returns with dividends."""

from datetime import date, timedelta

import numpy as np
import pytest

from foresaid.market.histories import build_market
from foresaid.model.codebook import default_codebook
from foresaid.model.days import day_number
from foresaid.model.price_history import PriceHistory
from foresaid.model.records import Action, Instrument


# J. Y. Campbell, A. W. Lo, A. C. MacKinlay (1997). The Econometrics of Financial Markets.
# Princeton University Press, section 1.4.1: the return over a period with a dividend D paid
# just before its end is (P_t + D_t) / P_{t-1} - 1, and returns of several periods multiply
# (from memory). A share split n for 1 in between counts n P_t against P_{t-1}.
def published_return(close, dividends, splits, begin, end):
    """Return the compounded return from one session to another, period by period."""
    gross = 1.0
    for t in range(begin + 1, end + 1):
        n = splits.get(t, 1.0)
        gross *= (n * close[t] + n * dividends.get(t, 0.0)) / close[t - 1]
    return gross - 1.0


@pytest.mark.parametrize("seed", range(25))
def test_total_returns_are_those_of_the_published_formula(seed):
    rng = np.random.default_rng(seed)
    n = 40
    close = 50.0 * np.exp(np.cumsum(rng.normal(0, 0.02, n)))
    splits = {int(t): float(rng.choice([2.0, 3.0, 0.5, 1.25])) for t in rng.integers(1, n, 3)}
    for t, ratio in splits.items():
        close[t:] /= ratio
    dividends = {int(t): float(rng.random()) for t in rng.integers(1, n, 5)}
    start = date(2024, 1, 1)
    actions = [
        *(Action("S", start + timedelta(t), "split", ratio=x) for t, x in splits.items()),
        *(
            Action("S", start + timedelta(t), "dividend", amount=x)
            for t, x in dividends.items()
        ),
    ]
    nothing = np.full(n, np.nan)
    history = PriceHistory(day_number(start) + np.arange(n), nothing, nothing, close)
    market = build_market(
        [Instrument("S", kind="share")],
        {"S": history},
        actions,
        {},
        default_codebook(),
        as_of=start + timedelta(n),
    )
    bars = market.bars
    for begin, end in [(0, n - 1), (3, 20), (11, 12), (17, 39)]:
        price_only = published_return(close, {}, splits, begin, end)
        assert bars.close[end] / bars.close[begin] - 1 == pytest.approx(price_only, rel=1e-10)
        full = published_return(close, dividends, splits, begin, end)
        assert bars.total[end] / bars.total[begin] - 1 == pytest.approx(full, rel=1e-10)
