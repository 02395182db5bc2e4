"""Reading the records of a series in the order of its chain, each of them checked on the way.

The records of a series are read once, in the order of the chain. What follows from them is kept as the
*frontier*: the units that openings and tallies have named and no tally has settled yet. Each tally must
settle a unit of the frontier; what is left at the end must be exactly the units of the ledger that have no
tally. So memory grows with the frontier only.
"""

from __future__ import annotations

import json
from collections.abc import Iterator
from dataclasses import replace
from operator import itemgetter
from typing import Any, NamedTuple

import sqlalchemy as sa

from fleetcount.errors import TrustError
from fleetcount.ledger import judging, record, states
from fleetcount.ledger.record import OpeningRecord, TallyRecord
from fleetcount.ledger.sql.schema import readings, tallies, units
from fleetcount.ledger.sql.summing import Sum, fields_of, stored_text, stream
from fleetcount.ledger.sql.units import reading_row
from fleetcount.ledger.states import MOVES, OPEN, SETTLED
from fleetcount.ledger.store import ReadingRow
from fleetcount.series import canonical

_COMPARED = (
    "key", "reading", "series", "method", "method_version", "lengths", "width", "factor",
    "machine", "engine", "started", "finished", "nodes",
)  # fmt: skip
"""The fields of a tally that the tables repeat."""

_fields_compared = itemgetter(*_COMPARED)


class _Expected(NamedTuple):
    """What follows from the records about a unit of the frontier, as the units table writes it."""

    parent: str | None
    factor: str
    weight: str


class Walk:
    """One pass through the chain of a series.

    Args:
        head: the row of the series.
        openings: the rows of its readings, in the order of the chain.
        chosen: row id of the reading to be summed.
    """

    def __init__(self, connection: sa.Connection, head: Any, openings: Any, chosen: int, total: Sum) -> None:
        self.connection, self.head, self.openings = connection, head, openings
        self.chosen, self.total = chosen, total
        self.frontier: dict[int, dict[str, _Expected]] = {}
        self.rows: dict[int, ReadingRow] = {}
        self.versions: dict[str, Any] = {}
        self.number, self.link = 0, str(head.digest)
        self._its_tally = sa.and_(tallies.c.unit == units.c.id, tallies.c.series == head.id)
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
            .outerjoin(tallies, self._its_tally)
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
        return stream(
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
        opening = OpeningRecord.parse(stored_text(row, name))
        self._follow(row, name)
        self.rows[row.id] = replace(reading_row(self.head.digest, row), finished=None)
        if judging.opened_row(opening) != self.rows[row.id]:
            raise TrustError("its record and the readings table do not agree", where=name)
        self.frontier[row.id] = {
            key: _Expected(None, str(factor), str(factor)) for key, factor in opening.roots
        }

    def _settle(self, row: Any) -> None:
        """A tally: its unit leaves the frontier, its children join it."""
        if row.key is None:
            tally = TallyRecord.parse(stored_text(row, f"the tally of a missing unit, record {row.number}"))
            raise TrustError("it has a tally, but the unit is missing", where=judging.unit_name(tally))
        name = self._name(row.key, row.reading)
        text = stored_text(row, name)
        self._follow(row, name)
        if row.reading not in self.frontier:
            raise TrustError("its reading was not opened before", where=name)
        try:
            self._settle_unit(row, fields_of(text), self.frontier[row.reading], name)
        except TrustError as error:
            raise TrustError(error.what, where=error.where or name) from None
        except (KeyError, TypeError, ValueError, AttributeError):
            raise TrustError("its stored record is no tally", where=name) from None

    def _settle_unit(
        self, row: Any, fields: dict[str, Any], frontier: dict[str, _Expected], name: str
    ) -> None:
        self._compare(row, fields)
        expected = frontier.pop(row.key, None)
        if expected is None:
            raise TrustError("no record before its tally names it, or it has two tallies")
        self._compare_unit(row, expected, name)
        state = MOVES[states.settling(len(fields["children"]))].after
        if row.state != state:
            raise TrustError(f"it is {row.state}, but its tally says {state}")
        weight = int(expected.weight)
        for key, factor in fields["children"]:
            if key in frontier:
                raise TrustError(f"its child {key} is a child of another unit too")
            frontier[key] = _Expected(row.key, factor, str(int(factor) * weight))
        if row.reading == self.chosen:
            self.total.add(fields, weight, row.seconds)

    def _compare(self, row: Any, fields: dict[str, Any]) -> None:
        """A tally must be that of its unit, and agree with the columns beside it."""
        reading = self.rows[row.reading]
        wanted = (
            row.key,
            reading.reading,
            reading.series,
            reading.method,
            reading.method_version,
            reading.lengths,
            reading.width,
            row.factor,
            row.machine,
            row.engine,
            str(row.started),
            str(row.finished),
            str(row.nodes),
        )
        if _fields_compared(fields) != wanted:
            for name, found, should in zip(_COMPARED, _fields_compared(fields), wanted, strict=True):
                if name in ("key", "reading") and found != should:
                    other = judging.name_unit(fields["key"], fields["reading"])
                    raise TrustError(f"the tally that is stored for it is that of {other}")
                if found != should:
                    raise TrustError(f"its {name} is {should}, but its tally says {found}")
        if row.versions not in self.versions:
            self.versions[row.versions] = json.loads(row.versions)
        if self.versions[row.versions] != fields["versions"]:
            raise TrustError(f"its versions are {row.versions}, but its tally says {fields['versions']}")

    def _compare_unit(self, row: Any, expected: _Expected, name: str) -> None:
        """A unit must be what the records say."""
        found = (row.parent, row.factor, row.weight)
        if found != expected:
            for word, is_now, should in zip(expected._fields, found, expected, strict=True):
                if is_now != should:
                    raise TrustError(f"its {word} is {is_now}, but the records say {should}", where=name)

    def _compare_frontier(self) -> None:
        """The units without a tally must be exactly the frontier."""
        query = (
            sa.select(
                units.c.key, units.c.reading, units.c.parent, units.c.factor, units.c.weight, units.c.state
            )
            .join_from(units, readings)
            .outerjoin(tallies, self._its_tally)
            .where(readings.c.series == self.head.id, tallies.c.unit.is_(None))
        )
        for row in stream(self.connection, query):
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
