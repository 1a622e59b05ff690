"""The timing and field hurdles of the demo, moved and counted again with plain pandas."""

import csv
import json
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from statsmodels.stats.multitest import multipletests

from support.desk import Desk, csv_rows, invoke

ROOT = Path(__file__).parents[2]


@pytest.fixture(scope="module")
def desk(tmp_path_factory):
    """The demo's prices, and three people who only say higher or lower, date and no time."""
    desk = Desk(tmp_path_factory.mktemp("hurdles"))
    demo = ROOT / "data" / "demo"
    for what in ("instruments", "prices"):
        desk.run("import", what, demo / f"{what}.csv")
    desk.bring("forecasters", "forecaster\nanna\nbert\ncarl\n")
    rng = np.random.default_rng(11)
    days = pd.bdate_range("2018-01-02", "2024-06-28")
    rows = []
    for name, n in (("anna", 45), ("bert", 60), ("carl", 8)):
        for day in sorted(rng.choice(len(days), n, replace=False)):
            symbol = str(rng.choice(["MARB", "TESX"]))
            claim = str(rng.choice(["ends higher", "ends lower"]))
            rows.append((f"R{len(rows)}", name, days[day].date(), symbol, claim, "63 sessions"))
    desk.calls(*rows)
    desk.settle("2025-12-31")
    return desk


def prices(symbols):
    with (ROOT / "data" / "demo" / "prices.csv").open(encoding="utf-8") as file:
        rows = [row for row in csv.DictReader(file) if row["instrument"] in symbols]
    table = pd.DataFrame(rows)
    table["close"] = table["close"].astype(float)
    return {s: own.set_index("session")["close"] for s, own in table.groupby("instrument")}


def second_opinion(desk):
    """Return the hits of everyone under every shift, by one pass over every call and shift."""
    calls = csv_rows(desk.run("calls", "--format", "csv").stdout)
    closes = prices({row["instrument"] for row in calls})
    sessions = sorted({day for own in closes.values() for day in own.index})
    made = [row["reference_session"] for row in calls]
    calendar = [day for day in sessions if min(made) <= day <= max(made)]
    counts = {}
    for row in calls:
        own = closes[row["instrument"]]
        begun = calendar.index(row["reference_session"])
        right = []
        for k in range(len(calendar)):
            day = calendar[(begun + k) % len(calendar)]
            at = int(own.index.searchsorted(day))
            moved = own.iloc[at + 63] - own.iloc[at]
            right.append(moved > 0 if row["claim"] == "ends higher" else moved < 0)
        counts[row["forecaster"]] = counts.get(row["forecaster"], 0) + np.array(
            right, dtype=int
        )
    return counts


def test_timing_and_field_of_a_small_desk(desk):
    scores = {row["forecaster"]: row for row in desk.scores()}
    counts = second_opinion(desk)
    shifts = len(counts["anna"])
    for name, hits in counts.items():
        row = scores[name]
        assert row["shifts"] == shifts
        assert row["n_timing"] == row["n"]
        assert row["timing_hits"] == hits[0] == row["hits"]
        assert row["timing_expected"] == pytest.approx(hits.mean(), rel=1e-12)
        assert row["p_timing"] == np.mean(hits >= hits[0])
        assert row["p_timing_low"] == np.mean(hits <= hits[0])
    # carl's record is too short to be ranked, so the field is anna and bert
    z = {n: (counts[n] - counts[n].mean()) / counts[n].std() for n in ("anna", "bert")}
    first, second = sorted(z, key=lambda n: -z[n][0])
    best = np.maximum(z["anna"], z["bert"])
    p_first = np.mean(best >= z[first][0])
    p_second = max(np.mean(z[second] >= z[second][0]), p_first)
    assert scores[first]["p_field"] == pytest.approx(p_first, abs=1e-12)
    assert scores[second]["p_field"] == pytest.approx(p_second, abs=1e-12)
    assert scores["carl"]["p_field"] is None
    assert {row["field_size"] for row in scores.values()} == {2}
    band = np.sort(best)[int(np.ceil(0.95 * shifts)) - 1]
    for name in z:
        wanted = counts[name].mean() + band * counts[name].std()
        assert scores[name]["luck_high"] == pytest.approx(wanted, rel=1e-9)
    assert scores["carl"]["luck_high"] is None


