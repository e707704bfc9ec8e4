"""Opening the ledger's file: strict about durability, clear about damage."""

from __future__ import annotations

import sqlite3
from pathlib import Path

import pytest

from watcher.database import PRAGMAS, Database, LedgerUnusable
from watcher.ledger import Ledger
from watcher.ledger_entries import broken_at, seal_all
from watcher.ledger_schema import STEPS, VERSION


def test_every_pragma_is_in_force(tmp_path: Path) -> None:
    """What durability rests on reads back as it was asked for."""
    database = Database(tmp_path / "ledger.sqlite")

    got = {name: database.rows(f"PRAGMA {name}")[0][0] for name, _, _ in PRAGMAS}
    database.close()

    assert got == {
        "locking_mode": "exclusive",
        "journal_mode": "wal",
        "synchronous": 2,
        "foreign_keys": 1,
        "busy_timeout": 2000,
    }


def test_a_damaged_ledger_is_refused(tmp_path: Path) -> None:
    """A file whose pages were overwritten is refused with what to do, and stays as it is."""
    path = tmp_path / "ledger.sqlite"
    with Ledger(tmp_path) as ledger:
        for number in range(200):
            ledger.accept(f"FL-{number}.csv", f"{number:064}", 10)
    content = bytearray(path.read_bytes())
    content[8192:40960] = b"\xa5" * (40960 - 8192)
    path.write_bytes(content)

    with pytest.raises(LedgerUnusable, match=r"it is damaged .* Put the last backup"):
        Database(path)

    assert path.read_bytes() == bytes(content)


def test_a_file_that_is_no_ledger_is_refused(tmp_path: Path) -> None:
    """Any other file under the ledger's name is refused."""
    (tmp_path / "ledger.sqlite").write_text("SED-12,pass\n" * 100)

    with pytest.raises(LedgerUnusable, match="it is damaged"):
        Database(tmp_path / "ledger.sqlite")


@pytest.mark.parametrize("version", [0, VERSION + 1, 99])
def test_a_ledger_of_another_version_is_refused(tmp_path: Path, version: int) -> None:
    """A ledger of a newer program, or tables that are none of ours, are not touched."""
    path = tmp_path / "ledger.sqlite"
    with sqlite3.connect(path) as other:
        other.execute("CREATE TABLE samples (id)")
        other.execute(f"PRAGMA user_version = {version}")
    other.close()

    with pytest.raises(LedgerUnusable, match=f"it has version {version}, this program reads version {VERSION}"):
        Database(path)


@pytest.mark.parametrize("version", sorted(STEPS))
def test_an_older_ledger_becomes_one_of_this_version(tmp_path: Path, version: int) -> None:
    """A ledger that an earlier release wrote is brought up to date, keeps its rows, and has the tables of a new one."""
    path = tmp_path / "ledger.sqlite"
    with sqlite3.connect(path) as old:
        old.executescript((Path(__file__).parent / "ledgers" / f"version-{version}.sql").read_text("utf-8"))
        old.execute(
            "INSERT INTO exports (name, sha256, bytes, revision, state, accepted_at) VALUES "
            "('FL-1.csv', 'ab', 3, 2, 'done', '2026-03-02T08:00:00.000000Z')"
        )
        old.execute("INSERT INTO entries (kind, at, body) VALUES ('adopt', '2026-03-02', '{\"number\":1}')")
        old.execute("INSERT INTO entries (kind, export_id, at, body) VALUES ('accept', 1, '2026-03-02', '{}')")
        if version >= 3:  # entries have seals since then
            old.row_factory = sqlite3.Row
            seal_all(old)
        old.execute(f"PRAGMA user_version = {version}")
    old.close()

    migrated, new = Database(path), Database(tmp_path / "new.sqlite")

    def columns(database: Database) -> dict[str, set[tuple[object, ...]]]:
        tables = [row[0] for row in database.rows("SELECT name FROM sqlite_schema WHERE type = 'table'")]
        wanted = "SELECT name, type, \"notnull\", pk FROM pragma_table_info('{}')"
        return {table: {tuple(row) for row in database.rows(wanted.format(table))} for table in tables}

    assert columns(migrated) == columns(new)
    (row,) = migrated.rows("SELECT name, revision, last_revision, lent, wants FROM exports")
    lent_since_the_second = (2, "[]") if version == 1 else (None, None)
    assert tuple(row) == ("FL-1.csv", 2, *lent_since_the_second, 0)
    entries = migrated.rows("SELECT number, kind, export_id, at, body, seal FROM entries ORDER BY number")
    assert [row["body"] for row in entries] == ['{"number":1}', "{}"]
    assert broken_at(entries) is None
    migrated.close()
    again = Database(path)
    assert again.rows("PRAGMA user_version")[0][0] == VERSION
    again.close()
    new.close()


def test_a_ledger_held_by_another_connection_is_refused(tmp_path: Path) -> None:
    """Two connections never share a ledger."""
    first = Database(tmp_path / "ledger.sqlite")

    with pytest.raises(LedgerUnusable, match=r"cannot be opened \(database is locked\)"):
        Database(tmp_path / "ledger.sqlite")

    first.close()


def test_a_transaction_that_fails_leaves_nothing(tmp_path: Path) -> None:
    """An exception inside a transaction undoes all of it and the next one works."""
    database = Database(tmp_path / "ledger.sqlite")
    insert = "INSERT INTO entries (kind, at, body) VALUES (?, '', '')"

    with pytest.raises(sqlite3.IntegrityError, match="NOT NULL"), database.transaction("accept") as txn:
        txn.executemany(insert, [("lost",), (None,)])
    with database.transaction("accept") as txn:
        txn.execute(insert, ("kept",))

    assert [row["kind"] for row in database.rows("SELECT kind FROM entries")] == ["kept"]
    assert database.changes == 1
    database.close()


def test_a_ledger_removed_beside_its_copies_is_refused(tmp_path: Path) -> None:
    """A missing ledger is not made anew while copies show that there was one: everything would be mailed again."""
    (tmp_path / "copies").mkdir()
    (tmp_path / "copies" / "ab").write_bytes(b"")

    with pytest.raises(LedgerUnusable, match=r"it is missing, although .* holds copies"):
        Ledger(tmp_path)

    assert not (tmp_path / "ledger.sqlite").exists()
