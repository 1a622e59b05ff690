"""Two forecasters on matched calls, against plain Python over the list of calls."""

import json
from datetime import date, timedelta

import numpy as np
import pytest
from scipy import stats

from support.desk import Desk, csv_rows, table_text

DAYS = [(date(2024, 1, 1) + timedelta(days=i)).isoformat() for i in range(300)]
WALK = np.round(100 * np.exp(np.cumsum(np.random.default_rng(2).normal(0, 0.01, 300))), 2)
HEADER = "ref,forecaster,said_at,instrument,claim,horizon,probability"


@pytest.fixture(scope="module")
def desk(tmp_path_factory):
    desk = Desk(tmp_path_factory.mktemp("compare")).stock(prices=False)
    rows = [("BARE", day, close) for day, close in zip(DAYS, WALK.tolist(), strict=True)]
    desk.bring("prices", table_text("instrument,session,close", rows))
    rng = np.random.default_rng(4)
    calls = []
    for n in range(24):
        day = DAYS[60 + 7 * n]
        for name in ("t.mavren", "o.quist"):
            side = "higher" if rng.random() < 0.5 else "lower"
            stated = f"{rng.integers(51, 90)}%" if n % 2 or name == "t.mavren" else ""
            calls.append(
                (f"C{len(calls)}", name, day, "BARE", f"ends {side}", "10 sessions", stated)
            )
    calls.append(("X1", "t.mavren", DAYS[60], "BARE", "ends higher", "10 sessions", "99%"))
    calls.append(("X2", "t.mavren", DAYS[61], "BARE", "ends higher", "10 sessions", "99%"))
    desk.bring("calls", table_text(HEADER, calls))
    desk.settle(DAYS[-1])
    return desk


def compared(desk, *names):
    (row,) = json.loads(desk.run("compare", *names, "--format", "json").stdout)
    return row


def test_matched_calls_recomputed(desk):
    listed = [
        row
        for row in csv_rows(desk.run("calls", "--format", "csv").stdout)
        if row["ref"] != "X1"
    ]
    own = {
        name: {r["reference_session"]: r for r in listed if r["forecaster"] == name}
        for name in ("t.mavren", "o.quist")
    }
    shared = sorted(own["t.mavren"].keys() & own["o.quist"].keys())
    right = [[own[n][day]["outcome"] == "hit" for day in shared] for n in own]
    a = sum(x and not y for x, y in zip(*right, strict=True))
    b = sum(y and not x for x, y in zip(*right, strict=True))
    row = compared(desk, "t.mavren", "o.quist")
    assert (row["matched"], row["first_right"], row["second_right"]) == (24, *map(sum, right))
    assert (row["only_first"], row["only_second"]) == (a, b)
    assert row["p_only"] == pytest.approx(stats.binomtest(a, a + b).pvalue)
    # a call every seven days over ten: each window reaches into the next
    assert (row["horizon"], row["windows_disjoint"]) == (2, 12)
    assert row["loss"] == "wrong"
    d = np.array(right[1], float) - np.array(right[0], float)
    rest = d - d.mean()
    variance = (rest @ rest + 2 * rest[1:] @ rest[:-1]) / 24**2
    t = d.mean() / np.sqrt(variance) * np.sqrt((24 + 1 - 4 + 2 / 24) / 24)
    assert row["t_loss"] == pytest.approx(t)
    turned = compared(desk, "o.quist", "t.mavren")
    assert turned["t_loss"] == pytest.approx(-t)
    assert turned["p_only"] == row["p_only"]
    text = desk.run("compare", "t.mavren", "o.quist").stdout
    assert text.startswith("24 matched calls in 12 windows")
    assert "not about a person" in text


@pytest.mark.parametrize(
    ("names", "told"),
    [
        (("t.mavren", "nobody"), "no forecaster 'nobody'"),
        (("t.mavren", "t.mavren"), "two different"),
    ],
)
def test_names_that_will_not_do(desk, names, told):
    assert told in desk.run("compare", *names, status=2).stderr


def test_nothing_matches(tmp_path):
    desk = Desk(tmp_path).stock()
    desk.calls(
        ("C1", "t.mavren", "2025-03-03", "ORVA", "ends higher", "2025-03-10"),
        ("C2", "o.quist", "2025-03-03", "ORVA", "ends higher", "2025-03-11"),
    )
    desk.settle()
    told = desk.run("compare", "t.mavren", "o.quist", status=2).stderr
    assert "nothing to compare" in told


def test_few_pairs_and_brier_scores(tmp_path):
    desk = Desk(tmp_path).stock()
    rows = [
        (f"C{i}{name}", name, f"2025-03-{3 + i:02}", "ORVA", "ends higher", "2025-03-13", "70%")
        for i in (0, 1, 2)
        for name in ("t.mavren", "o.quist")
    ]
    desk.bring("calls", table_text(HEADER, rows))
    desk.settle()
    row = compared(desk, "t.mavren", "o.quist")
    assert row["loss"] == "Brier"
    assert row["p_loss"] is None
    assert row["p_only"] == 1.0
    assert "not to be tested" in desk.run("compare", "t.mavren", "o.quist").stdout
