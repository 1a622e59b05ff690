"""Settlement cases worked by hand, kept as data and run through the command line.

Each case of `cases/*.toml` says in words what was stated, which convention decides it and which
wrong answer is tempting. Its instruments carry their prices: `rows` with the columns named in
`columns` (`session, close` where none are), or a `start` with `closes` on the weekdays from it
(`days = "all"`: on every day), less the `closed` days; `[100, 3]` stands for three closes of
100. `highs`, `lows`, `totals` and `volumes` stand beside the closes. Instruments under `shared`
belong to every case of their file. The closing time of a venue is `closes_at`.
"""

import csv
import io
import re
import tomllib
from datetime import date, timedelta
from pathlib import Path

import pytest
from typer.testing import CliRunner

from foresaid.claims.phrases import parse_claim
from foresaid.claims.registry import KINDS
from foresaid.cli.main import app
from foresaid.model.codebook import default_codebook
from foresaid.pipeline.conditions import NOT_MET, TOO_LATE, UNDECIDED
from foresaid.pipeline.world import OTHER_CURRENCIES, OTHER_CURRENCY
from foresaid.settle.outcomes import PRICE_QUERY, UNCOUNTABLE
from foresaid.settle.windows import REASONS

HERE = Path(__file__).parent
SETTLEMENT = HERE.parents[1] / "docs" / "settlement.md"
PRICE_KEYS = {"start", "days", "closed", "closes", "highs", "lows", "totals", "volumes"}
PRICE_KEYS |= {"rows", "columns"}
OTHER_KEYS = {"series", "actions"}
CASE_KEYS = {
    "name",
    "says",
    "rule",
    "tempting",
    "work",
    "source",
    "as_of",
    "call",
    "expect",
} | {
    "instruments",
    "decisions",
    "confirmed",
    "codebook",
}


def _load():
    cases = []
    for path in sorted((HERE / "cases").glob("*.toml")):
        held = tomllib.loads(path.read_text(encoding="utf-8"))
        for case in held["case"]:
            instruments = held.get("shared", {}) | case.get("instruments", {})
            cases.append(case | {"instruments": instruments, "file": path.stem})
    return cases


CASES = _load()


# --------------------------------------------------------------------------- cases to files
def _sessions(thing):
    day, closed = thing["start"], set(thing.get("closed", []))
    while True:
        if day not in closed and (thing.get("days") == "all" or day.weekday() < 5):
            yield day
        day += timedelta(days=1)


def _unrolled(closes):
    for one in closes:
        value, times = one if isinstance(one, list) else (one, 1)
        yield from [value] * times


def _price_rows(thing):
    """Return the price rows of one instrument as dictionaries."""
    if "rows" in thing:
        names = thing.get("columns", ["session", "close"])
        return [dict(zip(names, row, strict=True)) for row in thing["rows"]]
    closes = list(_unrolled(thing.get("closes", [])))
    columns = {"close": closes}
    for name in ("high", "low", "total", "volume"):
        if f"{name}s" in thing:
            columns[name] = list(_unrolled(thing[f"{name}s"]))
            assert len(columns[name]) == len(closes)
    days = _sessions(thing) if closes else iter(())
    return [
        {"session": next(days), **dict(zip(columns, row, strict=True))}
        for row in zip(*columns.values(), strict=True)
    ]


def _csv(rows):
    names = list(dict.fromkeys(name for row in rows for name in row))
    text = io.StringIO()
    table = csv.DictWriter(text, names, lineterminator="\n")
    table.writeheader()
    table.writerows(rows)
    return text.getvalue()


def _files(case):
    """Return the files of a case in the order of their import: what, arguments, text."""
    things = case["instruments"]
    plain = [
        {"instrument": symbol}
        | {
            "closes" if k == "closes_at" else k: v
            for k, v in thing.items()
            if k not in PRICE_KEYS | OTHER_KEYS
        }
        for symbol, thing in things.items()
    ]
    yield "instruments", (), _csv(plain)
    for series in ("raw", "split-adjusted", "total-return"):
        rows = [
            {"instrument": symbol} | row
            for symbol, thing in things.items()
            if thing.get("series", "raw") == series
            for row in _price_rows(thing)
        ]
        if rows:
            yield "prices", ("--series", series), _csv(rows)
    actions = [
        {"instrument": symbol} | action
        for symbol, thing in things.items()
        for action in thing.get("actions", [])
    ]
    if actions:
        yield "actions", (), _csv(actions)
    yield "forecasters", (), "forecaster\nm.tarn\n"
    yield "calls", (), _csv([{"ref": "W-1", "forecaster": "m.tarn"} | case["call"]])


