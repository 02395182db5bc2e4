"""The sum of a reading out of its records, each of them checked on the way.

The records of a series are read once, in the order of the chain. What follows from them is kept as the
*frontier*: the units that openings and tallies have named and no tally has settled yet. Each tally must
settle a unit of the frontier; what is left at the end must be exactly the units of the ledger that have no
tally. So memory grows with the frontier only.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator
from dataclasses import replace
from typing import Any, NamedTuple

import sqlalchemy as sa

from fleetcount.errors import LedgerError, TrustError
from fleetcount.ledger import judging, record, states
from fleetcount.ledger.record import OpeningRecord, TallyRecord
from fleetcount.ledger.sql.schema import readings, series, tallies, units
from fleetcount.ledger.sql.units import census, reading_row
from fleetcount.ledger.states import MOVES, OPEN, SETTLED
from fleetcount.ledger.store import Merged, ReadingRow
from fleetcount.series import canonical
from fleetcount.series.tally import Tally

ROWS_AT_ONCE = 1000


class _Expected(NamedTuple):
    """What follows from the records about a unit of the frontier."""

    parent: str | None
    factor: int
    weight: int


class _Sum:
    """What is summed on the way."""

    def __init__(self, width: int) -> None:
        self.table = Tally(width)
        self.seconds = 0.0
        self.tallies = 0
        self.machines: Counter[str] = Counter()
        self.engines: set[str] = set()

    def add(self, tally: TallyRecord, weight: int, seconds: float | None) -> None:
        self.table.add(tally.rows, weight)
        self.tallies += 1
        self.seconds += seconds or 0.0
        self.machines[tally.machine] += tally.nodes
        self.engines.add(tally.engine)


def merge(connection: sa.Connection, digest: str, reading: str, check: bool) -> Merged:
    """See `fleetcount.ledger.store.Store.merge`. The connection is in a transaction that sees one moment."""
    head = connection.execute(sa.select(series).where(series.c.digest == digest)).one_or_none()
    if head is None:
        raise LedgerError("the ledger has no such series", where=f"series {digest[:12]}")
    openings = connection.execute(
        sa.select(readings).where(readings.c.series == head.id).order_by(readings.c.number)
    ).all()
    chosen = next((row for row in openings if row.reading == reading), None)
    if chosen is None:
        raise LedgerError("the series has no such reading", where=f"reading {reading}")
    total = _Sum(chosen.width)
    if check:
        _Walk(connection, head, openings, chosen.id, total).run()
    else:
        _add_unchecked(connection, chosen.id, total)
    return Merged(
        table=total.table,
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


def _stream(connection: sa.Connection, query: sa.Select[Any]) -> Iterator[Any]:
    """Rows one by one, without having them all in memory."""
    return iter(connection.execution_options(yield_per=ROWS_AT_ONCE).execute(query))


def _add_unchecked(connection: sa.Connection, number: int, total: _Sum) -> None:
    """Sum a reading's tallies, believing the weights of the units table."""
    query = (
        sa.select(units.c.key, units.c.weight, units.c.seconds, tallies.c.checksum, tallies.c.stored)
        .join_from(tallies, units)
        .where(units.c.reading == number)
    )
    for row in _stream(connection, query):
        tally = TallyRecord.parse(_text(row, f"unit {row.key}"))
        total.add(tally, int(row.weight), row.seconds)


def _text(row: Any, name: str) -> str:
    """The text of a stored record, whose checksum is computed again."""
    try:
        text = record.unpack(row.stored)
    except TrustError as error:
        raise TrustError(error.what, where=name) from None
    found = record.checksum(text)
    if found != row.checksum:
        raise TrustError(
            f"the stored record has been changed: its checksum is {found[:16]}..., "
            f"but {row.checksum[:16]}... was stored",
            where=name,
        )
    return text


