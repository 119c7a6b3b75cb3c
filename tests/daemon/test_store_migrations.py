"""The database's versions: what each made stays, upgrades keep the data, newer ones are refused."""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator
from contextlib import closing
from pathlib import Path

import pytest
from sqlalchemy import Connection, MetaData, Table, UniqueConstraint
from sqlalchemy.dialects.sqlite import dialect

from daemon.errors import StoreError
from daemon.journal import Drain
from daemon.store import sqlite
from daemon.store.database import Database
from daemon.store.migrations import MIGRATIONS, Migration, upgrade, version_of
from daemon.store.store import Store
from daemon.store.tables import metadata
from sensors.reading import Channel, Reading

# A database as version 1 made it, written down by hand: it must open for ever.
VERSION_1 = """
CREATE TABLE schema_version (version INTEGER NOT NULL PRIMARY KEY, summary TEXT NOT NULL);
CREATE TABLE meta (name TEXT NOT NULL PRIMARY KEY, value TEXT NOT NULL);
CREATE TABLE layouts (layout INTEGER NOT NULL PRIMARY KEY);
CREATE TABLE layout_channels (layout INTEGER NOT NULL REFERENCES layouts (layout),
    position INTEGER NOT NULL, channel TEXT NOT NULL, step DOUBLE NOT NULL,
    PRIMARY KEY (layout, position));
CREATE TABLE ticks (at_us INTEGER NOT NULL PRIMARY KEY,
    layout INTEGER NOT NULL REFERENCES layouts (layout), packed BLOB NOT NULL);
CREATE TABLE journal (seq INTEGER NOT NULL PRIMARY KEY, at_us BIGINT NOT NULL,
    written_us BIGINT NOT NULL, subject TEXT NOT NULL, body TEXT NOT NULL,
    idempotency_key TEXT UNIQUE);
CREATE INDEX journal_at_us ON journal (at_us);
CREATE TABLE checkpoints (at_us INTEGER NOT NULL PRIMARY KEY, state BLOB NOT NULL);
CREATE TABLE transitions (number INTEGER NOT NULL PRIMARY KEY, id TEXT NOT NULL UNIQUE,
    at_us BIGINT NOT NULL, alarm TEXT NOT NULL, kind TEXT NOT NULL, source TEXT NOT NULL,
    state_before TEXT NOT NULL, state_after TEXT NOT NULL, priority TEXT NOT NULL,
    text TEXT NOT NULL, by_whom TEXT NOT NULL);
CREATE INDEX transitions_at_us ON transitions (at_us);
CREATE TABLE outbox (number INTEGER PRIMARY KEY AUTOINCREMENT NOT NULL, id TEXT NOT NULL,
    topic TEXT NOT NULL, payload BLOB NOT NULL, qos SMALLINT NOT NULL, retain BOOLEAN NOT NULL);
INSERT INTO schema_version VALUES (1, 'first tables');
INSERT INTO layouts VALUES (1);
INSERT INTO layout_channels VALUES (1, 0, 'tank-gauge.pressure', 10.0), (1, 1, 'm.contact', 1.0);
INSERT INTO ticks VALUES (1000, 1, x'010060ea000001000000'),
    (2000, 1,
     x'0102000000800000000001000000000000000000fdffffffffffffff000000000000f87f030000006f6666');
INSERT INTO journal VALUES (1, 900, 950, 'tank',
    '{"by": "AM", "kind": "drain", "look": "clear", "outcome": "emptied", "trap": "tank",
      "volume_kg": 0.38}', 'a1');
INSERT INTO checkpoints VALUES (1000, x'00ff');
INSERT INTO transitions VALUES (1, 't/1', 1000, 'tank-drain-due', 'drain-due', 'tank', 'normal',
    'unacknowledged', 'medium', 'drain it', '');
INSERT INTO outbox VALUES (7, 't/1', 'dripleg/alder-yard/events', x'7b7d', 1, 0);
INSERT INTO meta VALUES ('grid_us', '1000');
"""
CHANNELS = {
    "tank-gauge.pressure": Channel("tank-gauge.pressure", "pressure", 10.0, 0.0, 1.2e6, 6000.0),
    "m.contact": Channel("m.contact", "contact", 1.0, 0.0, 1.0, 0.0),
}


@pytest.fixture
def old(tmp_path: Path) -> Path:
    """A database of version 1."""
    path = tmp_path / "old.db"
    with closing(sqlite3.connect(path)) as connection:
        connection.executescript(VERSION_1)
    return path


@pytest.fixture
def database(tmp_path: Path) -> Iterator[Database]:
    """An empty database."""
    opened = sqlite.connect(tmp_path / "new.db")
    yield opened
    opened.close()


