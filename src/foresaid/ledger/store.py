"""Opening, making and writing a ledger file.

Every write is one immediate transaction: it is there as a whole or not at all, also when the
process is killed. Rows are only ever added; triggers refuse the rest.
"""

from __future__ import annotations

import hashlib
import json
import sqlite3
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any, Self

from sqlite_utils import Database

from foresaid.ledger.migrations import APPLICATION_ID, MIGRATIONS
from foresaid.model.errors import LedgerError, UsageError

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path

BUSY_SECONDS = 30.0
GENESIS = "0" * 64


class Ledger:
    """One open ledger file; a context manager that closes it."""

    def __init__(self, path: Path, connection: sqlite3.Connection) -> None:
        self.path = path
        self.db = Database(connection)

    @classmethod
    def create(cls, path: Path) -> Self:
        """Make an empty ledger and open it.

        Raises
        ------
        UsageError
            If something is at ``path`` already.
        LedgerError
            If the file cannot be made.
        """
        if path.exists():
            raise UsageError(f"{path} is there already; a new ledger needs a new name.")
        if not path.parent.is_dir():
            raise UsageError(f"There is no folder {path.parent} to put the ledger in.")
        ledger = cls(path, _connect(path, mode="rwc"))
        with ledger._closed_on_fault(), _told(path):
            ledger.db.execute("PRAGMA journal_mode = WAL")
            ledger.db.execute(f"PRAGMA application_id = {APPLICATION_ID}")
            ledger._migrate()
        return ledger

    @classmethod
    def open(cls, path: Path) -> Self:
        """Open a ledger, bringing its schema up to date.

        Raises
        ------
        LedgerError
            If there is no file, it is no ledger, it is damaged, or a newer program made it.
        """
        if not path.is_file():
            raise LedgerError(
                f"There is no ledger at {path}. Make one with: foresaid new {path}"
            )
        ledger = cls(path, _connect(path, mode="rw"))
        with ledger._closed_on_fault(), _told(path):
            ledger._check_kind()
            ledger._migrate()
        return ledger

    def __enter__(self) -> Self:
        return self

    def __exit__(self, _kind: object, fault: BaseException | None, _trace: object) -> None:
        """Close the ledger; what SQLite says of a damaged file becomes a ``LedgerError``."""
        self.db.close()
        if isinstance(fault, sqlite3.Error):
            with _told(self.path):
                raise fault

    @contextmanager
    def _closed_on_fault(self) -> Iterator[None]:
        try:
            yield
        except BaseException:
            self.db.close()
            raise

    def _check_kind(self) -> None:
        if self.scalar("PRAGMA application_id") != APPLICATION_ID:
            raise LedgerError(f"{self.path} is not a foresaid ledger.")
        version = self.scalar("PRAGMA user_version")
        if version > len(MIGRATIONS):
            raise LedgerError(
                f"{self.path} was made by a newer foresaid (schema {version}, this one knows "
                f"{len(MIGRATIONS)}). Use the newer program."
            )

    def _migrate(self) -> None:
        for number in range(self.scalar("PRAGMA user_version"), len(MIGRATIONS)):
            with self.writing():
                for statement in _statements(MIGRATIONS[number]):
                    self.db.execute(statement)
                self.db.execute(f"PRAGMA user_version = {number + 1}")

    @contextmanager
    def writing(self) -> Iterator[None]:
        """Run the block as one transaction that other writers wait for.

        Raises
        ------
        LedgerError
            If the file cannot be written; nothing of the block is kept.
        """
        with _told(self.path):
            self.db.execute("BEGIN IMMEDIATE")
            try:
                yield
            except BaseException:
                self.db.conn.rollback()
                raise
            self.db.execute("COMMIT")

    def scalar(self, sql: str, values: tuple[Any, ...] = ()) -> Any:  # noqa: ANN401 - one cell
        """Return the first cell of a query, None where there is no row."""
        row = self.db.execute(sql, values).fetchone()
        return None if row is None else row[0]

    def insert(self, table: str, row: dict[str, Any]) -> int:
        """Add one row and return its id."""
        names = ", ".join(f'"{name}"' for name in row)
        slots = ", ".join("?" * len(row))
        cursor = self.db.execute(
            f'INSERT INTO "{table}" ({names}) VALUES ({slots})',
            tuple(row.values()),
        )
        return int(cursor.lastrowid or 0)

    def record(self, what: str, detail: dict[str, Any], *, at: str) -> None:
        """Append an entry to the history, chained to the one before by its hash.

        The digest is the SHA-256 of the entry as JSON with sorted keys and no spaces, the
        digest of the previous entry included.
        """
        last = self.db.execute("SELECT seq, digest FROM history ORDER BY seq DESC LIMIT 1")
        seq, previous = last.fetchone() or (0, GENESIS)
        entry = {"seq": seq + 1, "at": at, "what": what, "detail": canonical(detail)}
        digest = hashlib.sha256(canonical(entry | {"previous": previous}).encode()).hexdigest()
        self.insert("history", entry | {"previous": previous, "digest": digest})


def canonical(value: object) -> str:
    """Return ``value`` as JSON with sorted keys and no spaces, non-ASCII text as it is."""
    return json.dumps(value, sort_keys=True, separators=(",", ":"), ensure_ascii=False)


def _connect(path: Path, *, mode: str) -> sqlite3.Connection:
    with _told(path):
        connection = sqlite3.connect(
            f"{path.resolve().as_uri()}?mode={mode}",
            uri=True,
            timeout=BUSY_SECONDS,
            isolation_level=None,
        )
        connection.execute("PRAGMA foreign_keys = ON")
    return connection


@contextmanager
def _told(path: Path) -> Iterator[None]:
    """Turn what SQLite says into one line about the ledger."""
    try:
        yield
    except sqlite3.OperationalError as fault:
        if "locked" in str(fault):
            raise LedgerError(
                f"{path} is being written by another process; it did not become free within "
                f"{BUSY_SECONDS:g} seconds. Nothing was changed; try again."
            ) from fault
        raise LedgerError(f"{path} cannot be used: {fault}. Nothing was changed.") from fault
    except sqlite3.IntegrityError as fault:
        raise LedgerError(
            f"{path} refuses what was to be added: {fault}. Nothing was changed."
        ) from fault
    except sqlite3.DatabaseError as fault:
        raise LedgerError(f"{path} is not a usable ledger: {fault}") from fault


def _statements(script: str) -> Iterator[str]:
    """Yield the statements of a script one by one, so that they can share a transaction."""
    held = ""
    for line in script.splitlines(keepends=True):
        held += line
        if sqlite3.complete_statement(held):
            yield held
            held = ""
