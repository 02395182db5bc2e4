"""The `Store` of a database: each method is one transaction."""

from __future__ import annotations

import json
from collections.abc import Sequence
from typing import Any, Self

import sqlalchemy as sa
from sqlalchemy.dialects import postgresql, sqlite

from fleetcount.errors import LedgerError
from fleetcount.ledger import judging, leasing
from fleetcount.ledger.sql import accept as accepting
from fleetcount.ledger.sql import lease as leases
from fleetcount.ledger.sql import looking, schema, units
from fleetcount.ledger.sql import merge as merging
from fleetcount.ledger.sql.engine import Database
from fleetcount.ledger.sql.schema import now
from fleetcount.ledger.states import State
from fleetcount.ledger.store import (
    LEASE_SECONDS,
    Answer,
    Census,
    EventRow,
    Holder,
    Lease,
    Machine,
    MachineRow,
    Merged,
    ReadingRow,
    Recent,
    SeriesRow,
    UnitRow,
    Verdict,
)
from fleetcount.series import canonical as canonical_json


class SqlStore:
    """A ledger in SQLite or PostgreSQL. Made by `fleetcount.ledger.access.open_store`."""

    def __init__(self, database: Database) -> None:
        self.database = database
        self.location = database.place.shown
        self.notices = database.notices
        self.lease_seconds = LEASE_SECONDS

    def close(self) -> None:
        self.database.close()

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *exc: object) -> None:
        self.close()

    # Series and their leases

    def open_series(self, digest: str, canonical: str, written: str, opened: int) -> None:
        judging.check_definition(digest, canonical)
        with self.database.read() as connection:
            if (
                connection.execute(
                    sa.select(schema.series.c.id).where(schema.series.c.digest == digest)
                ).scalar()
                is not None
            ):
                return
        with self.database.write() as connection:
            insert = _insert(connection, schema.series).on_conflict_do_nothing(index_elements=["digest"])
            connection.execute(
                insert,
                {
                    "digest": digest,
                    "canonical": canonical,
                    "written": judging.clean(written),
                    "opened": opened,
                    "records": 0,
                    "head": digest,
                },
            )
            number = connection.execute(
                sa.select(schema.series.c.id).where(schema.series.c.digest == digest)
            ).scalar_one()
            free = {"series": number, "machine": "", "boot": "", "pid": 0, "started": 0, "ends": 0}
            connection.execute(_insert(connection, schema.leases).on_conflict_do_nothing(), free)

    def series(self) -> list[SeriesRow]:
        with self.database.read() as connection:
            rows = connection.execute(sa.select(schema.series).order_by(schema.series.c.id))
            return [
                SeriesRow(row.digest, row.canonical, row.written, row.opened, row.records, row.head)
                for row in rows
            ]

    def take(self, series: str, holder: Holder, wait: float = 0.0) -> Lease:
        def attempt() -> Lease | leasing.Held:
            with self.database.write() as connection:
                return leases.attempt(connection, series, holder, self.lease_seconds)

        return leasing.take(attempt, series, wait)

    def renew(self, lease: Lease) -> Lease:
        with self.database.write() as connection:
            return leases.renew(connection, lease, self.lease_seconds)

    def release(self, lease: Lease) -> None:
        with self.database.write() as connection:
            leases.release(connection, lease)

    def holder(self, series: str) -> tuple[Holder, int] | None:
        with self.database.read() as connection:
            return leases.holder(connection, series)

    # Readings

    def open_reading(self, lease: Lease, opening: str, expected: Sequence[float]) -> None:
        new = judging.read_opening(opening, lease.series, expected)
        with self.database.write() as connection:
            locked = leases.check(connection, lease)
            units.open_reading(connection, locked, lease.token, opening, new, expected)

    def readings(self, series: str) -> list[ReadingRow]:
        with self.database.read() as connection:
            return [row for _, row in units.reading_rows(connection, series)]

    def finish_reading(self, lease: Lease, reading: str) -> None:
        with self.database.write() as connection:
            locked = leases.check(connection, lease)
            number = units.reading_id(connection, lease.series, reading)
            if not looking.census(connection, reading).complete:
                raise LedgerError("units of it have no tally yet", where=f"reading {reading}")
            units.finish(connection, number, locked.now)

    # Units

    def waiting(self, reading: str, limit: int) -> list[UnitRow]:
        with self.database.read() as connection:
            return looking.waiting(connection, reading, limit)

    def units(self, reading: str, *states: State, limit: int | None = None) -> list[UnitRow]:
        with self.database.read() as connection:
            return looking.find(connection, reading, states, limit)

    def hand_out(self, lease: Lease, reading: str, keys: Sequence[str], token: str) -> list[UnitRow]:
        with self.database.write() as connection:
            leases.check(connection, lease)
            number = units.reading_id(connection, lease.series, reading)
            return units.hand_out(connection, number, reading, keys, token)

    def hand_back(
        self,
        lease: Lease,
        reading: str,
        keys: Sequence[str],
        token: str,
        failed: str | None = None,
        machine: str = "",
        machines: int = 1,
    ) -> list[UnitRow]:
        with self.database.write() as connection:
            locked = leases.check(connection, lease)
            number = units.reading_id(connection, lease.series, reading)
            if failed is None:
                return units.hand_back(connection, number, reading, keys, token)
            return units.hand_back_failed(
                connection, locked, number, reading, keys, token, failed, machine, machines
            )

    def readmit(self, lease: Lease, reading: str, keys: Sequence[str]) -> list[UnitRow]:
        with self.database.write() as connection:
            leases.check(connection, lease)
            number = units.reading_id(connection, lease.series, reading)
            return units.readmit(connection, number, reading, keys)

    def accept(self, lease: Lease, batch: Sequence[Answer]) -> list[Verdict]:
        records = accepting.read(batch)
        with self.database.write() as connection:
            locked = leases.check(connection, lease)
            return accepting.accept(connection, locked, batch, records)

    # Looking

    def census(self, reading: str) -> Census:
        with self.database.read() as connection:
            return looking.census(connection, reading)

    def latest(self, reading: str, limit: int) -> list[Recent]:
        with self.database.read() as connection:
            return looking.latest(connection, reading, limit)

    def merge(self, series: str, reading: str, check: bool = True) -> Merged:
        with self.database.read() as connection:
            return merging.merge(connection, series, reading, check)

    # Machines and events

    def note_machine(self, machine: Machine) -> None:
        values = {
            "processor": machine.processor,
            "system": machine.system,
            "versions": canonical_json.text(dict(machine.versions)),
            "standing": machine.standing,
            "last_seen": now(),
        }
        with self.database.write() as connection:
            insert = _insert(connection, schema.machines).values(
                name=machine.name, first_seen=now(), **values
            )
            connection.execute(insert.on_conflict_do_update(index_elements=["name"], set_=values))

    def machines(self) -> list[MachineRow]:
        with self.database.read() as connection:
            rows = connection.execute(sa.select(schema.machines).order_by(schema.machines.c.name))
            return [
                MachineRow(
                    Machine(row.name, row.processor, row.system, json.loads(row.versions), row.standing),
                    row.first_seen,
                    row.last_seen,
                )
                for row in rows
            ]

    def event(self, series: str | None, kind: str, text: str) -> None:
        with self.database.write() as connection:
            number = None if series is None else leases.lock(connection, series).id
            leases.note(connection, number, kind, judging.clean(text))

    def events(self, series: str | None = None) -> list[EventRow]:
        with self.database.read() as connection:
            query = (
                sa.select(
                    schema.events.c.at, schema.series.c.digest, schema.events.c.kind, schema.events.c.text
                )
                .join_from(schema.events, schema.series, isouter=True)
                .order_by(schema.events.c.id)
            )
            if series is not None:
                query = query.where(schema.series.c.digest == series)
            return [EventRow(row.at, row.digest, row.kind, row.text) for row in connection.execute(query)]


def _insert(connection: sa.Connection, table: sa.Table) -> Any:
    """An insert that can say what to do where the row is there already; both databases spell it alike."""
    if connection.dialect.name == "postgresql":
        return postgresql.insert(table)
    return sqlite.insert(table)
