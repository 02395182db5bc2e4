"""Accepting a batch of answers: tallies, new child units and changes of state in one transaction.

What the units are is asked of the database once a batch; then each answer is judged in its turn by the rules
that all stores share; then everything is written in bulk.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

import sqlalchemy as sa

from fleetcount.errors import TrustError
from fleetcount.ledger import judging, record, states
from fleetcount.ledger.record import TallyRecord
from fleetcount.ledger.sql.lease import Locked, note
from fleetcount.ledger.sql.schema import tallies, units
from fleetcount.ledger.sql.summing import stored_in
from fleetcount.ledger.sql.units import batches, by_key, extend, new_unit, reading_rows
from fleetcount.ledger.states import SETTLED, State
from fleetcount.ledger.store import Answer, ReadingRow, Verdict
from fleetcount.series import canonical

Judged = TallyRecord | TrustError


def read(batch: Sequence[Answer]) -> list[Judged]:
    """The records of the answers, or what is wrong with them: the part that needs no database.

    Their rows, once checked, stay behind in the texts: thousands of small tuples kept at once would cost more
    than all else. The rare answer that must be compared is read again.
    """
    records: list[Judged] = []
    for answer in batch:
        try:
            tally = judging.read(answer)
            tally.rows.rows.clear()
            records.append(tally)
        except TrustError as error:
            records.append(error)
    return records


@dataclass
class _Unit:
    """What the database, and the batch so far, know of a unit. A child born in this batch has no id yet."""

    id: int | None
    factor: int
    weight: int
    state: State
    token: str | None
    text: str = ""


@dataclass
class _Batch:
    """The rows to be written."""

    number: int
    head: str
    tallies: list[dict[str, Any]] = field(default_factory=list)
    settled: list[dict[str, Any]] = field(default_factory=list)
    children: list[dict[str, Any]] = field(default_factory=list)
    disputed: list[dict[str, Any]] = field(default_factory=list)


def accept(
    connection: sa.Connection, locked: Locked, batch: Sequence[Answer], records: Sequence[Judged]
) -> list[Verdict]:
    """Judge and write a batch whose records have been read. The caller holds the lease of the series."""
    readings = {row.reading: (number, row) for number, row in reading_rows(connection, locked.digest)}
    known = _known(connection, readings, records)
    new = _Batch(locked.records, locked.head)
    verdicts = []
    for answer, tally in zip(batch, records, strict=True):
        try:
            if isinstance(tally, TrustError):
                raise tally
            verdict = _judge(answer, tally, readings, known)
        except TrustError as error:
            verdict = Verdict.REFUSED
            note(connection, locked.id, "refused", judging.refused_text(answer, error))
        else:
            number = readings[tally.reading][0]
            unit = known[number, tally.key]
            if verdict is Verdict.DISPUTED:
                new.disputed.append({"_id": unit.id})
                note(connection, locked.id, "dispute", judging.dispute_text(tally))
            elif verdict is Verdict.ACCEPTED:
                _add(new, locked, answer, tally, number, unit, known)
        verdicts.append(verdict)
    _write(connection, locked, new)
    return verdicts


def _known(
    connection: sa.Connection, readings: dict[str, tuple[int, ReadingRow]], records: Sequence[Judged]
) -> dict[tuple[int, str], _Unit]:
    """The units and children that a batch is about, as far as the ledger has them, by reading and key."""
    keys: dict[int, dict[str, None]] = defaultdict(dict)
    for tally in records:
        if isinstance(tally, TallyRecord) and tally.reading in readings:
            asked = keys[readings[tally.reading][0]]
            asked[tally.key] = None
            asked.update((key, None) for key, _ in tally.children)
    columns = [units.c.id, units.c.key, units.c.factor, units.c.weight, units.c.state, units.c.token]
    known: dict[tuple[int, str], _Unit] = {}
    settled: dict[int, _Unit] = {}
    for number, asked in keys.items():
        for row in by_key(connection, columns, number, asked):
            unit = _Unit(row.id, int(row.factor), int(row.weight), State(row.state), row.token)
            known[number, row.key] = unit
            if unit.state in SETTLED:
                settled[row.id] = unit
    for some in batches(settled):
        query = sa.select(tallies.c.unit, stored_in(tallies)).where(tallies.c.unit.in_(some))
        for row in connection.execute(query):
            settled[row.unit].text = record.unpack(row.stored)
    return known


def _judge(
    answer: Answer,
    tally: TallyRecord,
    readings: dict[str, tuple[int, ReadingRow]],
    known: dict[tuple[int, str], _Unit],
) -> Verdict:
    """The verdict on one answer; TrustError if it is to be refused."""
    number, reading = readings.get(tally.reading, (0, None))
    unit = known.get((number, tally.key))
    if reading is None or unit is None:
        raise TrustError("the ledger has no such unit", where=judging.unit_name(tally))
    judging.check_fit(tally, reading, unit.factor)
    stored = None
    if unit.state in SETTLED:
        stored, tally = TallyRecord.parse(unit.text), TallyRecord.parse(answer.text)
    verdict = judging.verdict(unit.state, unit.token, answer.token, stored, tally)
    if verdict is Verdict.ACCEPTED:
        judging.check_new(tally, [key for key, _ in tally.children if (number, key) in known])
    return verdict


def _add(
    new: _Batch,
    locked: Locked,
    answer: Answer,
    tally: TallyRecord,
    number: int,
    unit: _Unit,
    known: dict[tuple[int, str], _Unit],
) -> None:
    """Put an accepted tally, its unit's new state and its children among the rows to be written."""
    new.number += 1
    new.head = record.link(new.head, answer.checksum, answer.token, locked.now)
    new.tallies.append({
        "unit": unit.id,
        "series": locked.id,
        "number": new.number,
        "machine": tally.machine,
        "engine": tally.engine,
        "versions": canonical.text(tally.versions),
        "started": tally.started,
        "finished": tally.finished,
        "checksum": answer.checksum,
        "link": new.head,
        "token": answer.token,
        "accepted": locked.now,
        "stored": record.pack(answer.text),
    })  # fmt: skip
    unit.state = states.after(unit.state, states.settling(len(tally.children)))
    unit.token, unit.text = None, answer.text
    new.settled.append(
        {"_id": unit.id, "_state": unit.state, "_nodes": tally.nodes, "_seconds": float(answer.seconds)}
    )
    for (key, factor), nodes in zip(tally.children, answer.expected, strict=True):
        weight = factor * unit.weight
        new.children.append(new_unit(number, key, tally.key, factor, weight, nodes))
        known[number, key] = _Unit(None, factor, weight, State.WAITING, None)


_SETTLE = (
    sa.update(units)
    .where(units.c.id == sa.bindparam("_id"))
    .values(
        state=sa.bindparam("_state"),
        token=None,
        nodes=sa.bindparam("_nodes"),
        seconds=sa.bindparam("_seconds"),
    )
)
_DISPUTE = sa.update(units).where(units.c.id == sa.bindparam("_id")).values(verdict="disputed")


def _write(connection: sa.Connection, locked: Locked, new: _Batch) -> None:
    if new.tallies:
        connection.execute(sa.insert(tallies), new.tallies)
        connection.execute(_SETTLE, new.settled)
        extend(connection, locked, new.number, new.head)
    if new.children:
        connection.execute(sa.insert(units), new.children)
    if new.disputed:
        connection.execute(_DISPUTE, new.disputed)
