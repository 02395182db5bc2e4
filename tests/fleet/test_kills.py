"""Processes killed without warning, in the middle of one count: it goes on where it was and is exact in the end."""

from __future__ import annotations

import contextlib
import os
import random
import time
import uuid
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import psutil
import pytest

from fleetcount.lattice.catalogue import find
from fleetcount.ledger.access import open_store
from fleetcount.ledger.leasing import this_process
from fleetcount.series.defining import define
from tests.fleet.program import (
    NAME,
    ROOT,
    Running,
    connected,
    few_seconds,
    finished,
    line,
    query,
    running,
    tallies,
    units_out,
    wait_for,
)

FEW, MANY = 5, 20


@contextlib.contextmanager
def marked(folder: Path) -> Iterator[tuple[Running, str]]:
    """The line under test, running, with a mark by which its processes can be found whoever adopts them."""
    mark = uuid.uuid4().hex
    with running(*line(), cwd=folder, env={"TEST_MARK": mark}) as one:
        yield one, mark


def left_over(mark: str) -> list[psutil.Process]:
    """Every process that has the mark in its environment."""
    found = []
    for process in psutil.process_iter():
        with contextlib.suppress(psutil.Error):
            if process.environ().get("TEST_MARK") == mark and process.status() != psutil.STATUS_ZOMBIE:
                found.append(process)
    return found


def kill_once(folder: Path, chance: random.Random, counting: bool) -> tuple[bool, bool]:
    """Start the line and kill it at a random moment: of the counting, or of all from the start on.

    Returns: whether it was killed, and whether it had printed its table.
    """
    ledger = folder / NAME
    with marked(folder) as (one, mark):
        if counting:
            wait_for(lambda: units_out(ledger) or not one.alive())
        time.sleep(chance.uniform(0, 1.5) if counting else chance.uniform(0.1, 5))
        killed = one.alive()
        one.process.kill()
        one.wait()
        wait_for(lambda: not left_over(mark), seconds=5)
    return killed, "square walk" in one.stdout


def kill_coordinators(folder: Path, times: int, seed: int) -> None:
    """Run the line again and again in one folder, killing it at random moments, and then to its end.

    A count that ends too soon is checked, and another one begun.
    """
    chance, kills, before = random.Random(seed), 0, list[tuple[Any, ...]]()
    while kills < times:
        killed, done = kill_once(folder, chance, counting=kills % 2 == 1)
        kills += killed
        now = tallies(folder / NAME)
        assert now[: len(before)] == before, "a tally that was accepted has changed"
        before = now
        if done:
            finished(folder / NAME)
            folder, before = folder / "again", []
            folder.mkdir()
    with marked(folder) as (one, _):
        assert one.wait() == 0, one.stderr
    assert tallies(folder / NAME)[: len(before)] == before
    finished(folder / NAME)


def test_a_killed_coordinator(tmp_path: Path) -> None:
    """Killed at random moments and started again with the same line, the count ends with the published table;
    what was accepted stays as it was, and nothing of ours is left five seconds after each kill."""
    kill_coordinators(tmp_path, FEW, seed=1)


@pytest.mark.long
@pytest.mark.timeout(900)
def test_a_coordinator_killed_many_times(tmp_path: Path) -> None:
    """The same twenty times."""
    kill_coordinators(tmp_path, MANY, seed=2)


def test_the_same_line_at_once_after_a_kill(tmp_path: Path) -> None:
    """The lease of a killed coordinator of this machine is not waited for."""
    ledger = tmp_path / NAME
    with marked(tmp_path) as (one, _):
        wait_for(lambda: units_out(ledger))
        one.process.kill()
        one.wait()
    ((token, ends),) = query(ledger, "SELECT token, ends FROM leases")
    assert token is not None
    with marked(tmp_path) as (one, _):
        wait_for(lambda: query(ledger, "SELECT token FROM leases") != [(token,)])
        ((taken,),) = query(ledger, "SELECT max(at) FROM events WHERE kind = 'coordinator started'")
        assert taken < ends
        one.process.kill()


def kill_workers(folder: Path, times: int, seed: int) -> None:
    """Kill the process that counts, again and again within one count, each time while units are out."""
    chance, killed = random.Random(seed), set[int]()
    ledger = folder / NAME

    def counting(one: Running) -> list[psutil.Process]:
        workers = [worker for worker in one.workers() if worker.pid not in killed and connected(worker)]
        return workers if units_out(ledger) else []

    with marked(folder) as (one, _):
        while len(killed) < times:
            (worker,) = wait_for(lambda: counting(one))
            time.sleep(chance.uniform(0, 2))
            assert one.alive(), f"it ended after {len(killed)} kills: {one.stderr}"
            worker.kill()
            killed.add(worker.pid)
        assert one.wait() == 0, one.stderr
        assert "square walk" in one.stdout
    lost = query(ledger, "SELECT count(*) FROM events WHERE kind = 'bundle lost'")
    assert lost[0][0] >= times // 2
    finished(ledger)


def test_a_killed_worker(tmp_path: Path) -> None:
    """The process that counts is killed again and again: another one takes its place, the table is exact."""
    kill_workers(tmp_path, FEW, seed=3)


@pytest.mark.long
@pytest.mark.timeout(900)
def test_a_worker_killed_many_times(tmp_path: Path) -> None:
    """The same twenty times."""
    kill_workers(tmp_path, MANY, seed=4)


LONG_READING = "units JOIN readings ON readings.id = units.reading WHERE readings.lengths = '0-{}'"
POISON = """
import os, signal, sys
if "fleetcount.fleet.worker" in sys.orig_argv:
    import fleetcount.fleet.work as work
    honest = work.answer_unit
    def answer_unit(task, method, key, *more):
        if key == os.environ["POISON"]:
            os.kill(os.getpid(), signal.SIGKILL)
        return honest(task, method, key, *more)
    work.answer_unit = answer_unit
"""


@pytest.mark.long
@pytest.mark.timeout(600)
def test_a_unit_that_kills_its_process(tmp_path: Path) -> None:
    """A unit over which every process dies is barred in the end, all else is counted; where it kills no more, and is
    let in again, the count is completed."""
    ledger = tmp_path / NAME
    long_reading = LONG_READING.format(few_seconds())
    counted = f"SELECT 1 FROM {long_reading} AND units.state = 'counted'"
    waiting = f"SELECT units.key FROM {long_reading} AND units.state = 'waiting' ORDER BY expected LIMIT 1"
    with running(*line(), cwd=tmp_path) as one:
        wait_for(lambda: query(ledger, counted))
        one.process.kill()
        one.wait()
    ((key,),) = query(ledger, waiting)
    folder = tmp_path / "poison"
    folder.mkdir()
    (folder / "sitecustomize.py").write_text(POISON)
    with running(
        *line(), cwd=tmp_path, env={"POISON": key, "PYTHONPATH": f"{folder}{os.pathsep}{ROOT}"}
    ) as one:
        status = one.wait()
    assert status == 1, one.stderr
    last = one.stderr.splitlines()[-1]
    assert last.startswith(f"fleetcount: unit {key}: barred after 3 failures") and "died each time" in last
    assert set(query(ledger, "SELECT key FROM units WHERE state NOT IN ('counted', 'divided')")) == {(key,)}
    with open_store(str(ledger)) as store:
        series = define(find("square"), "walk", None)
        lease = store.take(series.digest, this_process())
        store.readmit(lease, store.readings(series.digest)[-1].reading, [key])
        store.release(lease)
    with running(*line(), cwd=tmp_path) as one:
        assert one.wait() == 0, one.stderr
    finished(ledger)
