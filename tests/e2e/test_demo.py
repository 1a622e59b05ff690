"""The demo from end to end: the outputs' contract, and scores recomputed from the calls."""

import csv
import json
import math
import re
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from scipy import stats
from statsmodels.stats.proportion import proportion_confint

from foresaid.claims.registry import KINDS
from support.desk import csv_rows, invoke

ROOT = Path(__file__).parents[2]
PROMISED = {
    "ref", "forecaster", "instrument", "claim", "said_at", "horizon", "horizon_class",
    "specificity_class", "probability", "outcome", "reason", "reference_session",
    "reference_price", "deadline_session", "decided_session", "decided_price", "move_frac",
    "chance", "chance_model", "chance_windows", "flags", "alt_any_time", "alt_closes",
    "alt_deadline", "alt_price_return", "alt_close_before", "alt_shorter", "alt_longer",
}  # fmt: skip
SCORES = {
    "forecaster", "horizon", "n", "n_effective", "open", "void", "not_a_call", "hits",
    "hit_rate", "hit_low", "hit_high", "expected_hits", "excess", "p_coin", "p_base", "brier",
    "brier_skill", "verdict",
}  # fmt: skip
DATES = ("reference_session", "first_session", "deadline", "deadline_session",
         "decided_session", "coded_at")  # fmt: skip
ISO = re.compile(r"\d{4}-\d{2}-\d{2}")
MOMENT = re.compile(r"\d{4}-\d{2}-\d{2}(T\d{2}:\d{2}:\d{2}[+-]\d{2}:\d{2})?")
NO_VALUE = {"nan", "none", "inf", "-inf", "nat", "<na>", "null"}


@pytest.fixture(scope="module")
def ledger(tmp_path_factory):
    path = tmp_path_factory.mktemp("demo") / "demo.foresaid"
    done = invoke("demo", "--ledger", path)
    assert "invented" in done.stderr
    assert "ahead of chance" in done.stdout
    return path


@pytest.fixture(scope="module")
def calls_text(ledger):
    return invoke("calls", "--ledger", ledger, "--format", "csv").stdout


@pytest.fixture(scope="module")
def calls(calls_text):
    return csv_rows(calls_text)


@pytest.fixture(scope="module")
def scores(ledger):
    def by(keys):
        text = invoke("score", "--ledger", ledger, "--by", keys, "--format", "json").stdout
        return json.loads(text)

    return by


@pytest.fixture(scope="module")
def by_forecaster(scores):
    return {row["forecaster"]: row for row in scores("forecaster")}


def documented(heading):
    """Return the names in the first cells of the tables under a heading of formats.md."""
    page = (ROOT / "docs" / "formats.md").read_text("utf-8")
    section = page.split(f"### {heading}\n", 1)[1].split("\n### ", 1)[0]
    cells = re.findall(r"^\|([^|]+)\|", section, re.MULTILINE)
    return [name for cell in cells for name in re.findall(r"`([^`]+)`", cell)]


# --------------------------------------------------------------------------- what comes out
def test_documented_columns_of_calls_are_those_given_out(calls):
    names = documented("`foresaid calls --format csv|json`")
    assert set(names) == set(calls[0])
    assert len(names) == len(set(names))
    assert set(calls[0]) >= PROMISED


def test_documented_columns_of_scores_are_those_given_out(scores):
    row = scores("forecaster,horizon")[0]
    names = documented("`foresaid score --format csv|json`")
    assert set(names) | {"forecaster", "horizon"} == set(row)
    assert set(row) >= SCORES


def test_csv_and_json_of_calls_say_the_same(ledger, calls):
    found = json.loads(invoke("calls", "--ledger", ledger, "--format", "json").stdout)
    assert len(found) == len(calls)
    for row, cells in zip(found, calls, strict=True):
        assert {k: "" if v is None else str(v) for k, v in row.items()} == cells


def test_csv_and_json_of_scores_say_the_same(ledger, scores):
    text = invoke("score", "--ledger", ledger, "--by", "year,desk", "--format", "csv").stdout
    for row, cells in zip(scores("year,desk"), csv_rows(text), strict=True):
        assert {k: "" if v is None else str(v) for k, v in row.items()} == cells


def test_cells_hold_values_or_nothing(calls, scores):
    rows = [*calls, *scores("forecaster,horizon"), *scores("all"), *scores("instrument")]
    odd = {str(value) for row in rows for value in row.values()}
    assert not {text for text in odd if text.lower() in NO_VALUE - {"none"}}
    models = {row["chance_model"] for row in calls}
    assert models <= {"history", "history and volatility", "volatility", "none"}


