"""Small true stories for ledgers: a series, readings of it, and the answers of machines."""

from __future__ import annotations

import uuid
from collections.abc import Mapping, Sequence
from dataclasses import replace

from fleetcount.ledger import leasing, record
from fleetcount.ledger.record import OpeningRecord, Part, TallyRecord
from fleetcount.ledger.store import Answer, Holder, Lease, Store, UnitRow
from fleetcount.series import canonical
from fleetcount.series.tally import Tally

DEFINITION = canonical.text({"lattice": "square", "object": "walk"})
DIGEST = canonical.digest(DEFINITION)
OTHER_DEFINITION = canonical.text({"lattice": "cubic", "object": "polygon"})
OTHER_DIGEST = canonical.digest(OTHER_DEFINITION)

GONE = Holder(leasing.this_process().machine, leasing.this_process().boot, 2**22 + 1, 1)
"""A coordinator of this machine that is gone: no process has an id above the limit of the system."""

ELSEWHERE = Holder("rowan", "another boot", 4711, 1)
"""A coordinator of another machine, of which nothing can be known."""


def begin(store: Store, holder: Holder = GONE, digest: str = DIGEST, definition: str = DEFINITION) -> Lease:
    """Make the series known and take its lease, by default as a coordinator that is already gone."""
    store.open_series(digest, definition, "{}", 1)
    return store.take(digest, holder)


def opening(
    roots: Sequence[Part],
    reading: str | None = None,
    lengths: str = "0-9",
    digest: str = DIGEST,
    width: int = 1,
) -> OpeningRecord:
    return OpeningRecord(
        series=digest,
        reading=reading or uuid.uuid4().hex,
        purpose="count",
        method="direct",
        method_version=1,
        lengths=lengths,
        roots=tuple(roots),
        opened=1_790_000_000_000_000,
        width=width,
    )


def open_reading(store: Store, lease: Lease, roots: Sequence[Part], **more: object) -> OpeningRecord:
    """Open a reading with expected work 10, 20, ... for its roots."""
    new = opening(roots, **more)  # type: ignore[arg-type]
    store.open_reading(lease, new.text(), [10.0 * (i + 1) for i in range(len(roots))])
    return new


def tally(
    reading: OpeningRecord,
    key: str,
    factor: int,
    counts: Mapping[int, int],
    children: Sequence[Part] = (),
    machine: str = "alder",
    nodes: int = 7,
) -> TallyRecord:
    return TallyRecord(
        series=reading.series,
        reading=reading.reading,
        method=reading.method,
        method_version=reading.method_version,
        lengths=reading.lengths,
        key=key,
        factor=factor,
        children=tuple(children),
        rows=Tally.of_counts(counts),
        engine="e" * 64,
        versions={"python": "3.11.7", "numba": "0.61.0", "llvmlite": "0.44.0", "numpy": "2.1.0"},
        machine=machine,
        nodes=nodes,
        started=1_790_000_000_000_000,
        finished=1_790_000_001_000_000,
    )


def answer(tally: TallyRecord, token: str, seconds: float = 0.5) -> Answer:
    text = tally.text()
    return Answer(text, record.checksum(text), token, [3.0] * len(tally.children), seconds)


def settle(
    store: Store,
    lease: Lease,
    reading: OpeningRecord,
    row: UnitRow,
    counts: Mapping[int, int],
    children: Sequence[Part] = (),
    **more: object,
) -> None:
    """Hand one unit out and accept its tally."""
    token = uuid.uuid4().hex
    store.hand_out(lease, reading.reading, [row.key], token)
    new = tally(reading, row.key, row.factor, counts, children, **more)  # type: ignore[arg-type]
    assert store.accept(lease, [answer(new, token)]) == ["accepted"]


def story(store: Store, lease: Lease) -> tuple[OpeningRecord, OpeningRecord]:
    """Two readings of one series: the first complete, in five units; the second half done.

    The first sums to 1 + 4x + (4*3)xx + (4*2*5)xxx.
    """
    first = open_reading(store, lease, [("0:", 1)])
    one, two = first, open_reading(store, lease, [("0:0", 4), ("0:1", -2)], lengths="0-12")
    settle(store, lease, one, unit(store, one, "0:"), {0: 1}, [("0:0", 4)])
    settle(store, lease, two, unit(store, two, "0:0"), {1: 10, 2: 20}, [("0:0.0", 1), ("0:0.1", 2)])
    settle(store, lease, one, unit(store, one, "0:0"), {1: 1}, [("0:0.0", 1), ("0:0.1", 2)], machine="birch")
    settle(store, lease, one, unit(store, one, "0:0.0"), {2: 3})
    settle(store, lease, two, unit(store, two, "0:0.0"), {2: 3})
    settle(store, lease, one, unit(store, one, "0:0.1"), {3: 5}, [("0:0.1.0", 1)], machine="birch")
    settle(store, lease, one, unit(store, one, "0:0.1.0"), {})
    return one, two


def unit(store: Store, reading: OpeningRecord, key: str) -> UnitRow:
    """One unit."""
    return next(row for row in store.units(reading.reading) if row.key == key)


def relabelled(tally: TallyRecord, machine: str) -> TallyRecord:
    """The same tally from another machine."""
    return replace(tally, machine=machine)
