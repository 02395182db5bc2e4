"""Readings and units: opening, handing out and back, looking."""

from __future__ import annotations

import json
from collections.abc import Callable, Iterable, Iterator, Sequence
from typing import Any

import sqlalchemy as sa

from fleetcount.errors import LedgerError
from fleetcount.ledger import judging, record, states
from fleetcount.ledger.record import OpeningRecord
from fleetcount.ledger.sql.lease import Locked, note
from fleetcount.ledger.sql.schema import readings, series, units
from fleetcount.ledger.states import MOVES, Move, State
from fleetcount.ledger.store import ReadingRow, UnitRow

AT_ONCE = 500
"""Keys in one question; every database takes more variables than this."""

UNIT = [
    units.c.id,
    units.c.key,
    units.c.parent,
    units.c.factor,
    units.c.weight,
    units.c.expected,
    units.c.state,
    units.c.verdict,
    units.c.attempts,
    units.c.last_error,
    units.c.token,
    units.c.failed_on,
]


def in_state(state: State) -> sa.ColumnElement[bool]:
    """The condition on a state, written out, so that the partial indexes serve it."""
    return units.c.state == sa.literal_column(f"'{state}'")


def reading_rows(connection: sa.Connection, digest: str) -> list[tuple[int, ReadingRow]]:
    """The readings of a series with their row ids, in the order of the chain."""
    rows = connection.execute(
        sa.select(readings)
        .join_from(readings, series)
        .where(series.c.digest == digest)
        .order_by(readings.c.number)
    )
    return [(row.id, reading_row(digest, row)) for row in rows]


def reading_row(digest: str, row: Any) -> ReadingRow:
    """The value of a row of the readings table."""
    return ReadingRow(
        series=digest,
        reading=row.reading,
        purpose=row.purpose,
        method=row.method,
        method_version=row.method_version,
        lengths=row.lengths,
        width=row.width,
        opened=row.opened,
        finished=row.finished,
    )


def reading_id(connection: sa.Connection, digest: str, reading: str) -> int:
    """The row id of a reading of this series; LedgerError if it has no such reading."""
    found = connection.execute(
        sa.select(readings.c.id)
        .join_from(readings, series)
        .where(readings.c.reading == reading, series.c.digest == digest)
    ).scalar()
    if found is None:
        raise LedgerError("the series has no such reading", where=f"reading {reading}")
    return int(found)


def open_reading(
    connection: sa.Connection,
    locked: Locked,
    token: str,
    text: str,
    opening: OpeningRecord,
    expected: Sequence[float],
) -> None:
    """Add an opening to the chain, and its roots as units that wait."""
    known = sa.select(readings.c.id).where(readings.c.reading == opening.reading)
    if connection.execute(known).scalar() is not None:
        raise LedgerError("a reading of this id is open already", where=f"reading {opening.reading}")
    checksum = record.checksum(text)
    head = record.link(locked.head, checksum, token, locked.now)
    connection.execute(
        sa.insert(readings).values(
            series=locked.id,
            reading=opening.reading,
            purpose=opening.purpose,
            method=opening.method,
            method_version=opening.method_version,
            lengths=opening.lengths,
            width=opening.width,
            opened=opening.opened,
            number=locked.records + 1,
            stored=record.pack(text),
            checksum=checksum,
            link=head,
            token=token,
            accepted=locked.now,
        )
    )
    extend(connection, locked, locked.records + 1, head)
    number = reading_id(connection, locked.digest, opening.reading)
    roots = zip(opening.roots, expected, strict=True)
    rows = [new_unit(number, key, None, factor, factor, nodes) for (key, factor), nodes in roots]
    if rows:
        connection.execute(sa.insert(units), rows)


def extend(connection: sa.Connection, locked: Locked, records: int, head: str) -> None:
    """Note the new head of a series' chain."""
    connection.execute(sa.update(series).where(series.c.id == locked.id).values(records=records, head=head))


def new_unit(
    reading: int, key: str, parent: str | None, factor: int, weight: int, expected: float
) -> dict[str, Any]:
    """The row of a unit that nobody has counted yet."""
    return {
        "reading": reading,
        "key": key,
        "parent": parent,
        "factor": str(factor),
        "weight": str(weight),
        "expected": float(expected),
        "state": State.WAITING,
        "verdict": "unchecked",
        "attempts": 0,
        "failed_on": "[]",
    }


