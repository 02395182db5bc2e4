"""The program as real processes: started, looked at from outside, killed."""

from __future__ import annotations

import contextlib
import functools
import os
import signal
import sqlite3
import subprocess
import sys
import time
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import psutil

from fleetcount.lattice.catalogue import find
from fleetcount.ledger import tables
from fleetcount.ledger.access import open_store
from fleetcount.ledger.states import State
from fleetcount.methods import registry
from fleetcount.series.defining import define
from fleetcount.trust import published

PROGRAM = (sys.executable, "-c", "from fleetcount.cli.main import run; run()")
ROOT = Path(__file__).parents[2]
LONGEST = 120
"""Seconds that anything here may take on a very busy machine; only a hang takes so long."""


NAME = "fleetcount.sqlite"
FLEET_SECONDS = 3.5
"""Well above what a count in one process may take, since a forecast is noisy."""


@functools.cache
def few_seconds() -> int:
    """The length up to which square walks take this machine a few seconds: enough to be counted by a local fleet."""
    series = define(find("square"), "walk", None)
    method = registry.get("direct")
    method.prepare(series, range(5))
    return next(n for n in range(18, 40) if method.forecast(series, range(n + 1)).seconds > FLEET_SECONDS)


def line() -> tuple[str, ...]:
    """The command line that counts those."""
    return ("count", "square", "walk", "--to", str(few_seconds()), "--cores", "2")


def environment(**more: str) -> dict[str, str]:
    """This process's environment without what would point the program somewhere else."""
    kept = {
        k: v for k, v in os.environ.items() if not k.startswith(("FLEETCOUNT_LEDGER", "FLEETCOUNT_DEBUG"))
    }
    paths = [str(ROOT), *filter(None, [os.environ.get("PYTHONPATH")])]
    return {**kept, "PYTHONPATH": os.pathsep.join(paths), "COLUMNS": "100", **more}


def _heed_signals() -> None:
    """Whoever runs the tests in the background has his children ignore Ctrl-C."""
    for number in (signal.SIGINT, signal.SIGTERM, signal.SIGHUP):
        signal.signal(number, signal.SIG_DFL)


def run(*arguments: str, cwd: Path, env: Mapping[str, str] | None = None) -> subprocess.CompletedProcess[str]:
    """Run the program to its end."""
    return subprocess.run(
        [*PROGRAM, *arguments],
        cwd=cwd,
        env=environment(**(env or {})),
        capture_output=True,
        text=True,
        timeout=LONGEST,
        check=False,
        preexec_fn=_heed_signals,
    )


@dataclass
class Running:
    """The program while it runs, its output in files."""

    process: subprocess.Popen[bytes]
    out: Path
    err: Path

    @property
    def stdout(self) -> str:
        return self.out.read_text(encoding="utf-8")

    @property
    def stderr(self) -> str:
        return self.err.read_text(encoding="utf-8")

    def alive(self) -> bool:
        return self.process.poll() is None

    def workers(self) -> list[psutil.Process]:
        """The processes that count for it."""
        try:
            children = psutil.Process(self.process.pid).children(recursive=True)
        except psutil.NoSuchProcess:
            return []
        return [child for child in children if _counts(child)]

    def wait(self) -> int:
        """Its exit status, once it has one."""
        return self.process.wait(timeout=LONGEST)

    def says(self, text: str) -> None:
        """Wait until that text is on standard error."""
        wait_for(lambda: text in self.stderr or not self.alive())
        assert text in self.stderr, self.stderr


def _counts(process: psutil.Process) -> bool:
    with contextlib.suppress(psutil.Error):
        return "fleetcount.fleet.worker" in process.cmdline()
    return False


@contextlib.contextmanager
def running(
    *arguments: str, cwd: Path, env: Mapping[str, str] | None = None, command: Sequence[str] = PROGRAM
) -> Iterator[Running]:
    """Start the program; whatever happens, neither it nor its workers outlive the block."""
    number = len(list(cwd.glob("*.err")))
    out, err = cwd / f"{number}.out", cwd / f"{number}.err"
    with out.open("wb") as to, err.open("wb") as errors:
        process = subprocess.Popen(
            [*command, *arguments],
            cwd=cwd,
            env=environment(**(env or {})),
            stdin=subprocess.DEVNULL,
            stdout=to,
            stderr=errors,
            preexec_fn=_heed_signals,
        )
    one = Running(process, out, err)
    try:
        yield one
    finally:
        workers = one.workers()
        for left in (*workers, process):
            with contextlib.suppress(psutil.Error, OSError):
                left.kill()
        process.wait(timeout=LONGEST)


def wait_for(condition: Callable[[], Any], seconds: float = LONGEST) -> Any:
    """What the condition gives as soon as it is true."""
    end = time.monotonic() + seconds
    while True:
        found = condition()
        if found:
            return found
        assert time.monotonic() < end, "it did not happen"
        time.sleep(0.05)


def query(ledger: Path, sql: str) -> list[tuple[Any, ...]]:
    """Rows of a SQLite ledger, looked at as any other program could; none where there is no table yet."""
    if not ledger.exists():
        return []
    with contextlib.closing(sqlite3.connect(f"{ledger.absolute().as_uri()}?mode=rw", uri=True)) as connection:
        connection.execute("PRAGMA query_only = ON")
        connection.execute("PRAGMA busy_timeout = 10000")
        try:
            return connection.execute(sql).fetchall()
        except sqlite3.OperationalError as error:
            if "no such table" in str(error):
                return []
            raise


def tallies(ledger: Path) -> list[tuple[Any, ...]]:
    """Every accepted tally in the order of the chain: its place, its unit, its text as stored, its link."""
    return query(ledger, "SELECT series, number, unit, stored, link FROM tallies ORDER BY series, number")


def units_out(ledger: Path) -> int:
    """Units of the ledger that are out."""
    rows = query(ledger, "SELECT count(*) FROM units WHERE state = 'out'")
    return int(rows[0][0]) if rows else 0


def connected(process: psutil.Process) -> bool:
    """Whether a process that counts has found its coordinator."""
    with contextlib.suppress(psutil.Error):
        return any(found.status == psutil.CONN_ESTABLISHED for found in process.net_connections("tcp"))
    return False


def counting(one: Running, ledger: Path) -> bool:
    """Whether its fleet is there and has units."""
    return units_out(ledger) > 0 and any(map(connected, one.workers()))


def published_walks() -> dict[int, int]:
    """Self-avoiding walks of the square lattice as published (OEIS A001411)."""
    (table,) = [table for table in published.tables() if table.id == "walks-square"]
    return {n: count for n, count in table.terms().items() if n <= few_seconds()}


def finished(ledger: Path) -> None:
    """The table is the published one, out of records that are all checked; each unit has one tally."""
    series = define(find("square"), "walk", None)
    with open_store(str(ledger), read_only=True) as store:
        assert tables.view(store, series).table.counts() == published_walks()
        for reading in store.readings(series.digest):
            merged = store.merge(series.digest, reading.reading, check=True)
            states = store.census(reading.reading).states
            settled = states[State.COUNTED].units + states[State.DIVIDED].units
            assert merged.complete and merged.tallies == settled
        reached = [tables.reach(row) for row in store.readings(series.digest) if row.finished]
        assert sorted(set(reached)) == sorted(reached) and max(reached) == few_seconds(), (
            "a reading was begun twice"
        )
