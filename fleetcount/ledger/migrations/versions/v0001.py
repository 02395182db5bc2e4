"""The first schema of the ledger."""

from __future__ import annotations

import sqlalchemy as sa
from alembic import op

revision = "0001"
down_revision = None
branch_labels = None
depends_on = None


def upgrade() -> None:
    """Make all tables."""
    key = sa.Text().with_variant(sa.Text(collation="C"), "postgresql")
    number = sa.BigInteger().with_variant(sa.Integer(), "sqlite")
    waiting, out = sa.text("state = 'waiting'"), sa.text("state = 'out'")
    op.create_table(
        "series",
        sa.Column("id", sa.Integer, primary_key=True),
        sa.Column("digest", sa.Text, nullable=False, unique=True),
        sa.Column("canonical", sa.Text, nullable=False),
        sa.Column("written", sa.Text, nullable=False),
        sa.Column("opened", sa.BigInteger, nullable=False),
        sa.Column("records", sa.BigInteger, nullable=False),
        sa.Column("head", sa.Text, nullable=False),
    )
    op.create_table(
        "leases",
        sa.Column("series", sa.Integer, sa.ForeignKey("series.id"), primary_key=True),
        sa.Column("token", sa.Text),
        sa.Column("machine", sa.Text, nullable=False),
        sa.Column("boot", sa.Text, nullable=False),
        sa.Column("pid", sa.BigInteger, nullable=False),
        sa.Column("started", sa.BigInteger, nullable=False),
        sa.Column("ends", sa.BigInteger, nullable=False),
    )
    op.create_table(
        "readings",
        sa.Column("id", sa.Integer, primary_key=True),
        sa.Column("series", sa.Integer, sa.ForeignKey("series.id"), nullable=False),
        sa.Column("reading", sa.Text, nullable=False, unique=True),
        sa.Column("purpose", sa.Text, nullable=False),
        sa.Column("method", sa.Text, nullable=False),
        sa.Column("method_version", sa.Integer, nullable=False),
        sa.Column("lengths", sa.Text, nullable=False),
        sa.Column("width", sa.Integer, nullable=False),
        sa.Column("opened", sa.BigInteger, nullable=False),
        sa.Column("finished", sa.BigInteger),
        sa.Column("number", sa.BigInteger, nullable=False),
        sa.Column("stored", sa.LargeBinary, nullable=False),
        sa.Column("checksum", sa.Text, nullable=False),
        sa.Column("link", sa.Text, nullable=False),
        sa.Column("token", sa.Text, nullable=False),
        sa.Column("accepted", sa.BigInteger, nullable=False),
        sa.UniqueConstraint("series", "number", name="readings_number"),
    )
    op.create_table(
        "units",
        sa.Column("id", number, primary_key=True),
        sa.Column("reading", sa.Integer, sa.ForeignKey("readings.id"), nullable=False),
        sa.Column("key", key, nullable=False),
        sa.Column("parent", key),
        sa.Column("factor", sa.Text, nullable=False),
        sa.Column("weight", sa.Text, nullable=False),
        sa.Column("expected", sa.Float(53), nullable=False),
        sa.Column("state", sa.Text, nullable=False),
        sa.Column("verdict", sa.Text, nullable=False),
        sa.Column("attempts", sa.Integer, nullable=False),
        sa.Column("failed_on", sa.Text, nullable=False),
        sa.Column("last_error", sa.Text),
        sa.Column("token", sa.Text),
        sa.Column("nodes", sa.BigInteger),
        sa.Column("seconds", sa.Float(53)),
        sa.UniqueConstraint("reading", "key", name="units_key"),
    )
    op.create_index(
        "units_waiting",
        "units",
        ["reading", sa.text("expected DESC"), "key"],
        sqlite_where=waiting,
        postgresql_where=waiting,
    )
    op.create_index("units_out", "units", ["reading"], sqlite_where=out, postgresql_where=out)
    op.create_table(
        "tallies",
        sa.Column("unit", number, sa.ForeignKey("units.id"), primary_key=True, autoincrement=False),
        sa.Column("series", sa.Integer, sa.ForeignKey("series.id"), nullable=False),
        sa.Column("number", sa.BigInteger, nullable=False),
        sa.Column("machine", sa.Text, nullable=False),
        sa.Column("engine", sa.Text, nullable=False),
        sa.Column("versions", sa.Text, nullable=False),
        sa.Column("started", sa.BigInteger, nullable=False),
        sa.Column("finished", sa.BigInteger, nullable=False),
        sa.Column("checksum", sa.Text, nullable=False),
        sa.Column("link", sa.Text, nullable=False),
        sa.Column("token", sa.Text, nullable=False),
        sa.Column("accepted", sa.BigInteger, nullable=False),
        sa.Column("stored", sa.LargeBinary, nullable=False),
        sa.UniqueConstraint("series", "number", name="tallies_number"),
    )
    op.create_table(
        "machines",
        sa.Column("name", key, primary_key=True),
        sa.Column("processor", sa.Text, nullable=False),
        sa.Column("system", sa.Text, nullable=False),
        sa.Column("versions", sa.Text, nullable=False),
        sa.Column("standing", sa.Text, nullable=False),
        sa.Column("first_seen", sa.BigInteger, nullable=False),
        sa.Column("last_seen", sa.BigInteger, nullable=False),
    )
    op.create_table(
        "events",
        sa.Column("id", number, primary_key=True),
        sa.Column("at", sa.BigInteger, nullable=False),
        sa.Column("series", sa.Integer, sa.ForeignKey("series.id")),
        sa.Column("kind", sa.Text, nullable=False),
        sa.Column("text", sa.Text, nullable=False),
    )