def test_numbers_of_a_larger_field(tmp_path):
    """The demo's field: adjusted p-values by a library, shares that add up, ranks that nest."""
    path = tmp_path / "demo.foresaid"
    invoke("demo", "--ledger", path)
    rows = json.loads(invoke("score", "--ledger", path, "--format", "json").stdout)
    field = [row for row in rows if row["p_field"] is not None]
    assert len(field) > 15
    for hurdle in ("base", "timing"):
        p = [row[f"p_{hurdle}"] for row in field]
        for how, method in (("holm", "holm"), ("bh", "fdr_bh"), ("by", "fdr_by")):
            wanted = multipletests(p, method=method)[1]
            np.testing.assert_allclose([row[f"p_{hurdle}_{how}"] for row in field], wanted)
    assert sum(row["p_best"] for row in field) == pytest.approx(1.0)
    n = len(field)
    assert sum(row["rank"] for row in field) == pytest.approx(n * (n + 1) / 2)
    for row in field:
        assert 1 <= row["rank_low"] <= row["rank_high"] <= n
        rate = (row["timing_hits"] - row["timing_expected"]) / row["n_timing"]
        assert row["excess_rate"] == pytest.approx(rate)
        assert abs(row["shrunken_rate"]) <= abs(rate) + 0.05
        shares = [row[f"share_{name}"] for name in ("none", "some", "negative")]
        assert sum(shares) == pytest.approx(1.0)
    apart = [row for row in rows if row["p_field"] is None]
    assert all(row["rank"] is None and row["p_timing_holm"] is None for row in apart)


def test_groups_of_one_person_are_a_field_of_their_own(desk):
    rows = json.loads(desk.run("score", "--by", "instrument", "--format", "json").stdout)
    assert {row["field_size"] for row in rows} == {len(rows)}
    (whole,) = json.loads(desk.run("score", "--by", "all", "--format", "json").stdout)
    assert whole["p_field"] == whole["p_timing"]


def test_the_clock_of_the_codebook_moves_records_over_all_history(desk, tmp_path):
    book = invoke_codebook(tmp_path, 'shift_span = "record"', 'shift_span = "history"')
    before = desk.scores()[0]["shifts"]
    desk.run("settle", "--as-of", "2025-12-31", "--codebook", book)
    after = desk.scores()[0]["shifts"]
    assert after > before + 1000
    assert desk.scores()[0]["n_timing"] == desk.scores()[0]["n"]
    book = invoke_codebook(tmp_path, 'shift_marks = "ratio"', 'shift_marks = "volatility"')
    desk.run("settle", "--as-of", "2025-12-31", "--codebook", book)
    # up and down have no distance to scale
    assert [row["shifts"] for row in desk.scores()] == [before] * 3
    desk.settle("2025-12-31")


def invoke_codebook(folder, old, new):
    from foresaid.model.codebook import default_codebook

    text = default_codebook().source
    assert text.count(old) == 1
    path = folder / "book.toml"
    path.write_text(text.replace(old, new), encoding="utf-8")
    return path


def test_nothing_to_move(tmp_path):
    desk = Desk(tmp_path).stock()
    desk.calls(("C1", "t.mavren", "2025-03-03", "ORVA", "ends higher", "2025-06-30"))
    desk.settle()
    (row,) = desk.scores()
    assert (row["n_timing"], row["shifts"], row["p_timing"]) == (0, 0, None)
    assert row["verdict"] == "too few to tell"
    assert "too few to tell" in invoke("score", "--ledger", desk.ledger).stdout


def test_the_ranking_keeps_short_records_apart(desk):
    text = desk.run("score", "--field").stdout
    ranking, apart = text.split("Not ranked")
    assert "anna" in ranking
    assert "bert" in ranking
    assert "carl" not in ranking
    assert "carl" in apart
    assert "too few to tell" in apart
    assert "not about a person" in apart
    empty = desk.run("score", "--field", "--by", "year").stdout
    assert "2019" in empty


def test_a_call_and_its_revisions_are_one_view(tmp_path):
    desk = Desk(tmp_path).stock()
    header = "ref,forecaster,said_at,instrument,claim,horizon,revises"
    desk.calls(
        ("C1", "t.mavren", "2025-03-03", "ORVA", "ends higher", "2025-03-10", ""),
        ("C2", "t.mavren", "2025-03-04", "ORVA", "ends lower", "2025-03-11", "C1"),
        ("C3", "t.mavren", "2025-03-05", "ORVA", "ends lower", "2025-03-12", "C2"),
        ("C4", "t.mavren", "2025-03-06", "ORVA", "ends lower", "2025-03-13", ""),
        header=header,
    )
    desk.settle()
    (row,) = desk.scores()
    assert (row["n"], row["views"]) == (4, 2)
