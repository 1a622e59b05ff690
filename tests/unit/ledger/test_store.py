import hashlib
import json
import sqlite3

import pytest

from foresaid.ledger import store
from foresaid.ledger.migrations import APPEND_ONLY, APPLICATION_ID, MIGRATIONS
from foresaid.ledger.store import GENESIS, Ledger, canonical
from foresaid.model.errors import LedgerError, UsageError

AT = "2025-03-14T12:00:00+00:00"


@pytest.fixture
def path(tmp_path):
    return tmp_path / "desk.foresaid"


@pytest.fixture
def ledger(path):
    with Ledger.create(path) as made:
        yield made


def columns_of(ledger, table):
    return ledger.db.execute(f'PRAGMA table_info("{table}")').fetchall()


def fill(ledger, table):
    """Put one row into a table whatever it refers to, and return a column of it."""
    values = {"id": 1, "seq": 1, "matured": 0, "met": 0, "horizon_imputed": 0}
    texts = {
        "what": "prices",
        "sha256": "a" * 64,
        "digest": "b" * 64,
        "session": "2025-03-14",
        "effective": "2025-03-14",
        "as_of": "2025-03-14",
        "sense": "direct",
        "series": "raw",
        "result": "hit",
        "not_a_call": "no date",
        "kind": "split",
    }
    row = {}
    for _, name, kind, not_null, _, in_key in columns_of(ledger, table):
        if name in values or name in texts:
            row[name] = values.get(name, texts.get(name))
        elif not_null or in_key:
            row[name] = {"TEXT": "x", "INTEGER": 1, "REAL": 1.0}[kind]
    ledger.db.execute("PRAGMA foreign_keys = OFF")
    ledger.insert(table, row)
    return next(name for name in row if name not in ("id", "seq"))


def test_a_new_ledger(path):
    with Ledger.create(path) as made:
        assert made.scalar("PRAGMA application_id") == APPLICATION_ID
        assert made.scalar("PRAGMA user_version") == len(MIGRATIONS)
        assert made.scalar("PRAGMA journal_mode") == "wal"
        assert made.scalar("PRAGMA foreign_keys") == 1
        assert made.path == path
    with Ledger.open(path) as opened:
        assert opened.scalar("SELECT count(*) FROM load") == 0


def test_a_name_that_is_taken(path):
    path.write_text("mine")
    with pytest.raises(UsageError, match="is there already"):
        Ledger.create(path)
    assert path.read_text() == "mine"


def test_a_folder_that_is_missing(tmp_path):
    with pytest.raises(UsageError, match="There is no folder"):
        Ledger.create(tmp_path / "absent" / "desk.foresaid")


def test_a_ledger_that_is_missing(path):
    with pytest.raises(LedgerError, match=r"There is no ledger at .* foresaid new"):
        Ledger.open(path)
    assert not path.exists()


@pytest.mark.parametrize("content", [b"ref,forecaster\n" * 200, b"\x00" * 4096])
def test_a_file_that_is_no_database(path, content):
    path.write_bytes(content)
    with pytest.raises(LedgerError, match=r"is not a (usable|foresaid) ledger"):
        Ledger.open(path)
    assert path.read_bytes() == content


def test_a_database_of_something_else(path):
    connection = sqlite3.connect(path)
    connection.execute("CREATE TABLE t (x)")
    connection.commit()
    connection.close()
    with pytest.raises(LedgerError, match="is not a foresaid ledger"):
        Ledger.open(path)


def test_an_empty_file_is_no_ledger(path):
    path.write_bytes(b"")
    with pytest.raises(LedgerError, match="is not a foresaid ledger"):
        Ledger.open(path)


def test_a_ledger_of_a_newer_program(path):
    with Ledger.create(path) as made:
        made.db.execute(f"PRAGMA user_version = {len(MIGRATIONS) + 1}")
    with pytest.raises(LedgerError, match="made by a newer foresaid"):
        Ledger.open(path)


@pytest.mark.parametrize("content", [b"no database at all\n" * 300, b""])
def test_a_refused_file_is_let_go_of(path, content, monkeypatch):
    made = []
    connect = store._connect

    def kept(*args, **options):
        made.append(connect(*args, **options))
        return made[-1]

    monkeypatch.setattr(store, "_connect", kept)
    path.write_bytes(content)
    with pytest.raises(LedgerError):
        Ledger.open(path)
    for connection in made:
        with pytest.raises(sqlite3.ProgrammingError, match="closed"):
            connection.execute("SELECT 1")


def test_an_older_schema_is_brought_up_to_date(path, monkeypatch):
    with Ledger.create(path):
        pass
    step = "CREATE TABLE later (x INTEGER) STRICT;\nCREATE INDEX later_x ON later (x);\n"
    monkeypatch.setattr(store, "MIGRATIONS", (*MIGRATIONS, step))
    with Ledger.open(path) as opened:
        assert opened.scalar("PRAGMA user_version") == len(MIGRATIONS) + 1
        assert opened.scalar("SELECT count(*) FROM later") == 0


def test_a_step_that_fails_leaves_the_ledger_as_it_was(path, monkeypatch):
    with Ledger.create(path):
        pass
    step = "CREATE TABLE later (x INTEGER) STRICT;\nCREATE TABLE load (x INTEGER);\n"
    monkeypatch.setattr(store, "MIGRATIONS", (*MIGRATIONS, step))
    with pytest.raises(LedgerError, match="Nothing was changed"):
        Ledger.open(path)
    monkeypatch.undo()
    with Ledger.open(path) as opened:
        assert opened.scalar("PRAGMA user_version") == len(MIGRATIONS)
        assert opened.scalar("SELECT count(*) FROM sqlite_master WHERE name = 'later'") == 0


