"""Two coordinators on one series, as real processes; and the whole on a PostgreSQL ledger."""

from __future__ import annotations

import contextlib
import json
import re
import signal
import sqlite3
from pathlib import Path

import psutil
import pytest

from fleetcount import host
from fleetcount.lattice.catalogue import find
from fleetcount.ledger import tables
from fleetcount.ledger.access import open_store
from fleetcount.ledger.states import State
from fleetcount.ledger.store import Share
from fleetcount.series.defining import define
from tests.cli.conftest import Fleetcount
from tests.fleet.program import (
    NAME,
    Running,
    connected,
    counting,
    few_seconds,
    finished,
    line,
    published_walks,
    query,
    running,
    units_out,
    wait_for,
)


def test_the_second_says_who_holds_it(tmp_path: Path, fleetcount: Fleetcount) -> None:
    """A second coordinator is told which process on which machine holds the series and until when; it waits only
    where that is asked for, and then prints the same table. Another series can be counted meanwhile."""
    with running(*line(), cwd=tmp_path) as first:
        wait_for(lambda: units_out(tmp_path / NAME))
        with running(*line(), "--wait", "--json", cwd=tmp_path) as waiting:
            refused = fleetcount(*line())
            assert (refused.status, refused.out) == (2, "")
            (said,) = [text for text in refused.err.splitlines() if text.startswith("fleetcount:")]
            assert f"process {first.process.pid} on {host.machine_name()}" in said
            assert re.search(r"until \d\d:\d\d:\d\d", said) and "--wait" in said
            other = fleetcount("count", "square", "polygon", "--to", "8", "--plain")
            assert other.status == 0 and other.out.endswith("8 7\n"), other.err
            assert first.wait() == 0, first.stderr
            assert waiting.wait() == 0, waiting.stderr
    assert json.loads(waiting.stdout)["rows"] == [[n, str(c)] for n, c in published_walks().items()]
    assert len(query(tmp_path / NAME, "SELECT 1 FROM events WHERE kind = 'coordinator started'")) >= 2
    finished(tmp_path / NAME)


def stopped_between_transactions(one: Running, ledger: Path) -> bool:
    """Stop a process; one that has the ledger locked just now goes on."""
    one.process.send_signal(signal.SIGSTOP)
    with contextlib.closing(sqlite3.connect(ledger, timeout=1, isolation_level=None)) as connection:
        try:
            connection.execute("BEGIN IMMEDIATE")
            return True
        except sqlite3.OperationalError:
            one.process.send_signal(signal.SIGCONT)
            return False


@pytest.mark.long
def test_one_that_stands_still(tmp_path: Path) -> None:
    """A stopped process that comes back after another has taken its series over ends with a clear line, and harms
    nothing."""
    ledger = tmp_path / NAME
    with running(*line(), cwd=tmp_path) as one:
        wait_for(lambda: counting(one, ledger))
        wait_for(lambda: stopped_between_transactions(one, ledger))
        with running(*line(), cwd=tmp_path) as two:
            assert two.wait() == 0, two.stderr
        one.process.send_signal(signal.SIGCONT)
        assert one.wait() == 2
        assert "does not hold it any more" in one.stderr.splitlines()[-1]
        _, left = psutil.wait_procs(one.workers(), timeout=5)
        assert not left
    finished(ledger)


def test_a_postgresql_ledger(tmp_path: Path, postgres: str, fleetcount: Fleetcount) -> None:
    """The main job on PostgreSQL: killed, gone on with by the same line, shown, and printed as published."""
    series = define(find("square"), "walk", None)
    env = {"FLEETCOUNT_LEDGER": postgres}

    def out() -> int:
        with open_store(postgres, read_only=True) as store:
            readings = store.readings(series.digest)
            if not readings or tables.reach(readings[-1]) < few_seconds():
                return 0
            return store.census(readings[-1].reading).states.get(State.OUT, Share()).units

    def quietly() -> int:
        try:
            return out()
        except Exception:  # noqa: BLE001 - not made yet
            return 0

    with running(*line(), cwd=tmp_path, env=env) as one:
        wait_for(lambda: quietly() and any(map(connected, one.workers())))
        one.process.kill()
        one.wait()
    shown = json.loads(fleetcount("progress", "--json", "--ledger", postgres).out)
    assert 0 < shown["series"][0]["readings"][-1]["share_done"] < 1
    with running(*line(), "--json", cwd=tmp_path, env=env) as one:
        assert one.wait() == 0, one.stderr
    table = json.loads(fleetcount("table", "square", "walk", "--json", "--ledger", postgres).out)
    assert table == json.loads(one.stdout)
    assert table["rows"] == [[n, str(c)] for n, c in published_walks().items()]
    assert not list(tmp_path.glob("*.sqlite*"))
