"""From the readings of a ledger to the coefficient table: merging, and holding the readings against each other."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from fleetcount.errors import InputError, TrustError
from fleetcount.ledger.speed import nodes_a_second
from fleetcount.ledger.store import Census, Merged, ReadingRow, SeriesRow, Store
from fleetcount.methods import registry
from fleetcount.series.definition import Series
from fleetcount.series.lengths import parse_lengths
from fleetcount.series.table import CoefficientTable
from fleetcount.series.tally import Place, Tally

LEAST_BEGINNING = 4


@dataclass(frozen=True)
class OpenReading:
    """A reading that is not finished: its reach and how far it is."""

    reading: ReadingRow
    reach: int
    census: Census
    rate: float

    @property
    def seconds_left(self) -> float | None:
        """Seconds that the rest is expected to take, or None where nobody is counting it now."""
        return self.census.expected / self.rate if self.rate and not self.census.complete else None

    def document(self) -> dict[str, Any]:
        """As JSON takes it."""
        share = self.census.share_done
        return {"reach": self.reach, "share_done": share, "seconds_left": self.seconds_left}


@dataclass(frozen=True)
class View:
    """What the ledger says about a series: the table of final terms, and the readings still open."""

    table: CoefficientTable
    open: tuple[OpenReading, ...]
    readings: int


def reach(reading: ReadingRow) -> int:
    """The greatest length a reading covers."""
    return max(parse_lengths(reading.lengths))


def finished(store: Store, digest: str) -> list[ReadingRow]:
    """The finished readings of a series, the greatest reach first."""
    rows = [row for row in store.readings(digest) if row.finished is not None]
    return sorted(rows, key=reach, reverse=True)


def view(store: Store, series: Series, so_far: bool = False) -> View:
    """The table of a series, with every record of its chain checked.

    Args:
        so_far: add the partial sums of the open reading with the greatest reach.

    Raises:
        TrustError: a record was changed, or two readings do not agree on a length that both cover.
    """
    done = finished(store, series.digest)
    unfinished = [row for row in store.readings(series.digest) if row.finished is None]
    merged = {row.reading: _merge(store, series, row, check=i == 0) for i, row in enumerate(done)}
    tables = [(row, _assembled(series, row, merged[row.reading])) for row in done]
    _compare(series, tables)
    head = merged[done[0].reading].head if done else ""
    partial = None
    if unfinished and (so_far or not done):
        widest = max(unfinished, key=reach)
        found = _merge(store, series, widest, check=True)
        head = found.head
        partial = _assembled(series, widest, found, partial=True) if so_far else None
    disputed = [key for found in merged.values() for key in found.disputed]
    if disputed:
        raise TrustError("two answers for this unit do not agree", where=f"unit {disputed[0]}")
    final = reach(done[0]) if done else None
    sums = tables[0][1] if tables else Tally()
    complete = final is not None and all(reach(row) <= final for row in unfinished)
    table = CoefficientTable(series, final, sums, series.divisor, complete, head, partial)
    still_open = tuple(
        OpenReading(row, reach(row), store.census(row.reading), nodes_a_second(store, row.reading))
        for row in unfinished
    )
    return View(table, still_open, len(done) + len(unfinished))


def _merge(store: Store, series: Series, row: ReadingRow, check: bool) -> Merged:
    found = store.merge(series.digest, row.reading, check)
    if row.finished is not None and not found.complete:
        raise TrustError("marked as finished, but units of it have no tally", where=f"reading {row.reading}")
    return found


def _assembled(series: Series, row: ReadingRow, found: Merged, partial: bool = False) -> Tally:
    top = reach(row)
    table = registry.get(row.method).assemble(series, found.table, partial)
    beyond = [place for place in table.rows if place[0] > top]
    if beyond:
        raise TrustError(
            f"a sum for length {beyond[0][0]}, beyond its reach {top}", where=f"reading {row.reading}"
        )
    return table


def _compare(series: Series, tables: Sequence[tuple[ReadingRow, Tally]]) -> None:
    """Each reading against the widest one, row by row, on the lengths that both cover."""
    for row, table in tables[1:]:
        widest, reference = tables[0]
        common = reach(row)
        ours = {place: values for place, values in reference.sorted_rows() if place[0] <= common}
        theirs = dict(table.sorted_rows())
        differing = [place for place in ours.keys() | theirs.keys() if ours.get(place) != theirs.get(place)]
        if differing:
            first = min(differing)
            raise TrustError(
                f"readings {widest.reading[:8]} and {row.reading[:8]} disagree at {_named(series, first)}: "
                f"{_shown(ours.get(first))} and {_shown(theirs.get(first))}",
                where=series.title(),
                mend="one of them is wrong; count the series once more to see which",
            )


def _named(series: Series, place: Place) -> str:
    """`length 4, contacts 1`."""
    names = ("length", *series.columns[1 : len(place)])
    return ", ".join(f"{name} {value}" for name, value in zip(names, place, strict=True))


def _shown(values: tuple[int, ...] | None) -> str:
    return " ".join(map(str, values)) if values else "0"


def find_series(store: Store, beginning: str) -> SeriesRow:
    """The one series whose digest begins so.

    Raises:
        InputError: none does, or several do.
    """
    found = [row for row in store.series() if row.digest.startswith(beginning.lower())]
    if len(found) == 1:
        return found[0]
    if not found:
        raise InputError(f"no series with a digest that begins with {beginning}", where=store.location)
    several = ", ".join(row.digest[:12] for row in found[:4])
    raise InputError(
        f"{len(found)} series begin with {beginning}", where=store.location, mend=f"say more: {several}"
    )
