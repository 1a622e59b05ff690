"""Corrected prices re-settle into a new vintage; the old result stays readable."""

import csv
import io
import sqlite3

from typer.testing import CliRunner

from foresaid.cli.main import app

CALL = (
    "ref,forecaster,said_at,instrument,claim,horizon\n"
    "C1,c.oren,2024-01-01,AAA,ends above 102,2 days\n"
)


def test_a_corrected_price_changes_a_result_and_says_so(tmp_path):
    runner, ledger = CliRunner(), str(tmp_path / "t.foresaid")

    def run(*args, status=0):
        done = runner.invoke(app, [*args, "--ledger", ledger])
        assert done.exit_code == status, done.output
        return done

    def bring(what, name, text):
        (tmp_path / name).write_text(text)
        return run("import", what, str(tmp_path / name))

    runner.invoke(app, ["new", ledger])
    bring("instruments", "i.csv", "instrument\nAAA\n")
    rows = ["AAA,2024-01-01,100", "AAA,2024-01-02,101", "AAA,2024-01-03,103"]
    bring("prices", "first.csv", "\n".join(["instrument,session,close", *rows]) + "\n")
    bring("forecasters", "f.csv", "forecaster\nc.oren\n")
    bring("calls", "c.csv", CALL)
    run("settle", "--as-of", "2024-01-10")

    def outcome():
        table = csv.DictReader(io.StringIO(run("calls", "--format", "csv").stdout))
        return next(table)["outcome"]

    assert outcome() == "hit"
    rows[-1] = "AAA,2024-01-03,101.5"
    done = bring("prices", "second.csv", "\n".join(["instrument,session,close", *rows]) + "\n")
    assert "1 row of prices added, 2 already in the ledger" in done.stderr
    changed = run("settle", "--as-of", "2024-01-10", "--changes", "--format", "csv")
    assert list(csv.DictReader(io.StringIO(changed.stdout))) == [
        {"ref": "C1", "before": "hit", "after": "miss", "because": "other prices or actions"}
    ]
    assert outcome() == "miss"
    assert "second.csv" in run("trace", "C1").stdout
    # the vintage before the correction settles as it did, from the first file
    run("settle", "--as-of", "2024-01-10", "--vintage", "2")
    assert outcome() == "hit"
    assert "first.csv" in run("trace", "C1").stdout
    assert "no price vintage 99" in run("settle", "--vintage", "99", status=2).stderr
    with sqlite3.connect(ledger) as opened:
        kept = opened.execute(
            "SELECT vintage, result FROM outcome JOIN settlement ON id = settlement"
        )
        assert kept.fetchall() == [(2, "hit"), (5, "miss"), (2, "hit")]
    opened.close()
