"""The Python interface: in scripts, notebooks and threads, with a ledger, with an open Dask client."""

from __future__ import annotations

import asyncio
import os
import signal
import subprocess
import sys
import threading
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from typing import Any

import pytest

from fleetcount import FleetcountError, count
from fleetcount.errors import FleetError, InputError, LatticeError, LedgerError, SeriesError
from fleetcount.fleet import counting, dask_crew, work
from fleetcount.ledger.access import open_store
from fleetcount.ledger.states import State
from tests.fleet.crews import SQUARE_WALKS
from tests.fleet.program import LONGEST, environment, published_walks, units_out


def test_a_small_count() -> None:
    """The table gives each term as an integer, and all of them by length."""
    table = count("square", "walk", to=10)
    assert table[10] == 44100 and table.counts() == dict(enumerate(SQUARE_WALKS))
    assert table.final == 10 and table.complete and table.divisor == 1
    with pytest.raises(InputError, match="lengths 0 to 10"):
        table[11]


SCRIPT = """
import asyncio
from fleetcount import count
from fleetcount.fleet import counting

counting.OWN_PROCESS_SECONDS = counting.SHORT_SECONDS = 0.01
print(count("square", "walk", to=21, cores=2)[21])

async def cell():
    return count("square", "walk", to=20, cores=2, ledger="notebook.sqlite")

print(asyncio.run(cell())[20])
"""


def test_a_plain_script_and_a_running_event_loop(tmp_path: Path) -> None:
    """A count by a local fleet works in a script without `if __name__ == "__main__"`, and where an event loop is
    running, as in a notebook; nothing is printed but what the script prints."""
    script = tmp_path / "script.py"
    script.write_text(SCRIPT)
    done = subprocess.run(
        [sys.executable, "-W", "error", str(script)],
        cwd=tmp_path,
        env=environment(),
        capture_output=True,
        text=True,
        timeout=LONGEST,
        check=False,
    )
    assert done.stdout.split() == [str(published_walks()[n]) for n in (21, 20)], done.stderr
    assert done.stderr == ""
    assert sorted(path.name for path in tmp_path.iterdir()) == ["notebook.sqlite", "script.py"]


