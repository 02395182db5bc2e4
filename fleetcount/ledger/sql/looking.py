"""Looking at readings and units."""

from __future__ import annotations

from collections.abc import Iterable

import sqlalchemy as sa

from fleetcount.ledger.sql.schema import readings, tallies, units
from fleetcount.ledger.sql.units import UNIT, in_state, unit_row
from fleetcount.ledger.states import State
from fleetcount.ledger.store import Census, Recent, Share, UnitRow


def find(
    connection: sa.Connection, reading: str, chosen: Iterable[State] = (), limit: int | None = None
) -> list[UnitRow]:
    """Units of a reading, by key."""
    query = (
        sa.select(*UNIT).join_from(units, readings).where(readings.c.reading == reading).order_by(units.c.key)
    )
    chosen = list(chosen)
    if chosen:
        query = query.where(units.c.state.in_(chosen))
    return [unit_row(reading, row) for row in connection.execute(query.limit(limit))]


def waiting(connection: sa.Connection, reading: str, limit: int) -> list[UnitRow]:
    """Units that wait, the largest expected work first."""
    number = sa.select(readings.c.id).where(readings.c.reading == reading).scalar_subquery()
    query = (
        sa.select(*UNIT)
        .where(units.c.reading == number, in_state(State.WAITING))
        .order_by(units.c.expected.desc(), units.c.key)
        .limit(limit)
    )
    return [unit_row(reading, row) for row in connection.execute(query)]


def census(connection: sa.Connection, reading: str) -> Census:
    """The units of a reading by state, in one query."""
    total = sa.func.sum
    rows = connection.execute(
        sa.select(
            units.c.state,
            sa.func.count().label("units"),
            total(units.c.expected).label("expected"),
            total(sa.cast(units.c.nodes, sa.Float(53))).label("nodes"),
            total(units.c.seconds).label("seconds"),
        )
        .join_from(units, readings)
        .where(readings.c.reading == reading)
        .group_by(units.c.state)
    )
    found = {
        row.state: Share(row.units, row.expected or 0.0, int(row.nodes or 0), row.seconds or 0.0)
        for row in rows
    }
    return Census({state: found.get(state, Share()) for state in State})


def latest(connection: sa.Connection, reading: str, limit: int) -> list[Recent]:
    """The tallies of a reading that were accepted last."""
    rows = connection.execute(
        sa.select(units.c.key, tallies.c.machine, units.c.nodes, units.c.seconds, tallies.c.accepted)
        .select_from(readings)
        .join(tallies, tallies.c.series == readings.c.series)
        .join(units, sa.and_(units.c.id == tallies.c.unit, units.c.reading == readings.c.id))
        .where(readings.c.reading == reading)
        .order_by(tallies.c.number.desc())
        .limit(limit)
    )
    return [Recent(row.key, row.machine, row.nodes, row.seconds, row.accepted) for row in rows]
