"""Opening a ledger, wherever it is."""

from __future__ import annotations

import os
import stat
from pathlib import Path
from typing import TYPE_CHECKING

from fleetcount.errors import LedgerError
from fleetcount.ledger.sql.place import Place, find
from fleetcount.ledger.store import Store

if TYPE_CHECKING:
    from fleetcount.ledger.sql.engine import Database


def open_store(where: str | None = None, *, create: bool = False, read_only: bool = False) -> Store:
    """Open a ledger.

    Args:
        where: a path, `sqlite:///PATH`, `postgresql://...` as libpq reads it (address, `?service=NAME`,
            password and service files, environment), or `:memory:`. None: the environment variable
            FLEETCOUNT_LEDGER, or `fleetcount.sqlite` in the current folder.
        create: make a new ledger where there is none. An older one is never upgraded here.
        read_only: only look; nothing is made or changed, and a read-only medium is enough.

    Raises:
        LedgerError: it is missing, something else, older, newer, locked, unreachable or may not be written.
    """
    place = find(where)
    if place.in_memory:
        from fleetcount.ledger.memory import MemoryStore

        return MemoryStore()
    from fleetcount.ledger.sql import engine, migrate
    from fleetcount.ledger.sql.store import SqlStore

    create = create and not read_only
    database = _connect(place, create, read_only)
    try:
        with database.read() as connection:
            found = migrate.version(connection, place)
        if found is None and create:
            migrate.make_if_empty(database)
        else:
            migrate.check(found, place)
        if not read_only:
            engine.choose_journal(database)
            with database.write():
                pass  # whether it can be written is found out now, not after an hour of counting
    except BaseException:
        database.close()
        raise
    return SqlStore(database)


def upgrade(where: str | None = None) -> tuple[str, str, str]:
    """Bring the schema of a ledger up to date.

    Returns: where the ledger is, the version before, and the version now.
    """
    place = find(where)
    if place.in_memory:
        raise LedgerError("a ledger in memory needs no upgrade", where=place.shown)
    from fleetcount.ledger.sql import migrate

    database = _connect(place, create=False, read_only=False)
    try:
        before, after = migrate.upgrade(database)
        return place.shown, before, after
    finally:
        database.close()


def _connect(place: Place, create: bool, read_only: bool) -> Database:
    """The database at a place, not looked into yet."""
    from fleetcount.ledger.sql import engine

    if place.path is None:
        return engine.server(place, read_only)
    _check_file(place.path, create)
    if not read_only:
        _check_writable(place.path)
    return engine.file(place, read_only, create)


def _check_file(path: Path, create: bool) -> None:
    """A file must be a SQLite database, or may be made."""
    where = str(path)
    try:
        kind = path.stat().st_mode
        if stat.S_ISDIR(kind):
            raise LedgerError("not a ledger: a folder", where=where, mend="name a file")
        if not stat.S_ISREG(kind):
            raise LedgerError("not a ledger: no ordinary file", where=where, mend="name a file")
        with path.open("rb") as file:
            begin = file.read(len(_MAGIC))
    except FileNotFoundError:
        if not path.absolute().parent.is_dir():
            raise LedgerError(
                "its folder does not exist", where=where, mend="make the folder first"
            ) from None
        if not create:
            raise LedgerError(
                "there is no ledger here",
                where=where,
                mend="name one with --ledger, or count something first",
            ) from None
        return
    except (OSError, ValueError) as error:
        reason = error.strerror if isinstance(error, OSError) else str(error)
        raise LedgerError(f"it cannot be opened ({reason})", where=where) from None
    if not begin and not create:
        raise LedgerError("it is empty: nothing has been counted into it yet", where=where)
    if begin and begin != _MAGIC:
        raise LedgerError("not a ledger: no SQLite database", where=where, mend="name another file")


def _check_writable(path: Path) -> None:
    """SQLite also writes files beside the ledger, and would tell of a read-only folder in words of its own."""
    what = path if path.exists() else path.absolute().parent
    for part in (what, path.absolute().parent):
        if not os.access(part, os.W_OK):
            kind = "its folder" if part.is_dir() else "it"
            raise LedgerError(
                f"{kind} cannot be written",
                where=str(path),
                mend="check permissions, or name another --ledger",
            )


_MAGIC = b"SQLite format 3\0"
