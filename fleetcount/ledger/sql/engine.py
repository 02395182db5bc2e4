"""Connections and transactions, and the one place where a driver's errors become LedgerError."""

from __future__ import annotations

import os
import sqlite3
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import sqlalchemy as sa
from sqlalchemy.exc import DBAPIError, IntegrityError, SQLAlchemyError

from fleetcount import host
from fleetcount.errors import LedgerError
from fleetcount.ledger.sql.place import Place

BUSY_SECONDS = 10.0
"""How long SQLite waits for another process to finish its transaction."""

CONNECT_SECONDS = 4
"""How long a server may take to answer, for each address of its name."""

_WRITES = "fleetcount_writes"

_NETWORK_NOTICE = (
    "the ledger lies on a network file system: only one process at a time can open it, and others cannot "
    "look at it meanwhile; a local folder or PostgreSQL is better"
)

_SQLITE_MEANS = {
    sqlite3.SQLITE_FULL: ("the disk is full", "make space and start again; what was accepted is safe"),
    sqlite3.SQLITE_BUSY: ("another process keeps it locked", "try again when that one is done"),
    sqlite3.SQLITE_LOCKED: ("another process keeps it locked", "try again when that one is done"),
    sqlite3.SQLITE_READONLY: ("it cannot be written", "check the permissions of the file and its folder"),
    sqlite3.SQLITE_PERM: ("it may not be opened", "check the permissions of the file and its folder"),
    sqlite3.SQLITE_CANTOPEN: (
        "it cannot be opened",
        "check the permissions of the file and its folder; on a read-only medium it needs to have been "
        "closed properly, without a -wal file beside it",
    ),
    sqlite3.SQLITE_IOERR: ("the disk reports an error", "check the disk; what was accepted is safe"),
    sqlite3.SQLITE_CORRUPT: ("the file is damaged", "restore it from a backup"),
    sqlite3.SQLITE_NOTADB: ("not a ledger: no SQLite database", "name another file"),
}


class Database:
    """An engine with its transactions. Threads may share it; transactions are never nested."""

    def __init__(
        self, engine: sa.Engine, place: Place, read_only: bool, notices: tuple[str, ...] = ()
    ) -> None:
        self.engine, self.place, self.read_only, self.notices = engine, place, read_only, notices

    @contextmanager
    def write(self) -> Iterator[sa.Connection]:
        """A transaction that writes: on SQLite it begins immediate, so that no other can be in between."""
        if self.read_only:
            raise LedgerError("it was opened for reading only", where=self.place.shown)
        with translated(self.place), self.engine.connect() as connection:
            connection.execution_options(**{_WRITES: True})
            with connection.begin():
                yield connection

    @contextmanager
    def read(self) -> Iterator[sa.Connection]:
        """A transaction that sees one moment of the ledger, and writes nothing."""
        with translated(self.place), self.engine.connect() as connection:
            if connection.dialect.name == "postgresql":
                connection.execution_options(isolation_level="REPEATABLE READ", postgresql_readonly=True)
            with connection.begin():
                yield connection

    def close(self) -> None:
        with translated(self.place):
            self.engine.dispose()


@contextmanager
def translated(place: Place) -> Iterator[None]:
    """Turn every error of a driver into one LedgerError without passwords; the transaction is rolled back."""
    try:
        yield
    except (SQLAlchemyError, sqlite3.Error, OSError) as error:
        what, mend = _meaning(error)
        raise LedgerError(place.mask(what), where=place.shown, mend=mend) from None


def _meaning(error: Exception) -> tuple[str, str]:
    cause = error.orig if isinstance(error, DBAPIError) and error.orig is not None else error
    code = getattr(cause, "sqlite_errorcode", None)
    if code is not None and code & 0xFF in _SQLITE_MEANS:
        return _SQLITE_MEANS[code & 0xFF]
    text = " ".join(str(cause).split()) or type(cause).__name__
    if isinstance(error, IntegrityError):
        return f"the database refuses a record as contradicting another ({text})", ""
    if isinstance(error, DBAPIError) and (error.connection_invalidated or _is_connection_trouble(cause)):
        return f"the database cannot be reached ({text})", "check that the server runs, its address and user"
    return f"the database reports: {text}", ""


def _is_connection_trouble(cause: BaseException) -> bool:
    """psycopg: an OperationalError without a code of SQL never got as far as the server's own words."""
    return type(cause).__module__.startswith("psycopg") and getattr(cause, "sqlstate", None) is None


