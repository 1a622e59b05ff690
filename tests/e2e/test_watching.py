"""The e-values of the demo, day by day, from the listed calls with plain loops."""

from datetime import date

import pytest

from support.desk import Desk, csv_rows, invoke, table_text

ODDS = (1.25, 1.5, 2.0, 3.0, 5.0)
AS_OF = date(2025, 12, 31).toordinal()


@pytest.fixture(scope="module")
def demo(tmp_path_factory):
    path = tmp_path_factory.mktemp("watching") / "demo.foresaid"
    invoke("demo", "--ledger", path)
    return path


def day(text):
    return date.fromisoformat(text).toordinal()


def bets(calls):
    """Return (start, end, chance, right or None) of every bet, in the order of betting."""
    found = []
    # demo venues close at different hours, so a close elsewhere may have come before
    mixed = len({row["instrument"] for row in calls} & {"MARB", "TESX", "BRLY", "PVRN"}) > 1
    for row in calls:
        stated = row["horizon_class"] != "undated"
        if row["outcome"] not in ("hit", "miss", "open") or not row["chance"] or not stated:
            continue
        against = bool(row["probability_high"]) and float(row["probability_high"]) < 0.5
        chance = float(row["chance"])
        start = day(row["reference_session"])
        start -= mixed or row["first_session"] == row["reference_session"]
        right, end = None, AS_OF + 1
        if row["matured"] == "1":
            right, end = (row["outcome"] == "hit") != against, day(row["deadline_session"])
        found.append((start, end, 1 - chance if against else chance, right))
    return sorted(found, key=lambda bet: (bet[0], bet[2]))


def slow_path(calls, *, up):
    """Return {day: e-value} with open bets counted as lost."""
    placed, free = [], []
    for bet in bets(calls):
        for number, until in enumerate(free):
            if until <= bet[0]:
                free[number] = bet[1]
                break
        else:
            number = len(free)
            free.append(bet[1])
        placed.append((number, *bet))
    path = {}
    for now in sorted({x for _, a, b, *_ in placed for x in (a, b) if x <= AS_OF}):
        opened = {number for number, a, *_ in placed if a <= now}
        total = 1.0 - sum(1 / ((j + 1) * (j + 2)) for j in range(len(opened)))
        for number in opened:
            mean = 0.0
            for theta in ODDS:
                theta = theta if up else 1 / theta
                wealth = 1.0
                for own, start, end, p, right in placed:
                    if own == number and start <= now:
                        q = theta * p / (1 - p + theta * p)
                        won = right if end <= now and right is not None else not up
                        wealth *= q / p if won else (1 - q) / (1 - p)
                mean += wealth / len(ODDS)
            total += mean / ((number + 1) * (number + 2))
        path[now] = total
    return path


@pytest.mark.parametrize("handle", ["m.tarrow", "k.illmark", "n.ostervane", "p.ambrask"])
def test_e_values_recomputed(demo, handle):
    listed = csv_rows(invoke("calls", "--ledger", demo, "--format", "csv").stdout)
    own = [row for row in listed if row["forecaster"] == handle]
    scores = csv_rows(invoke("score", "--ledger", demo, "--format", "csv").stdout)
    (row,) = (one for one in scores if one["forecaster"] == handle)
    for up, name, passed in ((True, "", "e_passed_on"), (False, "_low", "e_passed_low_on")):
        path = slow_path(own, up=up)
        assert float(row[f"e_value{name}"]) == pytest.approx(path[max(path)], rel=1e-9)
        first = [when for when, value in sorted(path.items()) if value >= 20.0]
        assert row[passed] == (date.fromordinal(first[0]).isoformat() if first else "")


def test_open_calls_count_as_lost_and_void_ones_not_at_all(tmp_path):
    desk = Desk(tmp_path).stock()
    days = [f"2024-{m:02}-{d:02}" for m in range(1, 13) for d in range(1, 28)]
    closes = [100 + (i * 7) % 5 for i in range(len(days))]
    desk.bring(
        "prices",
        table_text(
            "instrument,session,close", [("BARE", *x) for x in zip(days, closes, strict=True)]
        ),
        name="bare.csv",
    )
    desk.calls(
        ("C1", "t.mavren", "2024-10-01", "BARE", "ends higher", "5 sessions"),
        ("C2", "t.mavren", "2024-12-20", "BARE", "ends higher", "2025-12-31"),
        ("C3", "t.mavren", "2024-12-20", "BARE", "touches 104", "2025-12-31"),
    )
    desk.settle("2024-12-31")
    (row,) = desk.scores()
    calls = desk.outcomes()
    p1, p2 = float(calls["C1"]["chance"]), float(calls["C2"]["chance"])
    won = calls["C1"]["outcome"] == "hit"

    def factor(p, theta, right):
        q = theta * p / (1 - p + theta * p)
        return q / p if right else (1 - q) / (1 - p)

    first = sum(factor(p1, t, won) * factor(p2, t, False) for t in ODDS) / 5
    streams = [first]
    if calls["C3"]["outcome"] != "void":
        p3 = float(calls["C3"]["chance"])
        pair = sorted([p2, p3])
        streams = [
            sum(factor(p1, t, won) * factor(pair[0], t, False) for t in ODDS) / 5,
            sum(factor(pair[1], t, False) for t in ODDS) / 5,
        ]
    weights = [1 / 2, 1 / 6][: len(streams)]
    rest = 1 - sum(weights)
    expected = rest + sum(w * s for w, s in zip(weights, streams, strict=True))
    assert row["e_value"] == pytest.approx(expected, rel=1e-9)
