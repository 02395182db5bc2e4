"""Runs the migrations on the connection that the caller hands over, in the caller's transaction."""

from __future__ import annotations

from alembic import context

from fleetcount.ledger.sql.schema import MARKER, metadata

context.configure(
    connection=context.config.attributes["connection"], target_metadata=metadata, version_table=MARKER
)
with context.begin_transaction():
    context.run_migrations()
