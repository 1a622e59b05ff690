"""Calls under a condition, through the command line."""

import csv
import io

import pytest
from typer.testing import CliRunner

from foresaid.cli.main import app

PRICES = {
    # Monday 2024-01-01 to Friday 2024-01-19, invented
    "AAA": [100, 101, 102, 103, 104, 105, 106, 107, 108, 109, 110, 111, 112, 113, 114],
    "BBB": [50, 50, 51, 52, 53, 54, 55, 54, 53, 52, 51, 50, 49, 48, 47],
}
DAYS = [f"2024-01-{day:02d}" for day in (1, 2, 3, 4, 5, 8, 9, 10, 11, 12, 15, 16, 17, 18, 19)]
HEADER = "ref,forecaster,said_at,instrument,claim,horizon,given\n"


@pytest.fixture
def run(tmp_path):
    runner = CliRunner()
    ledger = tmp_path / "t.foresaid"

    def go(*args, status=0):
        result = runner.invoke(app, [*args, "--ledger", str(ledger)])
        assert result.exit_code == status, result.output
        return result

    def bring(what, text):
        path = tmp_path / f"{what}.csv"
        path.write_text(text)
        go("import", what, str(path))

    runner.invoke(app, ["new", str(ledger)])
    bring("instruments", "instrument,zone,opens,closes\nAAA,,,\nBBB,,,\n")
    rows = [
        f"{symbol},{day},{close}"
        for symbol, closes in PRICES.items()
        for day, close in zip(DAYS, closes, strict=True)
    ]
    bring("prices", "instrument,session,close\n" + "\n".join(rows) + "\n")
    bring("forecasters", "forecaster\nc.oren\n")

    def calls(*lines):
        bring("calls", HEADER + "\n".join(lines) + "\n")

    def outcomes(as_of="2024-01-19"):
        go("settle", "--as-of", as_of)
        table = csv.DictReader(io.StringIO(go("calls", "--format", "csv").stdout))
        return {row["ref"]: row for row in table}

    go.calls, go.outcomes = calls, outcomes
    return go


def test_the_clock_starts_when_the_condition_comes_true(run):
    """AAA closes above 105 first on the 9th (106); five days from there is the 14th, a Sunday,
    rolled back to the 12th: BBB 55 on the 9th, 52 on the 12th."""
    run.calls("C1,c.oren,2024-01-02,BBB,ends lower,5 days,AAA closes above 105 by 2024-01-12")
    row = run.outcomes()["C1"]
    assert row["outcome"] == "hit"
    assert (row["reference_session"], row["reference_price"]) == ("2024-01-09", "55.0")
    assert row["deadline_session"] == "2024-01-12"


def test_without_the_condition_the_same_words_would_miss(run):
    run.calls("C1,c.oren,2024-01-02,BBB,ends lower,5 days,")
    assert run.outcomes()["C1"]["outcome"] == "miss"


def test_a_condition_not_met_voids_and_an_open_one_waits(run):
    line = "C1,c.oren,2024-01-02,BBB,ends lower,5 days,AAA closes above 120 by 2024-01-12"
    run.calls(line)
    early = run.outcomes("2024-01-10")["C1"]
    assert (early["outcome"], early["reason"]) == ("open", "its condition is not decided yet")
    late = run.outcomes("2024-01-19")["C1"]
    assert (late["outcome"], late["reason"]) == ("void", "its condition was not met")
    assert late["chance"] == ""


def test_a_fixed_deadline_may_pass_before_the_condition_comes_true(run):
    run.calls(
        "C1,c.oren,2024-01-02,BBB,ends lower,2024-01-08,AAA closes above 105 by 2024-01-12"
    )
    row = run.outcomes()["C1"]
    assert row["outcome"] == "void"
    assert row["reason"] == "its condition came true after its deadline"


def test_a_plain_fact_waits_for_a_person(run):
    run.calls("C1,c.oren,2024-01-02,BBB,ends lower,5 days,fact: the dam opens by 2024-01-12")
    assert run.outcomes()["C1"]["reason"] == "its condition is not decided yet"
    args = ("--at", "2024-01-09", "--evidence", "Gazette 7, page 2", "--who", "desk")
    run("decide", "C1", "met", *args)
    row = run.outcomes()["C1"]
    assert (row["outcome"], row["reference_session"]) == ("hit", "2024-01-09")
    # settled as of a day before the fact, nobody knew
    assert run.outcomes("2024-01-08")["C1"]["outcome"] == "open"
    run("decide", "C1", "not-met", "--at", "2024-01-12", "--evidence", "Gazette 9 corrects it")
    assert run.outcomes()["C1"]["outcome"] == "void"


@pytest.mark.parametrize(
    ("args", "words"),
    [
        (("NO", "met", "--at", "2024-01-09", "--evidence", "x"), "no call 'NO'"),
        (("C2", "met", "--at", "2024-01-09", "--evidence", "x"), "no fact for a person"),
        (("C1", "met", "--at", "2023-01-09", "--evidence", "x"), "before the statement"),
        (("C1", "met", "--at", "2024-01-15", "--evidence", "x"), "it was not met"),
        (("C1", "met", "--at", "2199-01-09", "--evidence", "x"), "after today"),
        (("C1", "met", "--at", "9 January", "--evidence", "x"), "--at"),
        (("C1", "met", "--at", "2024-01-09", "--evidence", " "), "needs its evidence"),
    ],
)
def test_decisions_that_make_no_sense(run, args, words):
    run.calls(
        "C1,c.oren,2024-01-02,BBB,ends lower,5 days,fact: the dam opens by 2024-01-12",
        "C2,c.oren,2024-01-02,BBB,ends lower,5 days,",
    )
    result = run("decide", *args, status=2)
    assert words in result.stderr
