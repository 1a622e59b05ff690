"""Calls stated in another currency than the instrument's, through the command line."""

import csv
import io

import pytest
from typer.testing import CliRunner

from foresaid.cli.main import app

INSTRUMENTS = """instrument,kind,currency,base,term
METAL,commodity,KOR,,
KORVEL,pair,VEL,KOR,VEL
VELTAN,pair,VEL,TAN,KOR
"""
# invented: the metal in KOR; one KOR in VEL; one TAN in KOR (so KOR to TAN divides)
PRICES = """instrument,session,close
METAL,2024-01-01,100
METAL,2024-01-02,101
METAL,2024-01-03,102
METAL,2024-01-04,103
KORVEL,2024-01-01,2.0
KORVEL,2024-01-02,2.0
KORVEL,2024-01-04,1.9
VELTAN,2024-01-01,4.0
VELTAN,2024-01-04,5.0
"""


@pytest.fixture
def rows(tmp_path):
    runner = CliRunner()
    ledger = str(tmp_path / "t.foresaid")

    def settled(*lines):
        files = {
            "instruments": INSTRUMENTS,
            "prices": PRICES,
            "forecasters": "forecaster\nc.oren\n",
            "calls": "ref,forecaster,said_at,instrument,claim,horizon,currency\n"
            + "\n".join(lines)
            + "\n",
        }
        runner.invoke(app, ["new", ledger])
        for what, text in files.items():
            path = tmp_path / f"{what}.csv"
            path.write_text(text)
            done = runner.invoke(app, ["import", what, str(path), "--ledger", ledger])
            assert done.exit_code == 0, done.output
        done = runner.invoke(app, ["settle", "--as-of", "2024-01-05", "--ledger", ledger])
        assert done.exit_code == 0, done.output
        shown = runner.invoke(app, ["calls", "--format", "csv", "--ledger", ledger])
        trace = runner.invoke(app, ["trace", "C1", "--ledger", ledger])
        assert trace.exit_code == 0, trace.output
        return {r["ref"]: r for r in csv.DictReader(io.StringIO(shown.stdout))}, trace.output

    return settled


def test_a_level_in_another_currency_is_judged_on_converted_prices(rows):
    """103 KOR at 1.9 are 195.7 VEL, below the 200 of the start: higher in one, lower in the
    other. On the 3rd the pair has no session: its close of the 2nd counts."""
    found, trace = rows(
        "C1,c.oren,2024-01-01,METAL,ends below 200,2024-01-04,VEL",
        "C2,c.oren,2024-01-01,METAL,ends higher,2024-01-04,VEL",
        "C3,c.oren,2024-01-01,METAL,ends higher,2024-01-04,",
        "C4,c.oren,2024-01-01,METAL,closes above 203.9,2024-01-04,VEL",
        "C5,c.oren,2024-01-01,METAL,ends higher,2024-01-04,KOR",
    )
    assert {ref: row["outcome"] for ref, row in found.items()} == {
        "C1": "hit",
        "C2": "miss",
        "C3": "hit",
        "C4": "hit",
        "C5": "hit",
    }
    assert float(found["C1"]["reference_price"]) == 200.0
    assert float(found["C1"]["decided_price"]) == pytest.approx(195.7, rel=1e-12)
    assert found["C4"]["decided_session"] == "2024-01-03"
    assert "currency converted" in found["C1"]["flags"]
    assert "currency converted" not in found["C5"]["flags"]
    assert "METAL in VEL" in trace


def test_a_pair_quoted_the_other_way_round_divides(rows):
    """100 KOR at 4 KOR for one TAN are 25 TAN; 103 at 5 are 20.6."""
    found, _ = rows("C1,c.oren,2024-01-01,METAL,ends at most 20.6,2024-01-04,TAN")
    assert found["C1"]["outcome"] == "hit"
    assert float(found["C1"]["reference_price"]) == 25.0


def test_without_a_pair_the_call_stays_open_with_the_reason(rows):
    found, _ = rows("C1,c.oren,2024-01-01,METAL,ends above 5,2024-01-04,ZZZ")
    assert found["C1"]["outcome"] == "open"
    assert "no pair converts" in found["C1"]["reason"]