def test_every_table_is_append_only(ledger):
    tables = ledger.db.table_names()
    assert sorted(APPEND_ONLY) == sorted(tables)


@pytest.mark.parametrize("table", APPEND_ONLY)
def test_rows_are_never_changed_or_deleted(ledger, table):
    column = fill(ledger, table)
    before = ledger.db.execute(f'SELECT * FROM "{table}"').fetchall()
    assert len(before) == 1
    for sql in (f'UPDATE "{table}" SET "{column}" = "{column}"', f'DELETE FROM "{table}"'):
        with pytest.raises(sqlite3.IntegrityError, match=f"rows of {table} are never"):
            ledger.db.execute(sql)
    assert ledger.db.execute(f'SELECT * FROM "{table}"').fetchall() == before


@pytest.mark.parametrize("table", APPEND_ONLY)
def test_tables_refuse_values_of_another_type(ledger, table):
    sql = ledger.scalar("SELECT sql FROM sqlite_master WHERE name = ?", (table,))
    assert "STRICT" in sql.rpartition(")")[2]


@pytest.mark.parametrize(
    ("changes", "told"),
    [
        ({"n_rows": "many"}, "cannot store TEXT value in INTEGER column"),
        ({"n_rows": 1.5}, "cannot store REAL value in INTEGER column"),
        ({"n_rows": -1}, "CHECK constraint failed"),
        ({"what": "letters"}, "CHECK constraint failed"),
        ({"sha256": "abc"}, "CHECK constraint failed"),
        ({"series": "adjusted"}, "CHECK constraint failed"),
        ({"file": None}, "NOT NULL constraint failed"),
    ],
)
def test_a_load_is_checked(ledger, changes, told):
    row = {
        "what": "prices",
        "file": "p.csv",
        "sha256": "0" * 64,
        "n_rows": 1,
        "loaded_at": AT,
    }
    with pytest.raises(sqlite3.IntegrityError, match=told):
        ledger.insert("load", row | changes)


def test_rows_refer_to_rows_that_are_there(ledger):
    with pytest.raises(LedgerError, match="FOREIGN KEY"), ledger.writing():
        ledger.insert("alias", {"alias": "a", "forecaster": 9})


def test_a_block_is_kept_as_a_whole_or_not_at_all(ledger, path):
    row = {"what": "calls", "file": "c.csv", "sha256": "0" * 64, "n_rows": 1, "loaded_at": AT}

    def half_way():
        with ledger.writing():
            ledger.insert("load", row)
            raise RuntimeError("stop")

    with pytest.raises(RuntimeError, match="stop"):
        half_way()
    assert ledger.scalar("SELECT count(*) FROM load") == 0
    with ledger.writing():
        assert ledger.insert("load", row) == 1
        assert ledger.insert("load", row) == 2
    with Ledger.open(path) as second:
        assert second.scalar("SELECT count(*) FROM load") == 2


def test_a_ledger_that_another_process_is_writing(ledger, path, monkeypatch):
    monkeypatch.setattr(store, "BUSY_SECONDS", 0.05)
    with Ledger.open(path) as second, ledger.writing():  # noqa: SIM117
        with pytest.raises(LedgerError, match="being written by another process"):
            with second.writing():
                raise AssertionError("must not get here")


def test_the_history_is_a_chain_that_can_be_checked_by_hand(ledger):
    with ledger.writing():
        ledger.record("import", {"file": "préis.csv", "n_rows": 3}, at=AT)
        ledger.record("settle", {"as_of": "2025-03-14"}, at=AT)
        ledger.record("settle", {}, at=AT)
    rows = ledger.db.execute(
        "SELECT seq, at, what, detail, previous, digest FROM history ORDER BY seq"
    ).fetchall()
    assert [row[0] for row in rows] == [1, 2, 3]
    previous = "0" * 64
    assert previous == GENESIS
    for seq, at, what, detail, before, digest in rows:
        assert before == previous
        text = json.dumps(
            {"seq": seq, "at": at, "what": what, "detail": detail, "previous": before},
            sort_keys=True,
            separators=(",", ":"),
            ensure_ascii=False,
        )
        assert digest == hashlib.sha256(text.encode("utf-8")).hexdigest()
        previous = digest
    assert rows[0][3] == '{"file":"préis.csv","n_rows":3}'


def test_the_hash_is_sha_256():
    # FIPS 180-4, the example of one block: SHA-256 of "abc"
    digest = hashlib.sha256(b"abc").hexdigest()
    assert digest == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"


@pytest.mark.parametrize(
    ("value", "text"),
    [
        ({"b": 1, "a": [1, 2]}, '{"a":[1,2],"b":1}'),
        ("Zürich", '"Zürich"'),
        ({"x": None, "y": True, "z": 0.5}, '{"x":null,"y":true,"z":0.5}'),
    ],
)
def test_canonical(value, text):
    assert canonical(value) == text


def test_scalars(ledger):
    assert ledger.scalar("SELECT 1, 2") == 1
    assert ledger.scalar("SELECT id FROM load") is None
    assert ledger.scalar("SELECT ?", ("x",)) == "x"


def test_a_ledger_of_the_first_schema_is_brought_up(path, monkeypatch):
    from foresaid.ledger import store

    monkeypatch.setattr(store, "MIGRATIONS", MIGRATIONS[:1])
    with Ledger.create(path) as old:
        assert old.scalar("PRAGMA user_version") == 1
        fill(old, "settlement")
    monkeypatch.undo()
    with Ledger.open(path) as opened:
        assert opened.scalar("PRAGMA user_version") == len(MIGRATIONS)
        assert opened.scalar("SELECT last_confirmation FROM settlement") == 0
        assert "loss" in [row[1] for row in columns_of(opened, "outcome")]