class Ledger:
    """One ledger, filled and asked through the command line."""

    def __init__(self, folder):
        self.folder, self.path = folder, str(folder / "case.foresaid")
        self.runner = CliRunner()

    def run(self, *args):
        done = self.runner.invoke(app, [*args, "--ledger", self.path])
        assert done.exit_code == 0, done.output
        return done.stdout

    def fill(self, case, *book):
        assert self.runner.invoke(app, ["new", self.path]).exit_code == 0
        for what, extra, text in _files(case):
            path = self.folder / f"{what}{len(list(self.folder.iterdir()))}.csv"
            path.write_text(text, encoding="utf-8")
            self.run("import", what, str(path), *extra, *book)


def _codebook(case, folder):
    """Return the arguments for the default codebook with the replacements of a case."""
    if "codebook" not in case:
        return ()
    text = default_codebook().source
    for change in case["codebook"]:
        assert text.count(change["old"]) == 1
        text = text.replace(change["old"], change["new"])
    path = folder / "book.toml"
    path.write_text(text, encoding="utf-8")
    return "--codebook", str(path)


def _settled(case, folder):
    """Return the row of the list of calls, and the trace as one line."""
    ledger, book = Ledger(folder), _codebook(case, folder)
    ledger.fill(case, *book)
    for one in case.get("decisions", []):
        known = ("--at", one["at"], "--evidence", one["evidence"])
        ledger.run("decide", "W-1", one["answer"], *known)
    for symbol, session in case.get("confirmed", []):
        ledger.run("confirm", symbol, str(session), "--evidence", "the exchange's bulletin")
    ledger.run("settle", "--as-of", str(case["as_of"]), *book)
    (row,) = csv.DictReader(io.StringIO(ledger.run("calls", "--format", "csv")))
    return row, " ".join(ledger.run("trace", "W-1").split())


# --------------------------------------------------------------------------------- the tests
def _compare(row, expected):
    """Return what differs from the expectation, as column: (found, expected)."""
    differ = {}
    for column, wanted in expected.items():
        if column in ("flags", "without"):
            flags = set(row["flags"].split("; "))
            ok = set(wanted) <= flags if column == "flags" else not set(wanted) & flags
            if not ok:
                differ[column] = (row["flags"], wanted)
        elif isinstance(wanted, (int, float)):
            found = float(row[column]) if row[column] else None
            if found is None or found != pytest.approx(wanted, rel=1e-9, abs=1e-12):
                differ[column] = (row[column], wanted)
        elif row[column] != str(wanted):
            differ[column] = (row[column], str(wanted))
    return differ


@pytest.mark.parametrize("case", CASES, ids=[f"{c['file']}: {c['name']}" for c in CASES])
def test_a_case_settles_as_worked_by_hand(case, tmp_path):
    row, text = _settled(case, tmp_path)
    assert _compare(row, case["expect"]) == {}, case["rule"]
    assert row["outcome"] in text
    for column in ("reference_session", "decided_session", "reason"):
        assert row[column] in text, column


def test_every_case_is_explained():
    for case in CASES:
        assert set(case) <= CASE_KEYS | {"file"}, case["name"]
        for part in ("says", "rule", "tempting"):
            assert len(case[part].split()) > 5, (case["name"], part)
        assert "outcome" in case["expect"], case["name"]
        assert isinstance(case["as_of"], date), case["name"]
    names = [(case["file"], case["name"]) for case in CASES]
    assert len(set(names)) == len(names)


def test_there_are_enough_cases_and_each_kind_of_claim_is_among_them():
    assert len(CASES) >= 60
    # a void or open call says less of its kind than one that was judged
    judged = [case for case in CASES if case["expect"]["outcome"] in ("hit", "miss")]
    assert set(KINDS) == {parse_claim(case["call"]["claim"]).kind for case in judged}


def test_every_reason_for_an_open_or_void_call_is_among_them():
    listed = re.findall(
        r"^\| (open|void) \| `([^`]+)` \|", SETTLEMENT.read_text(), re.MULTILINE
    )
    worked = {(case["expect"]["outcome"], case["expect"].get("reason")) for case in CASES}
    assert set(listed) <= worked
    own = {*REASONS[1:], NOT_MET, TOO_LATE, UNDECIDED, OTHER_CURRENCY, OTHER_CURRENCIES}
    own |= {PRICE_QUERY, UNCOUNTABLE}
    assert own <= {reason for _, reason in worked}
