"""A damaged ledger is named as such wherever the damage is met."""

import pytest

from foresaid.ledger import queries
from foresaid.ledger.store import Ledger
from foresaid.model.errors import LedgerError

PAGE = 4096


def test_pages_that_hold_noise_are_told_in_one_line(tmp_path):
    path = tmp_path / "t.foresaid"
    with Ledger.create(path) as ledger, ledger.writing():
        for number in range(200):
            ledger.record("import", {"number": number, "text": "x" * 200}, at="2025-01-01")
    with Ledger.open(path) as ledger:
        ledger.db.execute("PRAGMA wal_checkpoint(TRUNCATE)")
    size = path.stat().st_size
    with path.open("r+b") as file:
        file.seek(2 * PAGE)
        file.write(b"\xa5" * (size - 2 * PAGE))
    with pytest.raises(LedgerError, match=r"not a usable ledger|cannot be used"):
        _read_all(path)


def _read_all(path):
    with Ledger.open(path) as ledger:
        queries.calls(ledger)
        ledger.db.execute("SELECT count(*), max(detail) FROM history").fetchall()