def server(place: Place, read_only: bool) -> Database:
    """A PostgreSQL ledger. libpq itself reads the URL, service and password files and the environment."""
    try:
        import psycopg
        from psycopg.conninfo import conninfo_to_dict
    except ImportError:
        raise LedgerError(
            "PostgreSQL needs a driver that is not installed",
            where=place.shown,
            mend="pip install 'fleetcount[postgres]'",
        ) from None
    defaults: dict[str, Any] = {
        "connect_timeout": CONNECT_SECONDS,
        "application_name": "fleetcount",
        # A server that vanishes without a word is noticed before the lease ends.
        "keepalives_idle": 5,
        "keepalives_interval": 2,
        "keepalives_count": 3,
        "tcp_user_timeout": 12_000,
    }
    try:
        given = conninfo_to_dict(place.url)
    except psycopg.Error as error:
        raise LedgerError(
            place.mask(f"not the URL of a PostgreSQL database ({' '.join(str(error).split())})"),
            where=place.shown,
        ) from None
    environment = {"connect_timeout": "PGCONNECT_TIMEOUT", "application_name": "PGAPPNAME"}
    extra = {k: v for k, v in defaults.items() if k not in given and environment.get(k, "") not in os.environ}
    engine = sa.create_engine(
        "postgresql+psycopg://",
        creator=lambda: psycopg.connect(place.url, **extra),
        pool_pre_ping=True,
        hide_parameters=True,
    )
    return Database(engine, place, read_only)


def file(place: Place, read_only: bool, create: bool) -> Database:
    """A SQLite ledger.

    Reading never makes a file, and leaves none: a reader that may write the folder opens the file like a
    writer (which tidies up after itself) and promises to only ask; one that may not opens it read-only, and
    as unchanging if no write-ahead log is there, since none can come.
    """
    path = place.path
    assert path is not None
    network = host.on_network_filesystem(path)
    if not read_only:
        options = "mode=rwc" if create else "mode=rw"
    elif os.access(path, os.W_OK) and os.access(path.absolute().parent, os.W_OK):
        options = "mode=rw"
    else:
        options = "mode=ro" if _beside(path, "-wal").exists() else "mode=ro&immutable=1"
    address = f"{path.absolute().as_uri()}?{options}"

    def connect() -> sqlite3.Connection:
        return sqlite3.connect(
            address, uri=True, timeout=BUSY_SECONDS, isolation_level=None, check_same_thread=False
        )

    alone = network and not read_only
    engine = sa.create_engine(
        "sqlite+pysqlite://",
        creator=connect,
        poolclass=sa.QueuePool,
        pool_size=1 if alone else 5,
        max_overflow=0 if alone else 10,
        hide_parameters=True,
    )
    _listen(engine, read_only, alone)
    return Database(engine, place, read_only, (_NETWORK_NOTICE,) if alone else ())


def _beside(path: Path, ending: str) -> Path:
    return path.with_name(path.name + ending)


def _listen(engine: sa.Engine, read_only: bool, alone: bool) -> None:
    """Set every connection up, and begin every transaction ourselves: the driver begins too late."""

    @sa.event.listens_for(engine, "connect")
    def set_up(connection: sqlite3.Connection, record: object) -> None:
        connection.execute("PRAGMA foreign_keys = ON")
        connection.execute("PRAGMA synchronous = FULL")
        if alone:
            connection.execute("PRAGMA locking_mode = EXCLUSIVE")
        if read_only:
            connection.execute("PRAGMA query_only = ON")

    @sa.event.listens_for(engine, "begin")
    def begin(connection: sa.Connection) -> None:
        writes = connection.get_execution_options().get(_WRITES)
        connection.exec_driver_sql("BEGIN IMMEDIATE" if writes else "BEGIN")


def choose_journal(database: Database) -> None:
    """Give a SQLite ledger that is going to be written the journal that its file system allows."""
    if database.place.path is None:
        return
    alone = _NETWORK_NOTICE in database.notices
    with translated(database.place):
        raw = database.engine.raw_connection()
        try:
            mode = _set_journal(raw.driver_connection, "delete" if alone else "wal")
        finally:
            raw.close()
    if mode != "wal" and not alone:
        database.notices += (
            f"the file system allows no write-ahead log (journal: {mode}): others cannot look meanwhile",
        )


def _set_journal(connection: Any, mode: str) -> str:
    """SQLite does not wait here by itself where another process is opening the same file."""
    end = time.monotonic() + BUSY_SECONDS
    while True:
        try:
            return str(connection.execute(f"PRAGMA journal_mode = {mode}").fetchone()[0])
        except sqlite3.OperationalError as error:
            if error.sqlite_errorcode & 0xFF != sqlite3.SQLITE_BUSY or time.monotonic() > end:
                raise
            time.sleep(0.05)