def test_dates_are_iso_and_shares_are_fractions(calls):
    for row in calls:
        assert MOMENT.fullmatch(row["said_at"])
        for name in DATES:
            assert not row[name] or ISO.fullmatch(row[name]), (row["ref"], name)
        for name in ("probability", "probability_low", "probability_high", "chance"):
            assert not row[name] or 0.0 <= float(row[name]) <= 1.0
        assert row["outcome"] in {"hit", "miss", "void", "open", "not a call"}
        assert bool(row["reason"]) == (row["outcome"] not in {"hit", "miss"})
        for name in (one for one in row if one.startswith("alt_")):
            assert row[name] in {"", "hit", "miss"}


def test_a_move_is_the_decided_price_over_the_reference(calls):
    """No split lies inside most windows; where one does the quotient is off by its ratio."""
    quotients = []
    for row in calls:
        if row["move_frac"]:
            plain = float(row["decided_price"]) / float(row["reference_price"])
            quotients.append((1.0 + float(row["move_frac"])) / plain)
    ratios = {round(quotient, 9) for quotient in quotients}
    assert 1.0 in ratios
    assert all(ratio == round(ratio) for ratio in ratios)


def test_settled_table_counts_the_calls(ledger, calls):
    text = invoke(
        "settle", "--ledger", ledger, "--as-of", "2025-12-31", "--format", "json"
    ).stdout
    counts = {row["result"]: row["calls"] for row in json.loads(text)}
    by_outcome = pd.Series([row["outcome"] for row in calls]).value_counts().to_dict()
    assert {name: counts[name] for name in by_outcome} == by_outcome


def test_demo_gives_out_scores_as_data_alone(tmp_path):
    done = invoke("demo", "--format", "csv", "--ledger", tmp_path / "d.foresaid")
    rows = csv_rows(done.stdout)
    assert len(rows) == 27
    assert {"forecaster", "verdict", "p_base"} <= set(rows[0])


# ------------------------------------------------------------------- scores, a second opinion
def second_opinion(rows):
    """Return the scores of one group of settled calls, from the CSV alone."""
    rows = rows[rows["right"].notna()]
    right = rows["right"].to_numpy(dtype=bool)
    n, hits = len(rows), int(right.sum())
    known = rows["chance"].notna().to_numpy()
    chance = np.where(rows["leans"], 1.0 - rows["chance"], rows["chance"])[known]
    # the number of right calls as a polynomial whose coefficients are the chances of 0, 1, ...
    spread = [1.0]
    for one in chance:
        longer = [0.0] * (len(spread) + 1)
        for k, mass in enumerate(spread):
            longer[k] += mass * (1.0 - one)
            longer[k + 1] += mass * one
        spread = longer
    base_hits = int(right[known].sum())
    stated = rows[rows["probability"].notna()]
    came = (stated["outcome"] == "hit").to_numpy(dtype=float)
    width = (stated["probability_high"] - stated["probability_low"]).to_numpy()
    band = (stated["probability"].to_numpy() - came) ** 2 + width**2 / 12.0
    both = stated["chance"].notna().to_numpy()
    by_chance = (stated["chance"].to_numpy() - came)[both] ** 2
    low, high = proportion_confint(hits, n, method="wilson") if n else (None, None)
    return {
        "n": n,
        "hits": hits,
        "hit_rate": hits / n if n else None,
        "hit_low": low,
        "hit_high": high,
        "n_base": len(chance),
        "expected_hits": math.fsum(chance) if len(chance) else None,
        "excess": base_hits - math.fsum(chance) if len(chance) else None,
        "p_coin": stats.binomtest(hits, n, alternative="greater").pvalue if n else None,
        "p_coin_low": stats.binomtest(hits, n, alternative="less").pvalue if n else None,
        "p_base": math.fsum(spread[base_hits:]) if len(chance) else None,
        "p_base_low": math.fsum(spread[: base_hits + 1]) if len(chance) else None,
        "n_probability": len(stated),
        "brier": band.mean() if len(stated) else None,
        "brier_chance": by_chance.mean() if both.any() else None,
        "brier_skill": 1.0 - band[both].mean() / by_chance.mean() if both.any() else None,
    }


def read_frame(path):
    """Return the calls as a frame with who was right: leaning turns a stated doubt round."""
    frame = pd.read_csv(path)
    frame["leans"] = frame["probability_high"] < 0.5
    scored = frame["outcome"].isin(["hit", "miss"]) & (frame["matured"] == 1)
    scored &= ~frame["flags"].fillna("").str.contains("imputed horizon")
    hit = frame["outcome"] == "hit"
    frame["right"] = np.where(hit != frame["leans"], 1.0, 0.0)
    frame.loc[~scored, "right"] = np.nan
    return frame


def assert_same(row, expected):
    for name, value in expected.items():
        if value is None:
            assert row[name] is None, name
        else:
            assert row[name] == pytest.approx(value, rel=1e-9, abs=1e-12), name


@pytest.fixture(scope="module")
def frame(calls_text, tmp_path_factory):
    path = tmp_path_factory.mktemp("calls") / "calls.csv"
    path.write_text(calls_text, encoding="utf-8")
    return read_frame(path)


