"""The version of a ledger's schema: looked at on opening, made for a new ledger, upgraded on request."""

from __future__ import annotations

import sqlalchemy as sa

from fleetcount.errors import LedgerError
from fleetcount.ledger.sql import schema
from fleetcount.ledger.sql.engine import Database
from fleetcount.ledger.sql.place import Place

_MAKING = 7_283_646_574
"""Number of the lock that PostgreSQL ledgers are made and upgraded under."""


def version(connection: sa.Connection, place: Place) -> str | None:
    """The version of the schema; None in an empty database; LedgerError if it holds something else."""
    names = set(sa.inspect(connection).get_table_names())
    if schema.MARKER in names:
        found = connection.execute(sa.text(f"SELECT version_num FROM {schema.MARKER}")).scalars().all()
        if len(found) == 1:
            return str(found[0])
    elif not names:
        return None
    raise LedgerError(
        "not a ledger: a database of something else",
        where=place.shown,
        mend="name a ledger, or an empty or new database",
    )


def check(found: str | None, place: Place) -> None:
    """The schema must be the present one."""
    if found == schema.VERSIONS[-1]:
        return
    if found is None:
        raise LedgerError("it is empty: nothing has been counted into it yet", where=place.shown)
    if found in schema.VERSIONS:
        raise LedgerError(
            f"made by an older fleetcount (schema {found}, now {schema.VERSIONS[-1]})",
            where=place.shown,
            mend="keep a copy, then run: fleetcount ledger upgrade",
        )
    raise LedgerError(
        f"made by a newer fleetcount (schema {found}, this one knows {schema.VERSIONS[-1]})",
        where=place.shown,
        mend="install that version",
    )


def make_if_empty(database: Database) -> None:
    """Make the tables of a ledger that is new; another process may be doing the same."""
    with database.write() as connection:
        _lock(connection)
        if version(connection, database.place) is None:
            _run(connection)


def upgrade(database: Database) -> tuple[str, str]:
    """Bring the schema up to date; returns the version before and the one now."""
    with database.write() as connection:
        _lock(connection)
        before = version(connection, database.place)
        if before in schema.VERSIONS[:-1]:
            _run(connection)
        else:
            check(before, database.place)
        return str(before), schema.VERSIONS[-1]


def _lock(connection: sa.Connection) -> None:
    if connection.dialect.name == "postgresql":
        connection.execute(sa.select(sa.func.pg_advisory_xact_lock(_MAKING)))


def _run(connection: sa.Connection) -> None:
    from alembic import command
    from alembic.config import Config

    config = Config()
    config.set_main_option("script_location", "fleetcount.ledger:migrations")
    config.set_main_option("path_separator", "os")
    config.attributes["connection"] = connection
    command.upgrade(config, "head")
