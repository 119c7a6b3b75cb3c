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

# Finished hours: a run of ticks is one row here, and one of `sealed_values` for each channel
sealed_ticks = Table(
    "sealed_ticks",
    metadata,
    Column("first_us", _Key, primary_key=True, autoincrement=False),  # the first tick of the run
    Column("last_us", BigInteger, nullable=False),
    Column("layout", Integer, ForeignKey("layouts.layout"), nullable=False),
    Column("packed", LargeBinary, nullable=False),
)

sealed_values = Table(
    "sealed_values",
    metadata,
    Column(
        "first_us",
        BigInteger,
        ForeignKey("sealed_ticks.first_us"),
        primary_key=True,
        autoincrement=False,
    ),
    Column("position", Integer, primary_key=True, autoincrement=False),
    Column("packed", LargeBinary, nullable=False),
)

# What sealed runs gave to the hours of their channels, by the readings' own times
channel_hours = Table(
    "channel_hours",
    metadata,
    Column("channel", Text, primary_key=True),
    Column("hour_us", BigInteger, primary_key=True, autoincrement=False),
    Column("run_us", BigInteger, primary_key=True, autoincrement=False),
    Column("good", Integer, nullable=False),
    Column("bad", Integer, nullable=False),
    Column("least", Double, nullable=True),
    Column("greatest", Double, nullable=True),
    Column("total", Double, nullable=False),
    Column("begins_us", BigInteger, nullable=False),
    Column("ends_us", BigInteger, nullable=False),
    Column("last_value", Double, nullable=True),
    Column("held_us", BigInteger, nullable=False),
    Column("held_total", Double, nullable=False),
    Column("sampled", Boolean, nullable=False),
    sqlite_with_rowid=False,  # kept in the key's order: a channel's year lies together
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

api_keys = Table(
    "api_keys",
    metadata,
    Column("id", Text, primary_key=True),
    Column("digest", LargeBinary, nullable=False),  # of the secret, which is kept nowhere
    Column("name", Text, nullable=False),
    Column("may", Text, nullable=False),  # "read,record"
    Column("made_us", BigInteger, nullable=False),
    Column("used_us", BigInteger, nullable=True),  # to the hour
    Column("revoked_us", BigInteger, nullable=True),
)

# What the weekly log is made of
hour_figures = Table(
    "hour_figures",
    metadata,
    Column("hour_us", _Key, primary_key=True, autoincrement=False),
    Column("figures", Text, nullable=False),
)

day_members = Table(
    "day_members",
    metadata,
    Column("day", Text, primary_key=True),
    Column("packed", LargeBinary, nullable=False),
)

drain_checks = Table(
    "drain_checks",
    metadata,
    Column("seq", _Key, primary_key=True, autoincrement=False),  # of the journal's entry
    Column("at_us", BigInteger, nullable=False),
    Column("trap", Text, nullable=False),
    Column("measured_kg", Double, nullable=False),
    Column("p05_kg", Double, nullable=False),
    Column("p50_kg", Double, nullable=False),
    Column("p95_kg", Double, nullable=False),
    Column("learned", Boolean, nullable=False),
    Index("drain_checks_at_us", "at_us"),
)

forecasts = Table(
    "forecasts",
    metadata,
    Column("made_us", BigInteger, primary_key=True, autoincrement=False),
    Column("trap", Text, primary_key=True),
    Column("p05_us", BigInteger, nullable=False),
    Column("p50_us", BigInteger, nullable=False),
    Column("p95_us", BigInteger, nullable=False),
)

forecast_scores = Table(
    "forecast_scores",
    metadata,
    Column("happened_us", BigInteger, primary_key=True, autoincrement=False),
    Column("trap", Text, primary_key=True),
    Column("made_us", BigInteger, nullable=False),
    Column("p05_us", BigInteger, nullable=False),
    Column("p50_us", BigInteger, nullable=False),
    Column("p95_us", BigInteger, nullable=False),
)