class _Walk:
    """One pass through the chain of a series.

    Args:
        head: the row of the series.
        openings: the rows of its readings, in the order of the chain.
        chosen: row id of the reading to be summed.
    """

    def __init__(self, connection: sa.Connection, head: Any, openings: Any, chosen: int, total: _Sum) -> None:
        self.connection, self.head, self.openings = connection, head, openings
        self.chosen, self.total = chosen, total
        self.frontier: dict[int, dict[str, _Expected]] = {}
        self.rows: dict[int, ReadingRow] = {}
        self.number, self.link = 0, str(head.digest)
        self.broken: TrustError | None = None

    def run(self) -> None:
        """Check everything and sum. A broken link is held back until no unit can be named more exactly."""
        if canonical.digest(self.head.canonical) != self.head.digest:
            raise TrustError("its definition has been changed", where=f"series {self.head.digest[:12]}")
        self._find_settled_without_tally()
        waiting = list(reversed(self.openings))
        for row in self._tallies():
            while waiting and waiting[-1].number <= row.number:
                self._open(waiting.pop())
            self._settle(row)
        while waiting:
            self._open(waiting.pop())
        self._compare_frontier()
        if self.broken is None and (self.number, self.link) != (self.head.records, self.head.head):
            self.broken = TrustError(
                f"its chain has {self.number} records, {self.head.records} were written: the end is missing",
                where=f"series {self.head.digest[:12]}",
            )
        if self.broken is not None:
            raise self.broken

    def _name(self, key: str | None, number: int | None) -> str:
        row = self.rows.get(number) if number is not None else None
        return judging.name_unit(str(key), row.reading if row else "unknown")

    def _find_settled_without_tally(self) -> None:
        """Look for units that claim a tally which is not there."""
        row = self.connection.execute(
            sa.select(units.c.key, units.c.state, readings.c.reading)
            .join_from(units, readings)
            .outerjoin(tallies, tallies.c.unit == units.c.id)
            .where(readings.c.series == self.head.id, tallies.c.unit.is_(None), units.c.state.in_(SETTLED))
            .order_by(units.c.key)
            .limit(1)
        ).first()
        if row is not None:
            raise TrustError(
                f"it is {row.state}, but its tally is missing", where=judging.name_unit(row.key, row.reading)
            )

    def _tallies(self) -> Iterator[Any]:
        unit = [units.c.key, units.c.reading, units.c.parent, units.c.factor, units.c.weight, units.c.state]
        return _stream(
            self.connection,
            sa.select(tallies, *unit, units.c.nodes, units.c.seconds)
            .join_from(tallies, units, tallies.c.unit == units.c.id, isouter=True)
            .where(tallies.c.series == self.head.id)
            .order_by(tallies.c.number),
        )

    def _follow(self, row: Any, name: str) -> None:
        """The next record of the chain must be the one that follows."""
        link = record.link(self.link, row.checksum, row.token, row.accepted)
        if self.broken is None and (row.number != self.number + 1 or link != row.link):
            self.broken = TrustError(
                "its record does not follow from the one before it in the chain", where=name
            )
        self.number, self.link = row.number, row.link

    def _open(self, row: Any) -> None:
        """An opening: its roots join the frontier."""
        name = f"opening of reading {row.reading[:12]}"
        opening = OpeningRecord.parse(_text(row, name))
        self._follow(row, name)
        self.rows[row.id] = replace(reading_row(self.head.digest, row), finished=None)
        if judging.opened_row(opening) != self.rows[row.id]:
            raise TrustError("its record and the readings table do not agree", where=name)
        self.frontier[row.id] = {key: _Expected(None, factor, factor) for key, factor in opening.roots}

    def _settle(self, row: Any) -> None:
        """A tally: its unit leaves the frontier, its children join it."""
        if row.key is None:
            tally = TallyRecord.parse(_text(row, f"tally of a missing unit, record {row.number}"))
            raise TrustError("it has a tally, but the unit is missing", where=judging.unit_name(tally))
        name = self._name(row.key, row.reading)
        text = _text(row, name)
        self._follow(row, name)
        try:
            tally = TallyRecord.parse(text)
        except TrustError as error:
            raise TrustError(error.what, where=name) from None
        self._compare(tally, row, name)
        frontier = self.frontier[row.reading]
        expected = frontier.pop(row.key, None)
        if expected is None:
            raise TrustError("no record before its tally names it, or it has two tallies", where=name)
        self._compare_unit(row, expected, name)
        for key, factor in tally.children:
            if key in frontier:
                raise TrustError(f"its child {key} is a child of another unit too", where=name)
            frontier[key] = _Expected(row.key, factor, factor * expected.weight)
        if row.reading == self.chosen:
            self.total.add(tally, expected.weight, row.seconds)

    def _compare(self, tally: TallyRecord, row: Any, name: str) -> None:
        """A tally must be that of its unit, and agree with the columns beside it."""
        reading = self.rows.get(row.reading)
        if reading is None:
            raise TrustError("its reading was not opened before", where=name)
        if (tally.reading, tally.key) != (reading.reading, row.key):
            raise TrustError(f"its stored tally is that of {judging.unit_name(tally)}", where=name)
        judging.check_fit(tally, reading, tally.factor)
        found = (tally.machine, tally.engine, tally.started, tally.finished, tally.nodes)
        if found != (row.machine, row.engine, row.started, row.finished, row.nodes) or (
            row.versions != canonical.text(tally.versions)
        ):
            raise TrustError("its tally and the columns beside it do not agree", where=name)
        state = MOVES[states.settling(len(tally.children))].after
        if row.state != state:
            raise TrustError(f"it is {row.state}, but its tally says {state}", where=name)
        if str(tally.factor) != row.factor:
            raise TrustError(f"its factor is {row.factor}, but its tally says {tally.factor}", where=name)

    def _compare_unit(self, row: Any, expected: _Expected, name: str) -> None:
        """A unit must be what the records say."""
        found = (row.parent, row.factor, row.weight)
        for word, is_now, should in zip(("parent", "factor", "weight"), found, expected, strict=True):
            if is_now != (should if word == "parent" else str(should)):
                raise TrustError(f"its {word} is {is_now}, but the records say {should}", where=name)

    def _compare_frontier(self) -> None:
        """The units without a tally must be exactly the frontier."""
        query = (
            sa.select(
                units.c.key, units.c.reading, units.c.parent, units.c.factor, units.c.weight, units.c.state
            )
            .join_from(units, readings)
            .outerjoin(tallies, tallies.c.unit == units.c.id)
            .where(readings.c.series == self.head.id, tallies.c.unit.is_(None))
        )
        for row in _stream(self.connection, query):
            name = self._name(row.key, row.reading)
            expected = self.frontier.get(row.reading, {}).pop(row.key, None)
            if expected is None:
                raise TrustError("no record names it: it was added by another hand", where=name)
            self._compare_unit(row, expected, name)
            if row.state not in OPEN:
                raise TrustError(f"it is {row.state} without a tally", where=name)
        for number, left in self.frontier.items():
            if left:
                raise TrustError(
                    "the records name it, but it is missing", where=self._name(min(left), number)
                )
