"""Reading the records of a series in the order of its chain, each of them checked on the way.

The records of a series are read once, in the order of the chain. What follows from them is kept as the
*frontier*: the units that openings and tallies have named and no tally has settled yet. Each tally must
settle a unit of the frontier; what is left at the end must be exactly the units of the ledger that have no
tally. So memory grows with the frontier only.
"""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import replace
from operator import itemgetter
from typing import Any, NamedTuple

import sqlalchemy as sa

from fleetcount.errors import TrustError
from fleetcount.ledger import judging, record, states
from fleetcount.ledger.record import OpeningRecord, TallyRecord
from fleetcount.ledger.sql.schema import readings, tallies, units
from fleetcount.ledger.sql.summing import Sum, fields_of, stored_in, stored_text, stream
from fleetcount.ledger.sql.units import reading_row
from fleetcount.ledger.states import MOVES, OPEN, SETTLED
from fleetcount.series import canonical

_COMPARED = (
    "key", "factor", "machine", "engine", "started", "finished", "nodes",
    "reading", "series", "method", "method_version", "lengths", "width",
)  # fmt: skip
"""The fields of a tally that the tables repeat, the last six of them in the readings table."""

_STATES = {divided: MOVES[states.settling(divided)].after for divided in (False, True)}
"""The state of a unit by whether its tally left children."""

_compared = itemgetter(*_COMPARED)

_Derived = tuple[str | None, str, str]
"""What follows from the records about a unit: parent, factor and weight, as the units table writes them."""


