"""The tables as they are after the last migration, in types that SQLite and PostgreSQL share.

A test holds them against what the migrations make. Times are whole microseconds since 1970 UTC.
"""

from __future__ import annotations

from sqlalchemy import (
    BigInteger,
    Boolean,
    Column,
    Double,
    ForeignKey,
    Index,
    Integer,
    LargeBinary,
    MetaData,
    SmallInteger,
    Table,
    Text,
)

metadata = MetaData()

# SQLite keeps a table in the order of a key that is declared INTEGER, and of no other type
_Key = BigInteger().with_variant(Integer, "sqlite")

schema_version = Table(
    "schema_version",
    metadata,
    Column("version", Integer, primary_key=True, autoincrement=False),
    Column("summary", Text, nullable=False),
)

meta = Table(
    "meta",
    metadata,
    Column("name", Text, primary_key=True),
    Column("value", Text, nullable=False),
)

layouts = Table(
    "layouts",
    metadata,
    Column("layout", Integer, primary_key=True, autoincrement=False),
)

layout_channels = Table(
    "layout_channels",
    metadata,
    Column("layout", Integer, ForeignKey("layouts.layout"), primary_key=True, autoincrement=False),
    Column("position", Integer, primary_key=True, autoincrement=False),
    Column("channel", Text, nullable=False),
    Column("step", Double, nullable=False),
)

ticks = Table(
    "ticks",
    metadata,
    Column("at_us", _Key, primary_key=True, autoincrement=False),
    Column("layout", Integer, ForeignKey("layouts.layout"), nullable=False),
    Column("packed", LargeBinary, nullable=False),
)

journal = Table(
    "journal",
    metadata,
    Column("seq", _Key, primary_key=True, autoincrement=False),
    Column("at_us", BigInteger, nullable=False),
    Column("written_us", BigInteger, nullable=False),
    Column("subject", Text, nullable=False),  # the trap or alarm that the entry is about
    Column("body", Text, nullable=False),
    Column("idempotency_key", Text, nullable=True, unique=True),  # null: none was sent
    Index("journal_at_us", "at_us"),
)

checkpoints = Table(
    "checkpoints",
    metadata,
    Column("at_us", _Key, primary_key=True, autoincrement=False),
    Column("state", LargeBinary, nullable=False),
)

transitions = Table(
    "transitions",
    metadata,
    Column("number", _Key, primary_key=True, autoincrement=True),
    Column("id", Text, nullable=False, unique=True),
    Column("at_us", BigInteger, nullable=False),
    Column("alarm", Text, nullable=False),
    Column("kind", Text, nullable=False),
    Column("source", Text, nullable=False),
    Column("state_before", Text, nullable=False),
    Column("state_after", Text, nullable=False),
    Column("priority", Text, nullable=False),
    Column("text", Text, nullable=False),
    Column("by_whom", Text, nullable=False),
    Index("transitions_at_us", "at_us"),
)

outbox = Table(
    "outbox",
    metadata,
    Column("number", _Key, primary_key=True, autoincrement=True),
    Column("id", Text, nullable=False),
    Column("topic", Text, nullable=False),
    Column("payload", LargeBinary, nullable=False),
    Column("qos", SmallInteger, nullable=False),
    Column("retain", Boolean, nullable=False),
)
