"""Withdrawn calls, through the command line."""

import csv
import io
import json

import pytest
from typer.testing import CliRunner

from foresaid.cli.main import app

CALLS = """ref,forecaster,said_at,instrument,claim,horizon
C1,c.oren,2024-01-01,AAA,ends higher,2 days
C2,c.oren,2024-01-01,AAA,ends lower,2 days
"""


@pytest.fixture
def run(tmp_path):
    runner, ledger = CliRunner(), str(tmp_path / "t.foresaid")

    def go(*args, status=0):
        done = runner.invoke(app, [*args, "--ledger", ledger])
        assert done.exit_code == status, done.output
        return done

    runner.invoke(app, ["new", ledger])
    files = {
        "instruments": "instrument\nAAA\n",
        "prices": "instrument,session,close\nAAA,2024-01-01,100\nAAA,2024-01-03,101\n",
        "forecasters": "forecaster\nc.oren\n",
        "calls": CALLS,
    }
    for what, text in files.items():
        (tmp_path / f"{what}.csv").write_text(text)
        go("import", what, str(tmp_path / f"{what}.csv"))
    return go


def test_a_withdrawn_call_is_marked_and_still_counts(run):
    run("withdraw", "C2", "--at", "2024-01-02", "--why", "a slip", "--who", "desk")
    run("settle", "--as-of", "2024-01-10")
    rows = csv.DictReader(io.StringIO(run("calls", "--format", "csv").stdout))
    found = {
        row["ref"]: (row["outcome"], row["withdrawn_at"], row["withdrawn_why"]) for row in rows
    }
    assert found == {"C1": ("hit", "", ""), "C2": ("miss", "2024-01-02", "a slip")}
    (score,) = json.loads(run("score", "--format", "json").stdout)
    assert (score["n"], score["hits"]) == (2, 1)
    assert (score["withdrawn_n"], score["withdrawn_hits"]) == (1, 0)
    assert "0 of 1" in run("score").stdout
    assert "on 2024-01-02 (a slip)" in run("trace", "C2").stdout


@pytest.mark.parametrize(
    ("args", "words"),
    [
        (("NO", "--at", "2024-01-02", "--why", "x"), "no call 'NO'"),
        (("C1", "--at", "2023-01-02", "--why", "x"), "before the statement"),
        (("C1", "--at", "2198-01-02", "--why", "x"), "after today"),
        (("C1", "--at", "soon", "--why", "x"), "--at"),
        (("C1", "--at", "2024-01-02", "--why", " "), "needs its reason"),
    ],
)
def test_withdrawals_that_make_no_sense(run, args, words):
    assert words in run("withdraw", *args, status=2).stderr


def test_a_call_is_withdrawn_once(run):
    run("withdraw", "C2", "--at", "2024-01-02", "--why", "a slip")
    again = run("withdraw", "C2", "--at", "2024-01-03", "--why", "again", status=2)
    assert "withdrawn on 2024-01-02 already" in again.stderr
