"""Real processes that want the same series at the same instant."""

from __future__ import annotations

import os
import re
import selectors
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path

import pytest

from fleetcount.ledger.access import open_store
from fleetcount.ledger.store import Holder
from tests.ledger.builders import DEFINITION, DIGEST, GONE, begin

ROOT = Path(__file__).parents[2]


@pytest.fixture(params=["sqlite", "postgresql"])
def where(request: pytest.FixtureRequest, tmp_path: Path) -> str:
    """A new ledger that knows one series."""
    path = str(tmp_path / "x.sqlite") if request.param == "sqlite" else request.getfixturevalue("postgres")
    with open_store(path, create=True) as store:
        store.open_series(DIGEST, DEFINITION, "{}", 1)
    return path


class Racer:
    def __init__(self, where: str) -> None:
        self.process = subprocess.Popen(
            [sys.executable, "-m", "tests.ledger.racer", where],
            cwd=ROOT,
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            text=True,
            bufsize=1,
        )
        assert self.hear() == "ready"

    def say(self, word: str) -> None:
        assert self.process.stdin is not None
        self.process.stdin.write(word + "\n")
        self.process.stdin.flush()

    def hear(self) -> str:
        assert self.process.stdout is not None
        return self.process.stdout.readline().strip()

    def end(self) -> None:
        for stream in (self.process.stdin, self.process.stdout):
            assert stream is not None
            stream.close()
        self.process.wait(10)


@pytest.fixture
def racers(where: str) -> Iterator[list[Racer]]:
    both = [Racer(where), Racer(where)]
    yield both
    for racer in both:
        racer.end()


def _first(racers: list[Racer], seconds: float) -> Racer | None:
    """A racer that has something to say, once one has."""
    with selectors.DefaultSelector() as selector:
        for racer in racers:
            assert racer.process.stdout is not None
            selector.register(racer.process.stdout, selectors.EVENT_READ, racer)
        return next((key.data for key, _ in selector.select(seconds)), None)


def test_never_two_holders(where: str, racers: list[Racer]) -> None:
    """Two processes that take a lease at the same instant, free or left by the dead, 50 times: one gets it."""
    with open_store(where) as store:
        for round_ in range(50):
            if round_ % 2:
                store.take(DIGEST, GONE)
            for racer in racers:
                racer.say("take")
            winner = _first(racers, 20)
            assert winner is not None
            (loser,) = [racer for racer in racers if racer is not winner]
            said = winner.hear()
            assert said.startswith("took"), said
            while _first([loser], 0.05) is None:
                winner.say("renew")
                assert winner.hear() == "renewed"
            said = loser.hear()
            assert said.startswith(f"held series {DIGEST[:12]}: process {winner.process.pid} on "), said
            assert re.search(r"holds it until \d\d:\d\d:\d\d", said)
            found = store.holder(DIGEST)
            assert found is not None and found[0].pid == winner.process.pid
            winner.say("release")
            assert winner.hear() == "released"


def test_a_killed_holder_is_succeeded_at_once(where: str, racers: list[Racer]) -> None:
    """After SIGKILL of the holder another process goes on at once, though nobody has waited for the dead one."""
    first, second = racers
    first.say("take")
    assert first.hear().startswith("took")
    os.kill(first.process.pid, signal.SIGKILL)
    os.waitid(os.P_PID, first.process.pid, os.WEXITED | os.WNOWAIT)  # dead, and a zombie still
    start = time.monotonic()
    second.say("take")
    assert second.hear().startswith("took")
    assert time.monotonic() - start < 3


def test_a_process_id_used_again_is_not_the_holder(where: str) -> None:
    """A living process under the holder's id, but started at another time, is not the holder."""
    with open_store(where) as store:
        store.take(DIGEST, Holder(GONE.machine, GONE.boot, os.getpid(), 1))
        start = time.monotonic()
        store.take(DIGEST, GONE)
        assert time.monotonic() - start < 3


def test_the_ledger_is_made_once(tmp_path: Path) -> None:
    """Processes that make the same ledger at the same instant all find it made."""
    path = tmp_path / "new.sqlite"
    code = (
        "import sys; from fleetcount.ledger.access import open_store\n"
        "import sqlalchemy, alembic.command; from fleetcount.ledger.sql import store\n"
        "print('ready', flush=True); sys.stdin.readline()\n"
        "open_store(sys.argv[1], create=True).close(); print('made')"
    )
    processes = [
        subprocess.Popen(
            [sys.executable, "-c", code, str(path)],
            cwd=ROOT,
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            text=True,
        )
        for _ in range(4)
    ]
    for process in processes:
        assert process.stdout is not None and process.stdout.readline() == "ready\n"
    for process in processes:
        assert process.stdin is not None
        process.stdin.write("go\n")
        process.stdin.flush()
    for process in processes:
        out, _ = process.communicate(timeout=60)
        assert (process.returncode, out) == (0, "made\n")
    with open_store(str(path)) as store:
        begin(store)
