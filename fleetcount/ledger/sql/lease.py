"""Taking, keeping and checking the lease of a series, inside a transaction that locks it."""

from __future__ import annotations

import uuid
from dataclasses import dataclass, replace

import sqlalchemy as sa

from fleetcount.errors import LedgerError
from fleetcount.ledger import leasing
from fleetcount.ledger.sql.schema import events, leases, now, readings, series, units
from fleetcount.ledger.states import MOVES, Move
from fleetcount.ledger.store import Holder, Lease


@dataclass(frozen=True)
class Locked:
    """A series whose lease row this transaction has locked, and the time by the clock of the database."""

    id: int
    digest: str
    records: int
    head: str
    token: str | None
    holder: Holder
    ends: int
    now: int


def lock(connection: sa.Connection, digest: str) -> Locked:
    """Lock the lease of a series until the transaction ends. LedgerError if there is no such series."""
    row = connection.execute(
        sa.select(
            series.c.id,
            series.c.records,
            series.c.head,
            leases.c.token,
            leases.c.machine,
            leases.c.boot,
            leases.c.pid,
            leases.c.started,
            leases.c.ends,
            now().label("now"),
        )
        .join_from(series, leases)
        .where(series.c.digest == digest)
        .with_for_update()
    ).one_or_none()
    if row is None:
        raise LedgerError("the ledger has no such series", where=f"series {digest[:12]}")
    holder = Holder(row.machine, row.boot, row.pid, row.started)
    return Locked(row.id, digest, row.records, row.head, row.token, holder, row.ends, row.now)


def check(connection: sa.Connection, lease: Lease) -> Locked:
    """Lock the lease of a series for its holder; HeldError if another has taken it.

    A lease whose time is over but that nobody has taken is still its holder's: a machine that slept goes on.
    """
    locked = lock(connection, lease.series)
    if locked.token != lease.token:
        raise leasing.lost_error(lease.series, locked.holder if locked.token else None)
    return locked


def attempt(connection: sa.Connection, digest: str, holder: Holder, seconds: float) -> Lease | leasing.Held:
    """Take the lease if it is free, over, or its holder is gone; units that were out go back to waiting."""
    locked = lock(connection, digest)
    if locked.token is not None:
        held = leasing.Held(locked.holder, locked.ends)
        if not leasing.can_take(held, holder, locked.now):
            return held
    lease = Lease(digest, uuid.uuid4().hex, holder, locked.now + round(seconds * 1e6))
    connection.execute(
        sa.update(leases)
        .where(leases.c.series == locked.id)
        .values(
            token=lease.token,
            machine=holder.machine,
            boot=holder.boot,
            pid=holder.pid,
            started=holder.started,
            ends=lease.ends,
        )
    )
    move = MOVES[Move.HAND_BACK]
    connection.execute(
        sa.update(units)
        .where(units.c.reading.in_(sa.select(readings.c.id).where(readings.c.series == locked.id)))
        .where(units.c.state == sa.literal_column(f"'{move.before}'"))
        .values(state=move.after, token=None)
    )
    return lease


def renew(connection: sa.Connection, lease: Lease, seconds: float) -> Lease:
    """Put off the end of a lease."""
    locked = check(connection, lease)
    renewed = replace(lease, ends=locked.now + round(seconds * 1e6))
    connection.execute(sa.update(leases).where(leases.c.series == locked.id).values(ends=renewed.ends))
    return renewed


def release(connection: sa.Connection, lease: Lease) -> None:
    """Give a lease up, if it is still held."""
    locked = lock(connection, lease.series)
    if locked.token == lease.token:
        connection.execute(
            sa.update(leases).where(leases.c.series == locked.id).values(token=None, ends=locked.now)
        )


def holder(connection: sa.Connection, digest: str) -> tuple[Holder, int] | None:
    """Who holds a series and until when, looked at without locking."""
    row = connection.execute(
        sa.select(leases.c.machine, leases.c.boot, leases.c.pid, leases.c.started, leases.c.ends)
        .join_from(leases, series)
        .where(series.c.digest == digest, leases.c.token.is_not(None), leases.c.ends > now())
    ).one_or_none()
    return None if row is None else (Holder(row.machine, row.boot, row.pid, row.started), row.ends)


def note(connection: sa.Connection, series_id: int | None, kind: str, text: str) -> None:
    """Note that something happened."""
    connection.execute(sa.insert(events).values(at=now(), series=series_id, kind=kind, text=text))