def schema(path: Path) -> dict[str, dict[str, object]]:
    """The tables of a database in words that can be compared."""
    database = sqlite.connect(path)
    found = MetaData()
    with database.read() as connection:
        found.reflect(connection)
    database.close()
    return {table.name: described(table) for table in found.sorted_tables}


def described(table: Table) -> dict[str, object]:
    columns = {
        column.name: (column.type.compile(dialect=dialect()), column.nullable)
        for column in table.columns
    }
    return {
        "columns": columns,
        "key": [column.name for column in table.primary_key],
        "refers to": sorted(key.target_fullname for key in table.foreign_keys),
        "indexes": sorted((str(each.name), *each.columns.keys()) for each in table.indexes),
        "unique": sorted(
            tuple(each.columns.keys())
            for each in table.constraints
            if isinstance(each, UniqueConstraint)
        ),
    }


def test_the_first_version_makes_what_it_always_made(old: Path, database: Database) -> None:
    upgrade(database, MIGRATIONS[:1])
    assert schema(Path(database.where)) == schema(old)


def test_the_tables_are_as_the_migrations_make_them(database: Database) -> None:
    upgrade(database)
    expected = {table.name: described(table) for table in metadata.sorted_tables}
    assert schema(Path(database.where)) == expected


def test_a_database_of_the_first_version_opens_with_all_that_was_in_it(old: Path) -> None:
    with Store.open(old, CHANNELS) as store:
        (first_us, first), (second_us, second) = store.ticks(0, 5000)
        assert (first_us, first) == (
            1000,
            [
                Reading("tank-gauge.pressure", 600_000.0, 1000),
                Reading("m.contact", 1.0, 1000),
            ],
        )
        assert (second_us, [reading.fault for reading in second]) == (2000, ["off", ""])
        assert second[0].time_us == 1997
        (entry,) = store.entries()
        assert entry.body == Drain("tank", "emptied", 0.38, "AM", "clear")
        assert (entry.at_us, entry.written_us, entry.key) == (900, 950, "a1")
        assert store.checkpoint_before(1000) == (1000, b"\x00\xff")
        (transition,) = store.transitions(0, 5000)
        assert (transition.id, transition.after) == ("t/1", "unacknowledged")
        (waiting,) = store.pending(10)
        assert (waiting.number, waiting.message.payload) == (7, b"{}")
        assert store.get_meta("grid_us") == "1000"
        store.commit_tick(3000, [Reading("m.contact", 0.0, 3000)])


def add_remark(connection: Connection) -> None:
    connection.exec_driver_sql("ALTER TABLE journal ADD COLUMN remark TEXT NOT NULL DEFAULT ''")
    connection.exec_driver_sql("UPDATE journal SET remark = 'by ' || subject")


INVENTED = (*MIGRATIONS, Migration(MIGRATIONS[-1].version + 1, "an invented remark", add_remark))


def test_an_upgrade_keeps_the_data_and_is_done_once(old: Path) -> None:
    database = sqlite.connect(old)
    upgrade(database, INVENTED)
    upgrade(database, INVENTED)
    with database.read() as connection:
        assert version_of(connection) == INVENTED[-1].version
        rows = connection.exec_driver_sql("SELECT seq, subject, remark FROM journal").all()
        told = connection.exec_driver_sql("SELECT summary FROM schema_version").scalars().all()
    database.close()
    assert [tuple(row) for row in rows] == [(1, "tank", "by tank")]
    assert told == [migration.summary for migration in INVENTED]


def test_an_upgrade_that_fails_leaves_the_version_before_it(old: Path) -> None:
    def fails(connection: Connection) -> None:
        add_remark(connection)
        connection.exec_driver_sql("CREATE TABLE extra (x INTEGER)")
        connection.exec_driver_sql("INSERT INTO nowhere VALUES (1)")

    database = sqlite.connect(old)
    upgrade(database)
    before = schema(old)
    with pytest.raises(StoreError, match="no such table: nowhere"):
        upgrade(database, (*MIGRATIONS, Migration(99, "fails", fails)))
    with database.read() as connection:
        assert version_of(connection) == MIGRATIONS[-1].version
    database.close()
    assert schema(old) == before


def test_a_database_of_a_newer_program_is_refused(old: Path) -> None:
    database = sqlite.connect(old)
    upgrade(database, INVENTED)
    database.close()
    known = MIGRATIONS[-1].version
    with pytest.raises(
        StoreError,
        match=rf"old\.db: .*version {known + 1}.*newer dripleg.*up to {known}.*Install the newer",
    ):
        Store.open(old, CHANNELS)


def test_versions_go_up_by_one_from_one() -> None:
    assert [each.version for each in MIGRATIONS] == list(range(1, len(MIGRATIONS) + 1))
