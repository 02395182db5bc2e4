"""The tables. They are made and changed by the migrations alone; a test holds the two equal.

Times are integer microseconds UTC. Factors and weights are decimal text, since they may have any size. Keys
compare by their bytes on every database. A unit's `nodes` and `seconds` stand beside its state, so that
looking at a reading reads one table and none of the long texts.
"""

from __future__ import annotations

from typing import Any

from sqlalchemy import (
    BigInteger,
    Column,
    Float,
    ForeignKey,
    Index,
    Integer,
    LargeBinary,
    MetaData,
    Table,
    Text,
    UniqueConstraint,
    text,
)
from sqlalchemy.ext.compiler import compiles
from sqlalchemy.sql.functions import FunctionElement

VERSIONS = ("0001",)
"""The versions of the schema, the present one last. An older one is upgraded on request only."""

MARKER = "fleetcount_schema"
"""The table that says that a database is a ledger, and of which version."""

metadata = MetaData()

_Key = Text().with_variant(Text(collation="C"), "postgresql")
_Id = BigInteger().with_variant(Integer(), "sqlite")

series = Table(
    "series",
    metadata,
    Column("id", Integer, primary_key=True),
    Column("digest", Text, nullable=False, unique=True),
    Column("canonical", Text, nullable=False),
    Column("written", Text, nullable=False),
    Column("opened", BigInteger, nullable=False),
    Column("records", BigInteger, nullable=False),
    Column("head", Text, nullable=False),
)

leases = Table(
    "leases",
    metadata,
    Column("series", Integer, ForeignKey("series.id"), primary_key=True),
    Column("token", Text),
    Column("machine", Text, nullable=False),
    Column("boot", Text, nullable=False),
    Column("pid", BigInteger, nullable=False),
    Column("started", BigInteger, nullable=False),
    Column("ends", BigInteger, nullable=False),
)

readings = Table(
    "readings",
    metadata,
    Column("id", Integer, primary_key=True),
    Column("series", Integer, ForeignKey("series.id"), nullable=False),
    Column("reading", Text, nullable=False, unique=True),
    Column("purpose", Text, nullable=False),
    Column("method", Text, nullable=False),
    Column("method_version", Integer, nullable=False),
    Column("lengths", Text, nullable=False),
    Column("width", Integer, nullable=False),
    Column("opened", BigInteger, nullable=False),
    Column("finished", BigInteger),
    Column("number", BigInteger, nullable=False),
    Column("stored", LargeBinary, nullable=False),
    Column("checksum", Text, nullable=False),
    Column("link", Text, nullable=False),
    Column("token", Text, nullable=False),
    Column("accepted", BigInteger, nullable=False),
    UniqueConstraint("series", "number", name="readings_number"),
)

units = Table(
    "units",
    metadata,
    Column("id", _Id, primary_key=True),
    Column("reading", Integer, ForeignKey("readings.id"), nullable=False),
    Column("key", _Key, nullable=False),
    Column("parent", _Key),
    Column("factor", Text, nullable=False),
    Column("weight", Text, nullable=False),
    Column("expected", Float(53), nullable=False),
    Column("state", Text, nullable=False),
    Column("verdict", Text, nullable=False),
    Column("attempts", Integer, nullable=False),
    Column("failed_on", Text, nullable=False),
    Column("last_error", Text),
    Column("token", Text),
    Column("nodes", BigInteger),
    Column("seconds", Float(53)),
    UniqueConstraint("reading", "key", name="units_key"),
)
Index(
    "units_waiting",
    units.c.reading,
    units.c.expected.desc(),
    units.c.key,
    sqlite_where=text("state = 'waiting'"),
    postgresql_where=text("state = 'waiting'"),
)
Index(
    "units_out",
    units.c.reading,
    sqlite_where=text("state = 'out'"),
    postgresql_where=text("state = 'out'"),
)

tallies = Table(
    "tallies",
    metadata,
    Column("unit", _Id, ForeignKey("units.id"), primary_key=True, autoincrement=False),
    Column("series", Integer, ForeignKey("series.id"), nullable=False),
    Column("number", BigInteger, nullable=False),
    Column("machine", Text, nullable=False),
    Column("engine", Text, nullable=False),
    Column("versions", Text, nullable=False),
    Column("started", BigInteger, nullable=False),
    Column("finished", BigInteger, nullable=False),
    Column("checksum", Text, nullable=False),
    Column("link", Text, nullable=False),
    Column("token", Text, nullable=False),
    Column("accepted", BigInteger, nullable=False),
    Column("stored", LargeBinary, nullable=False),
    UniqueConstraint("series", "number", name="tallies_number"),
)

machines = Table(
    "machines",
    metadata,
    Column("name", _Key, primary_key=True),
    Column("processor", Text, nullable=False),
    Column("system", Text, nullable=False),
    Column("versions", Text, nullable=False),
    Column("standing", Text, nullable=False),
    Column("first_seen", BigInteger, nullable=False),
    Column("last_seen", BigInteger, nullable=False),
)

events = Table(
    "events",
    metadata,
    Column("id", _Id, primary_key=True),
    Column("at", BigInteger, nullable=False),
    Column("series", Integer, ForeignKey("series.id")),
    Column("kind", Text, nullable=False),
    Column("text", Text, nullable=False),
)


class now(FunctionElement[int]):  # noqa: N801  a function of SQL
    """The clock of the database, in microseconds UTC."""

    inherit_cache = True
    type = BigInteger()


@compiles(now, "sqlite")
def _now_sqlite(element: now, compiler: Any, **options: Any) -> str:
    seconds, thousandths = "strftime('%s','now')", "substr(strftime('%f','now'),4,3)"
    return f"(CAST({seconds} AS INTEGER)*1000000 + CAST({thousandths} AS INTEGER)*1000)"


@compiles(now, "postgresql")
def _now_postgresql(element: now, compiler: Any, **options: Any) -> str:
    return "CAST(extract(epoch FROM clock_timestamp())*1000000 AS BIGINT)"
