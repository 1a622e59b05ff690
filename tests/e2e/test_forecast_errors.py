"""Targets, ranges, quantiles and bins against what the market's own past would have said."""

import json
from datetime import date, timedelta

import numpy as np
import pytest

from support.desk import Desk, csv_rows, table_text

WALK = np.round(
    100 * np.exp(np.cumsum(np.random.default_rng(7).normal(0.0002, 0.01, 400))), 2
).tolist()
DAYS = [(date(2024, 1, 1) + timedelta(days=i)).isoformat() for i in range(400)]
SAID, DUE = 300, 310


@pytest.fixture(scope="module")
def desk(tmp_path_factory):
    desk = Desk(tmp_path_factory.mktemp("errors")).stock(prices=False)
    rows = [("BARE", day, close) for day, close in zip(DAYS, WALK, strict=True)]
    desk.bring("prices", table_text("instrument,session,close", rows))
    reference = WALK[SAID]
    low, mid, high = (round(reference * f, 2) for f in (0.96, 1.0, 1.05))
    claims = [
        f"targets {high}",
        f"range {low} to {high} at 80%",
        f"quantiles 10%={low}, 50%={mid + 0.01}, 90%={high}",
        f"bins <{low}: 20%, {low} to {high}: 50%, >{high}: 30%",
        "ends higher",
    ]
    calls = [
        (f"C{i}", "t.mavren", DAYS[SAID], "BARE", claim, DAYS[DUE])
        for i, claim in enumerate(claims)
    ]
    desk.calls(*calls, ("N1", "t.mavren", DAYS[SAID], "", "not a call: opinion", ""))
    desk.calls(("Y1", "o.quist", DAYS[5], "BARE", "targets 120", DAYS[15]))
    desk.settle(DAYS[-1])
    return desk


def past(span):
    """Return the moves over earlier windows that had ended before the statement."""
    closes = np.array(WALK)
    return np.array([closes[t + span] / closes[t] for t in range(SAID - span)])


def expected():
    """Return loss and reference of each call, in plain arithmetic."""
    reference, came = WALK[SAID], WALK[DUE] / WALK[SAID]
    low, mid, high = (round(reference * f, 2) / reference for f in (0.96, 1.0, 1.05))
    mid = (round(reference, 2) + 0.01) / reference
    moves = past(DUE - SAID)

    def interval(a, b):
        return (b - a) + 10 * max(a - came, 0) + 10 * max(came - b, 0)

    def pinball(quantiles):
        losses = [
            p * (came - q) if came >= q else (1 - p) * (q - came)
            for p, q in zip((0.1, 0.5, 0.9), quantiles, strict=True)
        ]
        return sum(losses) / 3

    def ranked(shares):
        into = 0 if came < low else 1 if came <= high else 2
        cumulated, total = 0.0, 0.0
        for i, share in enumerate(shares):
            cumulated += share
            total += (cumulated - (i >= into)) ** 2
        return total / 2

    freq = [
        np.mean(moves < low),
        np.mean((moves >= low) & (moves <= high)),
        np.mean(moves > high),
    ]
    return {
        "C0": (abs(came - high), abs(came - 1)),
        "C1": (interval(low, high), interval(*np.quantile(moves, [0.1, 0.9]))),
        "C2": (pinball((low, mid, high)), pinball(np.quantile(moves, [0.1, 0.5, 0.9]))),
        "C3": (ranked((0.2, 0.5, 0.3)), ranked(freq)),
    }


def test_losses_are_those_of_plain_arithmetic(desk):
    found = desk.outcomes()
    for ref, (loss, reference) in expected().items():
        assert float(found[ref]["loss"]) == pytest.approx(loss, rel=1e-9), ref
        assert float(found[ref]["loss_reference"]) == pytest.approx(reference, rel=1e-9), ref
    assert found["C4"]["loss"] == found["N1"]["loss"] == ""
    # ten days of history hold no ten windows; no change needs none
    assert found["Y1"]["loss_reference"] != ""
    covered = (WALK[DUE] / WALK[SAID] - 1) / (round(WALK[SAID] * 1.05, 2) / WALK[SAID] - 1)
    assert float(found["C0"]["covered"]) == pytest.approx(covered, rel=1e-9)


def test_one_row_a_forecaster_and_kind(desk):
    rows = json.loads(desk.run("errors", "--format", "json").stdout)
    assert [(one["forecaster"], one["forecast"]) for one in rows] == [
        ("o.quist", "target"),
        ("t.mavren", "target"),
        ("t.mavren", "range"),
        ("t.mavren", "quantiles"),
        ("t.mavren", "bins"),
    ]
    by_name = {one["forecast"]: one for one in rows[1:]}
    for ref, name in zip(("C0", "C1", "C2", "C3"), by_name, strict=True):
        loss, reference = expected()[ref]
        assert by_name[name]["loss"] == pytest.approx(loss)
        assert by_name[name]["skill"] == pytest.approx(1 - loss / reference)
    assert by_name["range"]["stated_rate"] == pytest.approx(0.8)
    assert by_name["target"]["stated_rate"] is None


def test_the_table_and_a_desk_without_any(desk, tmp_path):
    assert "quantiles" in desk.run("errors", "--by", "all").stdout
    assert csv_rows(desk.run("errors", "--by", "year", "--format", "csv").stdout)[0]["year"]
    empty = Desk(tmp_path).stock()
    empty.calls(("C1", "t.mavren", "2025-03-03", "ORVA", "ends higher", "2025-03-14"))
    empty.settle()
    assert "No target" in empty.run("errors").stderr
