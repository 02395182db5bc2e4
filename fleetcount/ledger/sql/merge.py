"""The sum of a reading out of its records."""

from __future__ import annotations

import sqlalchemy as sa

from fleetcount.errors import LedgerError
from fleetcount.ledger.sql.looking import census
from fleetcount.ledger.sql.schema import readings, series, tallies, units
from fleetcount.ledger.sql.summing import Sum, fields_of, stored_in, stored_text, stream
from fleetcount.ledger.sql.walk import Walk
from fleetcount.ledger.store import Merged


def merge(connection: sa.Connection, digest: str, reading: str, check: bool) -> Merged:
    """See `fleetcount.ledger.store.Store.merge`. The connection is in a transaction that sees one moment."""
    head = connection.execute(sa.select(series).where(series.c.digest == digest)).one_or_none()
    if head is None:
        raise LedgerError("the ledger has no such series", where=f"series {digest[:12]}")
    openings = connection.execute(
        sa.select(*(column for column in readings.c if column.name != "stored"), stored_in(readings))
        .where(readings.c.series == head.id)
        .order_by(readings.c.number)
    ).all()
    chosen = next((row for row in openings if row.reading == reading), None)
    if chosen is None:
        raise LedgerError("the series has no such reading", where=f"reading {reading}")
    total = Sum(chosen.width)
    if check:
        Walk(connection, head, openings, chosen.id, total).run()
    else:
        _add_unchecked(connection, chosen.id, total)
    return Merged(
        table=total.table(),
        complete=census(connection, reading).complete,
        head=head.head,
        records=head.records,
        tallies=total.tallies,
        nodes=sum(total.machines.values()),
        seconds=total.seconds,
        machines=dict(total.machines),
        engines=tuple(sorted(total.engines)),
        disputed=_disputed(connection, chosen.id),
    )


def _disputed(connection: sa.Connection, number: int) -> tuple[str, ...]:
    query = sa.select(units.c.key).where(units.c.reading == number, units.c.verdict == "disputed")
    return tuple(connection.execute(query.order_by(units.c.key)).scalars())


def _add_unchecked(connection: sa.Connection, number: int, total: Sum) -> None:
    """Sum a reading's tallies, believing the weights of the units table."""
    query = (
        sa.select(units.c.key, units.c.weight, units.c.seconds, tallies.c.checksum, stored_in(tallies))
        .join_from(tallies, units)
        .where(units.c.reading == number)
    )
    with stream(connection, query) as rows:
        for row in rows:
            total.add(fields_of(stored_text(row, f"unit {row.key}")), int(row.weight), row.seconds)