def test_a_ledger_that_is_named(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """With a path or a URL the tallies are kept, and a later call finds them."""
    path = tmp_path / "mine.sqlite"
    first = count("square", "walk", to=9, ledger=path)
    monkeypatch.setattr(counting, "_count", None)
    for where in (path, str(path), f"sqlite:///{path}"):
        assert count("square", "walk", to=9, ledger=where) == first
    assert count("square", "walk", to=4, ledger=path).counts() == dict(enumerate(SQUARE_WALKS[:5]))


def test_an_open_ledger() -> None:
    """With an open ledger it is left open, and several series go into it."""
    with open_store(":memory:") as store:
        assert count("square", "walk", to=5, ledger=store)[5] == 284
        assert count("square", "polygon", to=8, ledger=store)[8] == 7
        assert len(store.series()) == 2


def test_a_lattice_file(tmp_path: Path) -> None:
    """A path works as text and as a path; a broken file is an exception that says where."""
    path = tmp_path / "my-lattice.toml"
    path.write_text('name = "x')
    for name in (path, str(path)):
        with pytest.raises(LatticeError, match="line 1"):
            count(name, "walk", to=5)


@pytest.mark.parametrize(
    ("kind", "arguments"),
    [
        (InputError, {"lattice": "squrae"}),
        (SeriesError, {"object": "snake"}),
        (SeriesError, {"to": -1}),
        (SeriesError, {"to": "5"}),
        (SeriesError, {"to": 5.0}),
        (SeriesError, {"to": True}),
        (SeriesError, {"to": None}),
        (FleetcountError, {"to": 10**30}),
        (SeriesError, {"start": "hub"}),
        (LedgerError, {"ledger": "/dev/null"}),
        (InputError, {"cores": 0}),
        (InputError, {"cores": -2}),
        (InputError, {"cores": 1.5}),
        (InputError, {"cores": True}),
        (InputError, {"cores": 10**9}),
    ],
)
def test_errors_are_exceptions(kind: type[Exception], arguments: dict[str, Any]) -> None:
    """Bad input raises the error that fits, as the command line would say it in a line."""
    given = {"lattice": "square", "object": "walk", "to": 5, **arguments}
    with pytest.raises(kind) as caught:
        count(given.pop("lattice"), given.pop("object"), **given)
    assert isinstance(caught.value, FleetcountError) and "\n" not in str(caught.value)


def test_in_a_thread() -> None:
    """Counting works outside the main thread, also several counts at once."""
    with ThreadPoolExecutor(3) as pool:
        tables = list(pool.map(lambda to: count("square", "walk", to=to), (8, 9, 10)))
    assert [table[table.final or 0] for table in tables] == SQUARE_WALKS[8:11]


def test_an_interrupt(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Ctrl-C raises KeyboardInterrupt, what was counted is in the ledger, and the next call goes on from there."""
    path = tmp_path / "x.sqlite"
    monkeypatch.setattr(counting, "OWN_PROCESS_SECONDS", 1e9)
    before = signal.signal(signal.SIGINT, signal.default_int_handler)
    done = threading.Event()

    def interrupt() -> None:
        while not done.wait(0.02):
            if units_out(path):
                os.kill(os.getpid(), signal.SIGINT)
                return

    watcher = threading.Thread(target=interrupt)
    watcher.start()
    try:
        with pytest.raises(KeyboardInterrupt):
            count("square", "walk", to=30, ledger=path)
        assert signal.getsignal(signal.SIGINT) is signal.default_int_handler
    finally:
        done.set()
        watcher.join()
        signal.signal(signal.SIGINT, before)
    with open_store(str(path)) as store:
        (reading,) = store.readings(store.series()[0].digest)
        census = store.census(reading.reading)
        assert census.states[State.DIVIDED].units > 0 and census.states[State.OUT].units == 0
        assert store.holder(reading.series) is None


# With an open Dask client


@pytest.fixture
def client(monkeypatch: pytest.MonkeyPatch) -> Iterator[Any]:
    """A client of a cluster of threads; what would be a short count goes to it as well."""
    from distributed import Client, LocalCluster

    monkeypatch.setattr(counting, "OWN_PROCESS_SECONDS", 0.02)
    monkeypatch.setattr(counting, "SHORT_SECONDS", 0.02)
    with (
        LocalCluster(
            n_workers=1, threads_per_worker=2, processes=False, dashboard_address="127.0.0.1:0"
        ) as cluster,
        Client(cluster) as client,
    ):
        yield client


def test_an_open_client(client: Any) -> None:
    """The work goes to the client's cluster, which is left as it was, for the next count as well."""
    for to in (20, 21):
        assert count("square", "walk", to=to, client=client)[to] == published_walks()[to]
    assert client.submit(sum, [1, 2]).result() == 3
    assert "bundle" in client.cluster.scheduler.task_prefixes


def test_stopping_and_going_on_with_the_same_client(client: Any, tmp_path: Path) -> None:
    """A count that was stopped leaves the cluster's workers willing: the next one on the same client goes on."""
    from fleetcount.errors import StoppedError
    from fleetcount.fleet.counting import Options, count_series
    from fleetcount.fleet.interrupt import StopFlag
    from fleetcount.fleet.snapshot import Nobody, Snapshot
    from tests.fleet.crews import square_walks

    stop = StopFlag()

    class Stopper(Nobody):
        def moment(self, snapshot: Snapshot) -> None:
            stop.up = stop.up or (snapshot.top == 24 and snapshot.settled > 2)

    with open_store(str(tmp_path / "x.sqlite"), create=True) as store:
        with pytest.raises(StoppedError):
            count_series(store, square_walks(), 24, Options(client=client, stop=stop, observer=Stopper()))
        (*_, reading) = store.readings(square_walks().digest)
        assert store.census(reading.reading).states[State.OUT].units == 0
        assert not work.STOP.up
        assert count("square", "walk", to=21, client=client, ledger=store)[21] == published_walks()[21]


def test_a_cluster_without_workers(client: Any, monkeypatch: pytest.MonkeyPatch) -> None:
    """A cluster in which nobody works is waited for a while, and then named as the trouble."""
    monkeypatch.setattr(dask_crew, "NOBODY_SECONDS", 0.3)
    client.cluster.scale(0)
    client.sync(client.cluster._correct_state)
    with pytest.raises(FleetError, match="no worker"):
        count("square", "walk", to=20, client=client)


def test_a_closed_client(client: Any) -> None:
    """A client that is closed is named as the trouble."""
    client.close()
    with pytest.raises(FleetError, match="out of reach"):
        count("square", "walk", to=20, client=client)


def test_workers_that_cannot_count(client: Any, monkeypatch: pytest.MonkeyPatch) -> None:
    """Workers without this package, or with another version of it, end the count with what went wrong there."""

    def work(sent: bytes, run: str) -> bytes:
        raise ModuleNotFoundError("No module named 'fleetcount'")

    monkeypatch.setattr(dask_crew, "work", work)
    with pytest.raises(FleetError, match=r"No module named 'fleetcount'.*on every worker"):
        count("square", "walk", to=20, client=client)


def test_an_asynchronous_client(monkeypatch: pytest.MonkeyPatch) -> None:
    """An asynchronous client cannot be waited for from here: refused with what to give instead."""
    from distributed import Client

    monkeypatch.setattr(counting, "OWN_PROCESS_SECONDS", 0.02)

    async def cell() -> None:
        async with Client(processes=False, asynchronous=True, dashboard_address="127.0.0.1:0") as client:
            count("square", "walk", to=20, client=client)

    with pytest.raises(InputError, match="asynchronous"):
        asyncio.run(cell())
