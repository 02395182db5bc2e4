"""The ledger in memory: the reference that the databases must equal, short enough to be their definition.

It is also what `:memory:` opens: a count that keeps nothing.
"""

from __future__ import annotations

import time
import uuid
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from threading import RLock
from typing import Self

from fleetcount.errors import LedgerError, TrustError
from fleetcount.ledger import judging, leasing, record, states
from fleetcount.ledger.record import TallyRecord
from fleetcount.ledger.states import Move, State
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
    Share,
    UnitRow,
    Verdict,
)
from fleetcount.series.tally import Tally


@dataclass
class _Unit:
    row: UnitRow
    failed_on: tuple[str, ...] = ()
    tally: TallyRecord | None = None
    seconds: float = 0.0
    accepted: int = 0
    number: int = 0


@dataclass
class _Series:
    row: SeriesRow
    lease: Lease | None = None
    readings: dict[str, ReadingRow] = field(default_factory=dict)


class MemoryStore:
    """A `Store` that forgets everything when it is closed."""

    def __init__(self) -> None:
        self.location = ":memory:"
        self.notices: tuple[str, ...] = ()
        self.lease_seconds = LEASE_SECONDS
        self._lock = RLock()
        self._series: dict[str, _Series] = {}
        self._units: dict[str, dict[str, _Unit]] = {}
        self._machines: dict[str, MachineRow] = {}
        self._events: list[EventRow] = []

    def close(self) -> None:
        pass

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *exc: object) -> None:
        self.close()

    # Series and their leases

    def open_series(self, digest: str, canonical: str, written: str, opened: int) -> None:
        judging.check_definition(digest, canonical)
        with self._lock:
            self._series.setdefault(digest, _Series(SeriesRow(digest, canonical, written, opened, 0, digest)))

    def series(self) -> list[SeriesRow]:
        with self._lock:
            return [one.row for one in self._series.values()]

    def take(self, series: str, holder: Holder, wait: float = 0.0) -> Lease:
        return leasing.take(lambda: self._attempt(series, holder), series, wait)

    def _attempt(self, series: str, holder: Holder) -> Lease | leasing.Held:
        with self._lock:
            one = self._known(series)
            if one.lease is not None:
                held = leasing.Held(one.lease.holder, one.lease.ends)
                if not leasing.can_take(held, holder, _now()):
                    return held
            one.lease = Lease(series, uuid.uuid4().hex, holder, self._end())
            for unit in self._all_units(one):
                if unit.row.state is State.OUT:
                    self._move(unit, Move.HAND_BACK, token=None)
            return one.lease

    def renew(self, lease: Lease) -> Lease:
        with self._lock:
            one = self._held(lease)
            one.lease = replace(lease, ends=self._end())
            return one.lease

    def release(self, lease: Lease) -> None:
        with self._lock:
            one = self._known(lease.series)
            if one.lease is not None and one.lease.token == lease.token:
                one.lease = None

    def holder(self, series: str) -> tuple[Holder, int] | None:
        with self._lock:
            lease = self._series[series].lease if series in self._series else None
            return None if lease is None or lease.ends <= _now() else (lease.holder, lease.ends)

    # Readings

    def open_reading(self, lease: Lease, opening: str, expected: Sequence[float]) -> None:
        with self._lock:
            one = self._held(lease)
            new = judging.read_opening(opening, lease.series, expected)
            if new.reading in self._units:
                raise LedgerError("a reading of this id is open already", where=f"reading {new.reading}")
            self._chain(one, opening, lease.token)
            one.readings[new.reading] = judging.opened_row(new)
            self._units[new.reading] = {}
            for (key, factor), nodes in zip(new.roots, expected, strict=True):
                self._add(new.reading, key, None, factor, factor, nodes)

    def readings(self, series: str) -> list[ReadingRow]:
        with self._lock:
            return list(self._series[series].readings.values()) if series in self._series else []

    def finish_reading(self, lease: Lease, reading: str) -> None:
        with self._lock:
            row = self._reading(self._held(lease), reading)
            if not self.census(reading).complete:
                raise LedgerError("units of it have no tally yet", where=f"reading {reading}")
            if row.finished is None:
                self._known(lease.series).readings[reading] = replace(row, finished=_now())

    # Units

    def waiting(self, reading: str, limit: int) -> list[UnitRow]:
        rows = self.units(reading, State.WAITING)
        return sorted(rows, key=lambda row: (-row.expected, row.key))[:limit]

    def units(self, reading: str, *states: State, limit: int | None = None) -> list[UnitRow]:
        with self._lock:
            units = sorted(self._units.get(reading, {}).items())
            return [unit.row for _, unit in units if not states or unit.row.state in states][:limit]

    def hand_out(self, lease: Lease, reading: str, keys: Sequence[str], token: str) -> list[UnitRow]:
        with self._lock:
            units = self._chosen(lease, reading, keys, State.WAITING)
            return [self._move(unit, Move.HAND_OUT, token=token) for unit in units]

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
        with self._lock:
            units = [u for u in self._chosen(lease, reading, keys, State.OUT) if u.row.token == token]
            if failed is None:
                return [self._move(unit, Move.HAND_BACK, token=None) for unit in units]
            rows = []
            for unit in units:
                unit.failed_on += (machine,)
                move = Move.BAR if states.bars(unit.failed_on, machines) else Move.HAND_BACK
                rows.append(
                    self._move(
                        unit, move, token=None, attempts=len(unit.failed_on), last_error=judging.clean(failed)
                    )
                )
                if move is Move.BAR:
                    self.event(lease.series, "barred", judging.barred_text(rows[-1]))
            return rows

    def readmit(self, lease: Lease, reading: str, keys: Sequence[str]) -> list[UnitRow]:
        with self._lock:
            units = self._chosen(lease, reading, keys, State.BARRED)
            for unit in units:
                unit.failed_on = ()
            return [self._move(unit, Move.READMIT, attempts=0) for unit in units]

    def accept(self, lease: Lease, batch: Sequence[Answer]) -> list[Verdict]:
        with self._lock:
            self._held(lease)
            return [self._accept_one(lease, answer) for answer in batch]

    def _accept_one(self, lease: Lease, answer: Answer) -> Verdict:
        one = self._known(lease.series)
        try:
            tally = judging.read(answer)
            reading = one.readings.get(tally.reading)
            unit = self._units[tally.reading].get(tally.key) if reading else None
            if reading is None or unit is None:
                raise TrustError("the ledger has no such unit", where=judging.unit_name(tally))
            row = unit.row
            judging.check_fit(tally, reading, row.factor)
            verdict = judging.verdict(row.state, row.token, answer.token, unit.tally, tally)
            if verdict is Verdict.ACCEPTED:
                judging.check_new(
                    tally, [key for key, _ in tally.children if key in self._units[tally.reading]]
                )
        except TrustError as error:
            self.event(lease.series, "refused", judging.refused_text(answer, error))
            return Verdict.REFUSED
        if verdict is Verdict.DISPUTED:
            unit.row = replace(row, verdict="disputed")
            self.event(lease.series, "dispute", judging.dispute_text(tally))
        if verdict is Verdict.ACCEPTED:
            unit.accepted = self._chain(one, answer.text, answer.token)
            unit.tally, unit.seconds, unit.number = tally, answer.seconds, one.row.records
            self._move(unit, states.settling(len(tally.children)), token=None)
            for (key, factor), nodes in zip(tally.children, answer.expected, strict=True):
                self._add(tally.reading, key, tally.key, factor, factor * row.weight, nodes)
        return verdict

    # Looking

    def census(self, reading: str) -> Census:
        with self._lock:
            units = self._units.get(reading, {}).values()
            return Census({state: _share([u for u in units if u.row.state is state]) for state in State})

    def latest(self, reading: str, limit: int) -> list[Recent]:
        with self._lock:
            units = self._units.get(reading, {}).values()
            newest = sorted(units, key=lambda unit: -unit.number)[:limit]
            return [
                Recent(u.row.key, u.tally.machine, u.tally.nodes, u.seconds, u.accepted)
                for u in newest
                if u.tally
            ]

    def merge(self, series: str, reading: str, check: bool = True) -> Merged:
        with self._lock:
            one = self._known(series)
            row = self._reading(one, reading)
            table, engines, machines, seconds = Tally(row.width), set(), Counter[str](), 0.0
            units = self._units[reading]
            for unit in units.values():
                if unit.tally is not None:
                    table.add(unit.tally.rows, self._weight(units, unit))
                    engines.add(unit.tally.engine)
                    machines[unit.tally.machine] += unit.tally.nodes
                    seconds += unit.seconds
            return Merged(
                table=table,
                complete=self.census(reading).complete,
                head=one.row.head,
                records=one.row.records,
                tallies=sum(unit.tally is not None for unit in units.values()),
                nodes=sum(machines.values()),
                seconds=seconds,
                machines=dict(machines),
                engines=tuple(sorted(engines)),
                disputed=tuple(sorted(key for key, unit in units.items() if unit.row.verdict == "disputed")),
            )

    def _weight(self, units: dict[str, _Unit], unit: _Unit) -> int:
        """The product of the factors from the root down to a unit."""
        row = unit.row
        return row.factor * (self._weight(units, units[row.parent]) if row.parent is not None else 1)

    # Machines and events

    def note_machine(self, machine: Machine) -> None:
        with self._lock:
            now = _now()
            old = self._machines.get(machine.name)
            self._machines[machine.name] = MachineRow(machine, old.first_seen if old else now, now)

    def machines(self) -> list[MachineRow]:
        with self._lock:
            return [row for _, row in sorted(self._machines.items())]

    def event(self, series: str | None, kind: str, text: str) -> None:
        with self._lock:
            if series is not None:
                self._known(series)
            self._events.append(EventRow(_now(), series, kind, judging.clean(text)))

    def events(self, series: str | None = None) -> list[EventRow]:
        with self._lock:
            return [event for event in self._events if series is None or event.series == series]

    # What the methods above share

    def _known(self, series: str) -> _Series:
        if series not in self._series:
            raise LedgerError("the ledger has no such series", where=f"series {series[:12]}")
        return self._series[series]

    def _held(self, lease: Lease) -> _Series:
        one = self._known(lease.series)
        if one.lease is None or one.lease.token != lease.token:
            raise leasing.lost_error(lease.series, one.lease.holder if one.lease else None)
        return one

    def _reading(self, one: _Series, reading: str) -> ReadingRow:
        if reading not in one.readings:
            raise LedgerError("the series has no such reading", where=f"reading {reading}")
        return one.readings[reading]

    def _end(self) -> int:
        return _now() + round(self.lease_seconds * 1e6)

    def _all_units(self, one: _Series) -> list[_Unit]:
        return [unit for reading in one.readings for unit in self._units[reading].values()]

    def _chosen(self, lease: Lease, reading: str, keys: Sequence[str], state: State) -> list[_Unit]:
        self._reading(self._held(lease), reading)
        units = self._units[reading]
        return [units[key] for key in dict.fromkeys(keys) if key in units and units[key].row.state is state]

    def _move(self, unit: _Unit, move: Move, **changes: object) -> UnitRow:
        unit.row = replace(unit.row, state=states.after(unit.row.state, move), **changes)  # type: ignore[arg-type]
        return unit.row

    def _add(
        self, reading: str, key: str, parent: str | None, factor: int, weight: int, expected: float
    ) -> None:
        row = UnitRow(
            reading, key, parent, factor, weight, expected, State.WAITING, "unchecked", 0, None, None
        )
        self._units[reading][key] = _Unit(row)

    def _chain(self, one: _Series, text: str, token: str) -> int:
        """Add a record to the chain of a series; returns when it was accepted."""
        accepted = _now()
        head = record.link(one.row.head, record.checksum(text), token, accepted)
        one.row = replace(one.row, records=one.row.records + 1, head=head)
        return accepted


def _now() -> int:
    return time.time_ns() // 1000


def _share(units: list[_Unit]) -> Share:
    return Share(
        units=len(units),
        expected=sum((unit.row.expected for unit in units), 0.0),
        nodes=sum(unit.tally.nodes for unit in units if unit.tally),
        seconds=sum((unit.seconds for unit in units), 0.0),
    )