def test_scores_of_every_forecaster_recomputed(frame, by_forecaster):
    assert set(by_forecaster) == set(frame["forecaster"])
    for handle, rows in frame.groupby("forecaster"):
        assert_same(by_forecaster[handle], second_opinion(rows))


def test_scores_of_all_and_by_class_recomputed(frame, scores):
    assert_same(scores("all")[0], second_opinion(frame))
    for row in scores("forecaster,horizon"):
        own = frame["forecaster"] == row["forecaster"]
        own &= frame["horizon_class"].fillna("") == row["horizon"]
        assert_same(row, second_opinion(frame[own]))


def test_counts_beside_the_rates_add_up(frame, by_forecaster):
    for handle, rows in frame.groupby("forecaster"):
        row, outcome = by_forecaster[handle], rows["outcome"]
        for name in ("open", "void"):
            assert row[name] == (outcome == name).sum()
        assert row["not_a_call"] == (outcome == "not a call").sum()
        parts = ("n", "open", "void", "not_a_call", "early", "imputed_n")
        assert row["screened"] == len(rows) == sum(row[name] for name in parts)


def test_windows_without_overlap_recomputed(frame, by_forecaster):
    """The most windows of an instrument that do not overlap: always take the next to end."""
    for handle, rows in frame[frame["right"].notna()].groupby("forecaster"):
        total = 0
        for _, own in rows.groupby("instrument"):
            last = ""
            for row in own.sort_values("deadline_session").itertuples():
                if row.reference_session >= last:
                    total, last = total + 1, row.deadline_session
        assert by_forecaster[handle]["n_effective"] == total


# ---------------------------------------------------------------------------- hidden roles
def test_roles_are_found_out(by_forecaster):
    assert by_forecaster["k.illmark"]["verdict"] == "too few to tell"
    assert by_forecaster["k.illmark"]["hit_rate"] > 0.8
    assert by_forecaster["e.vostrand"]["verdict"] == "not estimable"
    assert by_forecaster["e.vostrand"]["p_base"] < 0.001
    assert by_forecaster["m.tarrow"]["verdict"] == "ahead of chance"
    # people who say the same thing at the same time are not as many findings
    for follower in ("d.quorne", "j.tiverin", "l.hasveld", "o.brandrey", "s.pellory"):
        assert by_forecaster[follower]["verdict"] == "no different from chance"
    assert by_forecaster["m.tarrow"]["e_passed_on"] is not None
    assert by_forecaster["e.vostrand"]["p_henriksson_merton"] is None
    assert by_forecaster["r.sundovar"]["brier_skill"] < 0.0
    assert by_forecaster["p.ambrask"]["brier_skill"] > 0.0


# ---------------------------------------------------------------------------------- traces
@pytest.fixture(scope="module")
def price_rows():
    with (ROOT / "data" / "demo" / "prices.csv").open(encoding="utf-8") as file:
        return {(row["instrument"], row["session"]): row for row in csv.DictReader(file)}


def kind_of(claim):
    """Return the registered kind whose fixed words a canonical claim begins with."""
    for name, kind in KINDS.items():
        pattern = re.sub(r"\\\{[a-z]+\\\}", r"\\S.*", re.escape(kind.form))
        if re.fullmatch(pattern, claim) and len(claim.split()) >= len(kind.form.split()):
            return name
    return "not a call"


def test_a_trace_for_each_kind_of_claim(ledger, calls, price_rows):
    chosen = {}
    for row in calls:
        chosen.setdefault(kind_of(row["claim"]), row)
        chosen.setdefault(row["outcome"], row)
    assert len(chosen) > 10
    for row in chosen.values():
        ref = row["ref"]
        text = invoke("trace", ref, "--ledger", ledger).stdout
        assert text.startswith(f"{ref}: {row['outcome']}\n")
        steps = csv_rows(invoke("trace", ref, "--ledger", ledger, "--format", "csv").stdout)
        assert {"statement", "result"} <= {step["step"] for step in steps}
        trace = json.loads(invoke("trace", ref, "--ledger", ledger, "--format", "json").stdout)
        assert set(trace) == {"call", "steps", "prices", "alternates"}
        listed = {k: "" if v is None else str(v) for k, v in trace["call"].items()}
        assert listed == row
        sessions = {row["reference_session"], row["decided_session"]} - {""}
        assert sessions <= {price["session"] for price in trace["prices"]}
        for price in trace["prices"]:
            kept = price_rows[row["instrument"], price["session"]]
            for name in ("open", "high", "low", "close"):
                wanted = float(kept[name]) if kept[name] else None
                assert price[name] == wanted
            assert price["file"] == "prices.csv"
            assert re.fullmatch("[0-9a-f]{64}", price["sha256"])


def test_the_same_demo_twice_gives_the_same_bytes(calls_text, tmp_path):
    invoke("demo", "--ledger", tmp_path / "again.foresaid", "--format", "json")
    again = invoke("calls", "--ledger", tmp_path / "again.foresaid", "--format", "csv").stdout
    assert again == calls_text