def unit_row(reading: str, row: Any) -> UnitRow:
    """The value of a row of `UNIT` columns."""
    return UnitRow(
        reading=reading,
        key=row.key,
        parent=row.parent,
        factor=int(row.factor),
        weight=int(row.weight),
        expected=row.expected,
        state=State(row.state),
        verdict=row.verdict,
        attempts=row.attempts,
        last_error=row.last_error,
        token=row.token,
    )


def move(
    connection: sa.Connection,
    number: int,
    reading: str,
    keys: Sequence[str],
    before: State,
    change: Callable[[Any], dict[str, Any] | None],
) -> list[UnitRow]:
    """Change those of the units that are in a state, and return them as they are then, by `keys`.

    Args:
        number: row id of the reading.
        change: the new values of a row's columns, or None to leave it out.
    """
    wanted = list(dict.fromkeys(keys))
    rows: dict[str, Any] = {}
    for row in by_key(connection, UNIT, number, wanted, in_state(before)):
        values = change(row)
        if values is not None:
            rows[row.key] = (row, values)
    changed = [rows[key] for key in wanted if key in rows]
    if changed:
        columns = sorted(changed[0][1])
        connection.execute(
            sa.update(units)
            .where(units.c.id == sa.bindparam("_id"))
            .values({name: sa.bindparam(f"_{name}") for name in columns}),
            [{"_id": row.id, **{f"_{name}": values[name] for name in columns}} for row, values in changed],
        )
    return [unit_row(reading, _Changed(row, values)) for row, values in changed]


class _Changed:
    """A row with some columns changed."""

    def __init__(self, row: Any, values: dict[str, Any]) -> None:
        self._row, self._values = row, values

    def __getattr__(self, name: str) -> Any:
        return self._values[name] if name in self._values else getattr(self._row, name)


def by_key(
    connection: sa.Connection, columns: Sequence[Any], number: int, keys: Iterable[str], *conditions: Any
) -> Iterator[Any]:
    """Rows of a reading's units by their keys, whatever their number."""
    query = sa.select(*columns).where(
        units.c.reading == number, units.c.key.in_(sa.bindparam("keys", expanding=True)), *conditions
    )
    for some in batches(keys):
        yield from connection.execute(query, {"keys": some})


def batches(values: Iterable[Any]) -> Iterator[list[Any]]:
    """Lists of at most `AT_ONCE`."""
    values = iter(values)
    while some := [value for _, value in zip(range(AT_ONCE), values, strict=False)]:
        yield some


def hand_out(
    connection: sa.Connection, number: int, reading: str, keys: Sequence[str], token: str
) -> list[UnitRow]:
    """Put units that wait out under a token."""
    step = MOVES[Move.HAND_OUT]
    return move(
        connection, number, reading, keys, step.before, lambda row: {"state": step.after, "token": token}
    )


def hand_back(
    connection: sa.Connection, number: int, reading: str, keys: Sequence[str], token: str
) -> list[UnitRow]:
    """Let units that are out under a token wait again, untouched."""
    step = MOVES[Move.HAND_BACK]
    return move(
        connection,
        number,
        reading,
        keys,
        step.before,
        lambda row: {"state": step.after, "token": None} if row.token == token else None,
    )


def hand_back_failed(
    connection: sa.Connection,
    locked: Locked,
    number: int,
    reading: str,
    keys: Sequence[str],
    token: str,
    error: str,
    machine: str,
    machines: int,
) -> list[UnitRow]:
    """Count a failure of units that are out under a token; they wait again or are barred."""

    def fail(row: Any) -> dict[str, Any] | None:
        if row.token != token:
            return None
        failed_on = [*json.loads(row.failed_on), machine]
        after = Move.BAR if states.bars(failed_on, machines) else Move.HAND_BACK
        return {
            "state": MOVES[after].after,
            "token": None,
            "attempts": len(failed_on),
            "failed_on": json.dumps(failed_on),
            "last_error": judging.clean(error),
        }

    rows = move(connection, number, reading, keys, State.OUT, fail)
    for row in rows:
        if row.state is State.BARRED:
            note(connection, locked.id, "barred", judging.barred_text(row))
    return rows


def readmit(connection: sa.Connection, number: int, reading: str, keys: Sequence[str]) -> list[UnitRow]:
    """Let barred units wait again, their failures forgotten."""
    step = MOVES[Move.READMIT]
    return move(
        connection,
        number,
        reading,
        keys,
        step.before,
        lambda row: {"state": step.after, "attempts": 0, "failed_on": "[]"},
    )


def finish(connection: sa.Connection, number: int, now: int) -> None:
    """Note that a reading is finished."""
    connection.execute(
        sa.update(readings).where(readings.c.id == number, readings.c.finished.is_(None)).values(finished=now)
    )
