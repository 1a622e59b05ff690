"""A desk at the command line: small files, one ledger, and what every table of it holds."""

from __future__ import annotations

import csv
import io
import json
import shutil
import sqlite3
from contextlib import closing

from typer.testing import CliRunner

from foresaid.cli.main import app

INSTRUMENTS = """\
instrument,name,currency,zone,opens,closes,sense,kind
ORVA,Orvane Index,KOR,Europe/Vienna,09:00,17:30,direct,index
NELT,Nelt Works,KOR,Europe/Vienna,09:00,17:30,direct,share
ORY10,Orvane ten-year yield,KOR,Europe/Vienna,09:00,17:30,inverse,yield
BARE,An index without a zone,,,,,,index
"""
FORECASTERS = """\
forecaster,name,role,desk,aliases
t.mavren,Tilda Mavren,strategist,Equities,Mavren;Tilda M.
o.quist,Odo Quist,columnist,Rates,
"""
SESSIONS = (
    "2025-03-03", "2025-03-04", "2025-03-05", "2025-03-06", "2025-03-07",
    "2025-03-10", "2025-03-11", "2025-03-12", "2025-03-13", "2025-03-14",
)  # fmt: skip
CLOSES = (100, 102, 101, 105, 104, 98, 95, 97, 100, 102)
HIGHS = (101, 103, 104, 106, 107, 104, 99, 98, 101, 103)
LOWS = (98, 99, 100, 101, 103, 97, 94, 93, 96, 99)
CALL_HEADER = "ref,forecaster,said_at,instrument,claim,horizon"


def invoke(*args, status=0):
    """Run one command in this process; its exit status has to be ``status``."""
    done = CliRunner().invoke(app, [str(arg) for arg in args])
    assert done.exit_code == status, f"{args}: {done.exit_code}\n{done.output}"
    assert done.exception is None or isinstance(done.exception, SystemExit)
    assert "Traceback" not in done.output
    return done


def dump(ledger):
    """Return every row of every table of a ledger file, without opening it for writing."""
    with closing(sqlite3.connect(f"{ledger.resolve().as_uri()}?mode=ro", uri=True)) as opened:
        tables = opened.execute("SELECT name FROM sqlite_master WHERE type = 'table'")
        return {
            name: sorted(map(repr, opened.execute(f'SELECT * FROM "{name}"')))
            for (name,) in tables.fetchall()
        }


def count(ledger, table):
    """Return how many rows a table holds."""
    return len(dump(ledger)[table])


def prices_text(symbol="ORVA", *, sessions=SESSIONS, ranges=True):
    """Return a long price file of the ten sessions in docs/settlement.md."""
    if not ranges:
        rows = zip([symbol] * len(sessions), sessions, CLOSES, strict=False)
        return table_text("instrument,session,close", rows)
    rows = zip([symbol] * len(sessions), sessions, HIGHS, LOWS, CLOSES, strict=False)
    return table_text("instrument,session,high,low,close", rows)


def table_text(header, rows):
    """Return a CSV file from a header and rows of cells."""
    stream = io.StringIO()
    writer = csv.writer(stream, lineterminator="\n")
    writer.writerow(header.split(","))
    writer.writerows(rows)
    return stream.getvalue()


def csv_rows(text):
    """Return CSV text as a list of dictionaries."""
    return list(csv.DictReader(io.StringIO(text)))


class Desk:
    """One ledger and a folder of files beside it.

    The ledger is new, or a copy of another desk's, which is quicker than filling a new one.
    """

    def __init__(self, folder, *, like=None):
        self.folder = folder
        self.ledger = folder / "desk.foresaid"
        if like is None:
            invoke("new", self.ledger)
        else:
            shutil.copyfile(like.ledger, self.ledger)

    def run(self, *args, status=0):
        """Run one command on the ledger."""
        return invoke(*args, "--ledger", self.ledger, status=status)

    def file(self, name, content):
        """Write a file, text as UTF-8 with its line ends as they are."""
        path = self.folder / name
        path.write_bytes(content if isinstance(content, bytes) else content.encode())
        return path

    def bring(self, what, content, *options, name=None, status=0):
        """Write a file and import it."""
        path = self.file(name or f"{what}.csv", content)
        return self.run("import", what, path, *options, status=status)

    def stock(self, *, prices=True):
        """Bring the invented instruments, forecasters and, if wanted, prices of ORVA."""
        self.bring("instruments", INSTRUMENTS)
        self.bring("forecasters", FORECASTERS)
        if prices:
            self.bring("prices", prices_text())
        return self

    def calls(self, *rows, header=CALL_HEADER, status=0):
        """Import rows of a calls file, each a sequence of cells."""
        return self.bring("calls", table_text(header, rows), status=status)

    def settle(self, as_of="2025-03-17", *options, status=0):
        """Settle as of a day."""
        return self.run("settle", "--as-of", as_of, *options, status=status)

    def outcomes(self, as_of=None):
        """Return the listed calls by ref, settled first where a day is given."""
        if as_of is not None:
            self.settle(as_of)
        return {
            row["ref"]: row for row in csv_rows(self.run("calls", "--format", "csv").stdout)
        }

    def scores(self, by="forecaster"):
        """Return the rows of scores."""
        return json.loads(self.run("score", "--by", by, "--format", "json").stdout)

    def dump(self):
        """Return every row of every table."""
        return dump(self.ledger)

    def refuse(self, what, content, *options, status=3, name=None):
        """Import a faulty file; nothing may change. Return the messages, notes left out."""
        before = self.dump()
        done = self.bring(what, content, *options, name=name, status=status)
        assert self.dump() == before, "a refused file has changed the ledger"
        assert done.stdout == "", "talk belongs on standard error"
        return [line for line in done.stderr.splitlines() if not line.startswith("note: ")]
