"""How many calls are needed, asked for by itself and of a forecaster's record."""

import json

import numpy as np
import pytest
from scipy import stats

from support.desk import csv_rows, invoke


@pytest.fixture(scope="module")
def demo(tmp_path_factory):
    path = tmp_path_factory.mktemp("power") / "demo.foresaid"
    invoke("demo", "--ledger", path)
    return path


def asked(*args):
    return json.loads(invoke("power", *args, "--format", "json").stdout)[0]


def exact(n, chance, skill, level):
    """Return the power of the one-sided binomial test, by its own definition."""
    tails = stats.binom.sf(np.arange(n + 1) - 1, n, chance)
    needed = np.flatnonzero(tails <= level)
    return float(stats.binom.sf(needed[0] - 1, n, skill)) if len(needed) else 0.0


def test_calls_needed_are_the_last_to_miss_the_power_and_one_more():
    row = asked("--chance", 0.5, "--skill", 0.65)
    n = row["calls_needed"]
    assert exact(n - 1, 0.5, 0.65, 0.05) < 0.8
    assert all(exact(m, 0.5, 0.65, 0.05) >= 0.8 for m in range(n, n + 60))
    many = asked("--chance", 0.5, "--skill", 0.65, "--field", 20)
    assert exact(many["calls_needed"], 0.5, 0.65, 0.05 / 20) >= 0.8
    assert asked("--skill", 0.65, "--overlap", 3)["calls_needed"] == 3 * n


def test_a_forecaster_of_the_demo(demo):
    row = asked("k.illmark", "--ledger", demo)
    calls = csv_rows(invoke("calls", "--ledger", demo, "--format", "csv").stdout)
    own = [
        float(one["chance"])
        for one in calls
        if one["forecaster"] == "k.illmark" and one["matured"] == "1"
        and one["horizon_class"] != "undated"
    ]  # fmt: skip
    assert row["n"] == len(own)
    assert row["chance"] == pytest.approx(np.mean(own))
    assert row["best_possible_p"] == pytest.approx(np.prod(own))
    assert row["field"] > 20
    text = invoke("power", "k.illmark", "--ledger", demo, "--field", 1).stdout
    assert text.startswith("k.illmark: 9 matured calls")
    assert "nan" not in text.lower()


@pytest.mark.parametrize(
    ("args", "told"),
    [
        (("--chance", 0), "--chance 0 must lie between"),
        (("--skill", 1.5), "--skill 1.5"),
        (("--skill", 0.4), "above the chance"),
        (("--level", 0.9), "--level and --power"),
        (("--field", 0), "--field"),
        (("--overlap", 0.5), "--overlap"),
        (("--calls", -1), "--calls"),
        (("k.illmark",), "name it with --ledger"),
    ],
)
def test_numbers_that_make_no_sense(args, told):
    assert told in invoke("power", *args, status=2).stderr


def test_an_unknown_forecaster(demo):
    assert "nobody" in invoke("power", "nobody", "--ledger", demo, status=2).stderr


def test_a_skill_beyond_reach_is_said_in_words():
    text = invoke("power", "--chance", 0.5, "--skill", 0.5001, "--calls", 3).stdout
    assert "no number of calls is enough" in text
    assert "always right would not show it" in text