class _Entry(NamedTuple):
    """A tally and its unit, whose columns are None where it is missing. (Faster to look into than a row.)"""

    number: int
    stored: bytes
    checksum: str
    link: str
    token: str
    accepted: int
    machine: str
    engine: str
    versions: str
    started: int
    finished: int
    key: str
    reading: int
    parent: str | None
    factor: str
    weight: str
    state: str
    nodes: int
    seconds: float | None


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
        self.frontier: dict[int, dict[str, _Derived]] = {}
        self.names: dict[int, str] = {}
        self.fixed: dict[int, tuple[object, ...]] = {}
        self.versions: dict[str, Any] = {}
        self.number, self.link = 0, str(head.digest)
        self._its_tally = sa.and_(tallies.c.unit == units.c.id, tallies.c.series == head.id)
        self.broken: TrustError | None = None

    def run(self) -> None:
        """Check everything and sum. A broken link is held back until no unit can be named more exactly."""
        where = f"series {self.head.digest[:12]}"
        if canonical.digest(self.head.canonical) != self.head.digest:
            raise TrustError("its definition has been changed", where=where)
        self._find_settled_without_tally()
        try:
            self._follow_chain()
            self._compare_frontier()
        except (TypeError, ValueError) as error:
            raise TrustError(f"a table holds what does not belong there ({error})", where=where) from None
        if self.broken is None and (self.number, self.link) != (self.head.records, self.head.head):
            self.broken = TrustError(
                f"its chain has {self.number} records, {self.head.records} were written: the end is missing",
                where=where,
            )
        if self.broken is not None:
            raise self.broken

    def _follow_chain(self) -> None:
        waiting = list(reversed(self.openings))
        with stream(self.connection, self._tallies()) as rows:
            for row in map(_Entry._make, rows):
                while waiting and waiting[-1].number <= row.number:
                    self._open(waiting.pop())
                self._settle(row)
        while waiting:
            self._open(waiting.pop())

    def _name(self, key: str | None, number: int | None) -> str:
        return judging.name_unit(str(key), self.names.get(number or 0, "unknown"))

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

    def _tallies(self) -> sa.Select[Any]:
        """The columns of `_Entry`, in their order."""
        beside = ("checksum", "link", "token", "accepted")
        counted = ("machine", "engine", "versions", "started", "finished")
        unit = ("key", "reading", "parent", "factor", "weight", "state", "nodes", "seconds")
        columns = [tallies.c[name] for name in beside + counted] + [units.c[name] for name in unit]
        return (
            sa.select(tallies.c.number, stored_in(tallies), *columns)
            .join_from(tallies, units, tallies.c.unit == units.c.id, isouter=True)
            .where(tallies.c.series == self.head.id)
            .order_by(tallies.c.number)
        )

    def _follow(self, row: Any, name: Callable[[], str]) -> None:
        """The next record of the chain must be the one that follows."""
        link = record.link(self.link, row.checksum, row.token, row.accepted)
        if self.broken is None and (row.number != self.number + 1 or link != row.link):
            self.broken = TrustError(
                "its record does not follow from the one before it in the chain", where=name()
            )
        self.number, self.link = row.number, row.link

    def _open(self, row: Any) -> None:
        """An opening: its roots join the frontier."""
        name = f"opening of reading {row.reading[:12]}"
        opening = OpeningRecord.parse(stored_text(row, name))
        self._follow(row, lambda: name)
        kept = replace(reading_row(self.head.digest, row), finished=None)
        if judging.opened_row(opening) != kept:
            raise TrustError("its record and the readings table do not agree", where=name)
        self.names[row.id] = kept.reading
        self.fixed[row.id] = (
            kept.reading, kept.series, kept.method, kept.method_version, kept.lengths, kept.width,
        )  # fmt: skip
        self.frontier[row.id] = {key: (None, str(factor), str(factor)) for key, factor in opening.roots}

    def _settle(self, row: _Entry) -> None:
        """A tally: its unit leaves the frontier, its children join it."""
        if row.key is None:
            tally = TallyRecord.parse(stored_text(row, f"the tally of a missing unit, record {row.number}"))
            raise TrustError("it has a tally, but the unit is missing", where=judging.unit_name(tally))
        try:
            text = stored_text(row, "")
            self._follow(row, lambda: self._name(row.key, row.reading))
            self._settle_unit(row, fields_of(text))
        except TrustError as error:
            raise TrustError(error.what, where=self._name(row.key, row.reading)) from None
        except (KeyError, TypeError, ValueError, AttributeError):
            raise TrustError(
                "its stored record is no tally", where=self._name(row.key, row.reading)
            ) from None

    def _settle_unit(self, row: _Entry, fields: dict[str, Any]) -> None:
        if row.reading not in self.frontier:
            raise TrustError("its reading was not opened before")
        self._compare(row, fields)
        frontier = self.frontier[row.reading]
        derived = frontier.pop(row.key, None)
        if derived is None:
            raise TrustError("no record before its tally names it, or it has two tallies")
        self._compare_unit(row, derived)
        children = fields["children"]
        state = _STATES[bool(children)]
        if row.state != state:
            raise TrustError(f"it is {row.state}, but its tally says {state}")
        weight = int(derived[2])
        for key, factor in children:
            if key in frontier:
                raise TrustError(f"its child {key} is a child of another unit too")
            frontier[key] = (row.key, factor, str(int(factor) * weight))
        if row.reading == self.chosen:
            self.total.add(fields, weight, row.seconds)

    def _compare(self, row: _Entry, fields: dict[str, Any]) -> None:
        """A tally must be that of its unit, and agree with the columns beside it."""
        times = (str(row.started), str(row.finished), str(row.nodes))
        wanted = (row.key, row.factor, row.machine, row.engine, *times, *self.fixed[row.reading])
        found = _compared(fields)
        if found != wanted:
            if (fields["key"], fields["reading"]) != (row.key, self.names[row.reading]):
                other = judging.name_unit(fields["key"], fields["reading"])
                raise TrustError(f"the tally that is stored for it is that of {other}")
            for name, tells, should in zip(_COMPARED, found, wanted, strict=True):
                if tells != should:
                    raise TrustError(f"its {name} is {should}, but its tally says {tells}")
        versions = self.versions.get(row.versions)
        if versions is None:
            versions = self.versions[row.versions] = json.loads(row.versions)
        if versions != fields["versions"]:
            raise TrustError(f"its versions are {row.versions}, but its tally says {fields['versions']}")

    def _compare_unit(self, row: Any, derived: _Derived) -> None:
        """A unit must be what the records say."""
        found = (row.parent, row.factor, row.weight)
        if found != derived:
            for word, is_now, should in zip(("parent", "factor", "weight"), found, derived, strict=True):
                if is_now != should:
                    raise TrustError(
                        f"its {word} is {is_now}, but the records say {should}",
                        where=self._name(row.key, row.reading),
                    )

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
        with stream(self.connection, query) as rows:
            for row in rows:
                derived = self.frontier.get(row.reading, {}).pop(row.key, None)
                if derived is None:
                    name = self._name(row.key, row.reading)
                    raise TrustError("no record names it: it was added by another hand", where=name)
                self._compare_unit(row, derived)
                if row.state not in OPEN:
                    name = self._name(row.key, row.reading)
                    raise TrustError(f"it is {row.state}, which is no state without a tally", where=name)
        for number, left in self.frontier.items():
            if left:
                raise TrustError(
                    "the records name it, but it is missing", where=self._name(min(left), number)
                )
