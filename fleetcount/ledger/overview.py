"""What a ledger holds at a glance: its series, their readings, how far each is and how fast it goes."""

from __future__ import annotations

import json
from dataclasses import dataclass
from typing import Any

from fleetcount.ledger.speed import nodes_a_second
from fleetcount.ledger.states import State
from fleetcount.ledger.store import Census, Holder, MachineRow, ReadingRow, SeriesRow, Store
from fleetcount.ledger.tables import reach
from fleetcount.series.definition import Series, from_canonical


@dataclass(frozen=True)
class ReadingView:
    """A reading, its units by state, its speed lately (nodes a second) and the seconds it is expected to need."""

    row: ReadingRow
    census: Census
    rate: float
    seconds_left: float | None

    def document(self) -> dict[str, Any]:
        """As JSON takes it."""
        return {
            "reading": self.row.reading,
            "purpose": self.row.purpose,
            "method": self.row.method,
            "lengths": self.row.lengths,
            "opened": self.row.opened,
            "finished": self.row.finished,
            "units": {state.value: self.census.states[state].units for state in State},
            "share_done": self.census.share_done,
            "nodes": str(self.census.nodes),
            "core_seconds": self.census.seconds,
            "nodes_a_second": self.rate,
            "seconds_left": self.seconds_left,
        }


@dataclass(frozen=True)
class SeriesView:
    """A series of the ledger with its readings and who holds it until when (microseconds UTC)."""

    row: SeriesRow
    series: Series
    readings: tuple[ReadingView, ...]
    holder: tuple[Holder, int] | None

    @property
    def final(self) -> int | None:
        """Greatest reach of a finished reading."""
        return max((reach(r.row) for r in self.readings if r.row.finished is not None), default=None)

    def document(self) -> dict[str, Any]:
        """As JSON takes it."""
        holder = None
        if self.holder is not None:
            who, until = self.holder
            holder = {"machine": who.machine, "process": who.pid, "until": until}
        return {
            **self.series.written(),
            "digest": self.row.digest,
            "final": self.final,
            "records": self.row.records,
            "held_by": holder,
            "readings": [reading.document() for reading in self.readings],
        }


@dataclass(frozen=True)
class Overview:
    """A whole ledger."""

    location: str
    series: tuple[SeriesView, ...]
    machines: tuple[MachineRow, ...]

    def document(self) -> dict[str, Any]:
        """As JSON takes it."""
        return {
            "format": 1,
            "ledger": self.location,
            "series": [view.document() for view in self.series],
            "machines": [
                {
                    "name": row.machine.name,
                    "state": row.machine.standing,
                    "processor": row.machine.processor,
                    "system": row.machine.system,
                    "versions": dict(row.machine.versions),
                    "first_seen": row.first_seen,
                    "last_seen": row.last_seen,
                }
                for row in self.machines
            ],
        }


def overview(store: Store) -> Overview:
    """Look at everything; nothing is checked, for that is what tables and audits are for."""
    views = []
    for row in store.series():
        readings = tuple(_reading(store, reading) for reading in store.readings(row.digest))
        views.append(SeriesView(row, series_of(row), readings, store.holder(row.digest)))
    return Overview(store.location, tuple(views), tuple(store.machines()))


def series_of(row: SeriesRow) -> Series:
    """The series that a row of the ledger defines."""
    return from_canonical(json.loads(row.canonical), json.loads(row.written))


def _reading(store: Store, row: ReadingRow) -> ReadingView:
    census = store.census(row.reading)
    rate = 0.0 if row.finished is not None else nodes_a_second(store, row.reading)
    left = census.expected / rate if rate and not census.complete else None
    return ReadingView(row, census, rate, left)
