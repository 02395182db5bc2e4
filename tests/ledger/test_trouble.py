"""Disks and processes that do not do what they should: one clear line, nothing lost, and it goes on afterwards."""

from __future__ import annotations

import os
import shutil
import signal
import sqlite3
import subprocess
import sys
import threading
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import pytest
import sqlalchemy as sa

from fleetcount import host
from fleetcount.errors import LedgerError
from fleetcount.ledger.access import open_store
from fleetcount.ledger.sql import engine
from fleetcount.ledger.sql.store import SqlStore
from fleetcount.ledger.states import State
from fleetcount.ledger.store import Lease, Store
from tests.ledger.builders import DIGEST, GONE, answer, begin, open_reading, settle, story, tally, unit

ROOT = Path(__file__).parents[2]
NOBODY = 65534


@contextmanager
def _mounted(folder: Path, *options: str) -> Iterator[Path]:
    """A small file system of its own, where the user may mount one."""
    folder.mkdir(exist_ok=True)
    if shutil.which("mount") is None or os.geteuid() != 0:
        pytest.skip("only root can mount a file system")
    if subprocess.run(["mount", *options, str(folder)], capture_output=True, check=False).returncode:
        pytest.skip("no file system can be mounted here")
    try:
        yield folder
    finally:
        subprocess.run(["umount", str(folder)], check=True)


def _fill_up(store: Store, lease: Lease, reading: Any) -> str:
    """Settle units until the ledger says why no more fit."""
    for number in range(5000):
        row = store.waiting(reading.reading, 1)[0]
        counts = dict.fromkeys(range(1, 4), 10**2000 + number)
        try:
            settle(store, lease, reading, row, counts)
        except LedgerError as error:
            message = str(error)
            assert "\n" not in message and error.exit_status == 2
            return message
    raise AssertionError("it never became full")


def _goes_on(store: Store, lease: Lease, reading: Any) -> None:
    """What was accepted is there, the unit that did not fit is not half there, and counting goes on."""
    before = store.merge(DIGEST, reading.reading)
    assert before.tallies > 5
    (out,) = store.units(reading.reading, State.OUT) or [None]
    if out is not None:
        assert store.accept(lease, [answer(tally(reading, out.key, 1, {1: 1}), out.token or "")]) == [
            "accepted"
        ]
    settle(store, lease, reading, store.waiting(reading.reading, 1)[0], {1: 1})
    assert store.merge(DIGEST, reading.reading).tallies >= before.tallies + 1


def test_a_page_limit(tmp_path: Path) -> None:
    """A ledger that may not grow any more says that the disk is full, and goes on when it may."""
    with open_store(str(tmp_path / "x.sqlite"), create=True) as store:
        assert isinstance(store, SqlStore)
        lease = begin(store)
        one = open_reading(store, lease, [(f"{i:04}", 1) for i in range(2000)])

        def limit(connection: sqlite3.Connection, *_: object) -> None:
            connection.execute("PRAGMA max_page_count = 200")

        sa.event.listen(store.database.engine, "connect", limit)
        store.database.engine.dispose()
        assert "the disk is full" in _fill_up(store, lease, one)
        with pytest.raises(LedgerError, match="the disk is full"):
            open_reading(store, lease, [(f"{i:06}", 1) for i in range(5000)])
        assert len(store.readings(DIGEST)) == 1
        sa.event.remove(store.database.engine, "connect", limit)
        store.database.engine.dispose()
        _goes_on(store, lease, one)


def test_a_full_disk(tmp_path: Path) -> None:
    """On a disk that is full nothing is lost; when there is space, the same store goes on."""
    with _mounted(tmp_path / "small", "-t", "tmpfs", "-o", "size=2m", "tmpfs") as folder:
        ballast = folder / "ballast"
        ballast.write_bytes(bytes(400_000))
        with open_store(str(folder / "x.sqlite"), create=True) as store:
            lease = begin(store)
            one = open_reading(store, lease, [(f"{i:04}", 1) for i in range(2000)])
            message = _fill_up(store, lease, one)
            assert "the disk is full" in message or "the disk reports an error" in message
            ballast.unlink()
            _goes_on(store, lease, one)


def test_no_space_for_a_new_ledger(tmp_path: Path) -> None:
    """A ledger that cannot be made for want of space is not half made."""
    with _mounted(tmp_path / "tiny", "-t", "tmpfs", "-o", "size=64k", "tmpfs") as folder:
        (folder / "ballast").write_bytes(bytes(40_000))
        with pytest.raises(LedgerError, match=r"the disk is full|the disk reports an error"):
            open_store(str(folder / "x.sqlite"), create=True)
        (folder / "ballast").unlink()
        with pytest.raises(LedgerError, match=r"empty|no ledger here"):
            open_store(str(folder / "x.sqlite"), read_only=True)


def test_a_read_only_medium(tmp_path: Path) -> None:
    """On a read-only medium a table can be made; a count cannot, and says so in one line."""
    (tmp_path / "here").mkdir()
    with open_store(str(tmp_path / "here" / "x.sqlite"), create=True) as store:
        one, _ = story(store, begin(store))
    with _mounted(tmp_path / "medium", "--bind", str(tmp_path / "here")) as folder:
        if subprocess.run(["mount", "-o", "remount,ro,bind", str(folder)], check=False).returncode:
            pytest.skip("no read-only file system can be mounted here")
        path = str(folder / "x.sqlite")
        with open_store(path, read_only=True) as store:
            assert store.merge(DIGEST, one.reading).complete
            with pytest.raises(LedgerError, match="reading only"):
                store.event(None, "x", "y")
        with pytest.raises(LedgerError, match="cannot be written"):
            open_store(path, create=True)
        with pytest.raises(LedgerError, match="its folder cannot be written"):
            open_store(str(folder / "new.sqlite"), create=True)


_AS_NOBODY = """
import os, sys
from fleetcount.errors import LedgerError
from fleetcount.ledger.access import open_store
path, reading = sys.argv[1:]
for user in (os.geteuid(), {nobody}):
    if user != os.geteuid():
        os.setuid(user)  # after all has been imported, which another user may not be able to
    with open_store(path, read_only=True) as store:
        complete = store.merge({digest!r}, reading).complete
print(complete)
for place in (path, path + ".new"):
    try:
        open_store(place, create=True)
    except LedgerError as error:
        print(error)
"""


def test_a_read_only_folder(tmp_path: Path) -> None:
    """A user who may only read the folder gets the table, and one clear line for a count; no file is made."""
    folder = tmp_path / "theirs"
    folder.mkdir()
    path = folder / "x.sqlite"
    with open_store(str(path), create=True) as store:
        one, _ = story(store, begin(store))
    path.chmod(0o444)
    folder.chmod(0o555)
    code = _AS_NOBODY.format(nobody=NOBODY, digest=DIGEST)
    if os.geteuid() != 0:
        code = code.replace(f", {NOBODY})", ")")
    else:
        for above in [folder, *folder.parents][:-2]:
            above.chmod(above.stat().st_mode | 0o055)
    run = subprocess.run(
        [sys.executable, "-c", code, str(path), one.reading],
        cwd=ROOT,
        capture_output=True,
        text=True,
        check=False,
    )
    folder.chmod(0o755)
    assert run.returncode == 0, run.stderr
    complete, old, new = run.stdout.splitlines()
    assert complete == "True" and "cannot be written" in old and "its folder cannot be written" in new
    assert [found.name for found in folder.iterdir()] == ["x.sqlite"]


def test_looking_while_another_writes(tmp_path: Path) -> None:
    """A ledger can be read by another process at any time while it is written, and leaves no file behind."""
    path = tmp_path / "x.sqlite"
    with open_store(str(path), create=True) as store:
        lease = begin(store)
        one = open_reading(store, lease, [(f"{i:04}", 1) for i in range(300)])
        code = (
            "import sys; from fleetcount.ledger.access import open_store\n"
            "store, seen = open_store(sys.argv[1], read_only=True), []\n"
            "print('ready', flush=True)\n"
            "while not seen or seen[-1] < 300:\n"
            f"    merged = store.merge({DIGEST!r}, sys.argv[2]); seen.append(merged.tallies)\n"
            "    assert merged.table.counts().get(1, 0) == merged.tallies == merged.records - 1\n"
            "assert seen == sorted(seen); print(len(set(seen)))"
        )
        reader = subprocess.Popen(
            [sys.executable, "-c", code, str(path), one.reading], cwd=ROOT, stdout=subprocess.PIPE, text=True
        )
        assert reader.stdout is not None and reader.stdout.readline() == "ready\n"
        for row in store.units(one.reading):
            settle(store, lease, one, row, {1: 1})
        out, _ = reader.communicate(timeout=60)
        assert reader.returncode == 0 and int(out) > 1
    assert [found.name for found in tmp_path.iterdir()] == ["x.sqlite"]
    with open_store(str(path), read_only=True) as store:
        store.series()
    assert [found.name for found in tmp_path.iterdir()] == ["x.sqlite"]


def test_a_locked_ledger(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """While another program keeps the ledger locked, writing waits, then says so; afterwards it goes on."""
    monkeypatch.setattr(engine, "BUSY_SECONDS", 0.3)
    path = str(tmp_path / "x.sqlite")
    with open_store(path, create=True) as store:
        lease = begin(store)
        other = sqlite3.connect(path, isolation_level=None)
        other.execute("BEGIN IMMEDIATE")
        with pytest.raises(LedgerError, match="another process keeps it locked"):
            store.renew(lease)
        assert len(store.series()) == 1
        other.execute("ROLLBACK")
        other.close()
        store.renew(lease)


def test_a_killed_writer_loses_nothing(tmp_path: Path) -> None:
    """After SIGKILL in the middle of writing, every tally that was acknowledged is there, and nothing by half."""
    path = tmp_path / "x.sqlite"
    with open_store(str(path), create=True) as store:
        lease = begin(store)
        one = open_reading(store, lease, [(f"{i:04}", 1) for i in range(5000)])
        store.release(lease)
    code = (
        "import sys; from fleetcount.ledger.access import open_store\n"
        "from tests.ledger.builders import *\n"
        "from fleetcount.ledger.record import OpeningRecord\n"
        "store = open_store(sys.argv[1]); lease = store.take(DIGEST, GONE)\n"
        "row, = store.readings(DIGEST)\n"
        "one = opening([], reading=row.reading)\n"
        "for number, row in enumerate(store.units(one.reading)):\n"
        "    settle(store, lease, one, row, {1: 1}, [(row.key + '.0', 2)]); print(number + 1, flush=True)\n"
    )
    for round_ in range(3):
        with open_store(str(path)) as store:
            before = store.merge(DIGEST, one.reading).tallies
        script = code.replace("store.units(one.reading)", f"store.units(one.reading, 'waiting')[{round_}:]")
        writer = subprocess.Popen(
            [sys.executable, "-c", script, str(path)], cwd=ROOT, stdout=subprocess.PIPE, text=True
        )
        assert writer.stdout is not None
        told = [int(writer.stdout.readline()) for _ in range(20)]
        time.sleep(0.02 * round_)
        writer.send_signal(signal.SIGKILL)
        told += [int(line) for line in writer.stdout.read().split()]
        writer.stdout.close()
        writer.wait()
        with open_store(str(path)) as store:
            store.release(store.take(DIGEST, GONE))
            after = store.merge(DIGEST, one.reading).tallies
            assert after - before in (told[-1], told[-1] + 1)
            assert store.census(one.reading).states[State.OUT].units == 0


def test_a_network_file_system(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """On a network file system: a rollback journal, one process at a time, and one notice that says so."""
    path = tmp_path / "x.sqlite"
    with open_store(str(path), create=True) as store:
        assert store.notices == ()
        begin(store)
    monkeypatch.setattr(host, "on_network_filesystem", lambda path: True)
    monkeypatch.setattr(engine, "BUSY_SECONDS", 0.3)
    with open_store(str(path)) as store:
        assert len(store.notices) == 1 and "network file system" in store.notices[0]
        assert isinstance(store, SqlStore)
        one, _ = story(store, store.take(DIGEST, GONE))
        with store.database.engine.connect() as connection:
            assert connection.exec_driver_sql("PRAGMA journal_mode").scalar() == "delete"
            assert connection.exec_driver_sql("PRAGMA locking_mode").scalar() == "exclusive"
        with pytest.raises(LedgerError, match="another process keeps it locked"):
            open_store(str(path), read_only=True)
    with open_store(str(path), read_only=True) as store:
        assert store.merge(DIGEST, one.reading).complete and store.notices == ()


def test_the_journal_of_a_local_ledger(tmp_path: Path) -> None:
    """On a local disk: write-ahead log, full synchronisation, foreign keys."""
    with open_store(str(tmp_path / "x.sqlite"), create=True) as store:
        assert isinstance(store, SqlStore)
        with store.database.engine.connect() as connection:
            found = {
                name: connection.exec_driver_sql(f"PRAGMA {name}").scalar()
                for name in ("journal_mode", "synchronous", "foreign_keys", "busy_timeout")
            }
    assert found == {"journal_mode": "wal", "synchronous": 2, "foreign_keys": 1, "busy_timeout": 10_000}


def test_a_server_that_dies(postgres: str) -> None:
    """When the server cuts the connection the store says so in one line, and goes on with a new one."""
    with open_store(postgres, create=True) as store:
        assert isinstance(store, SqlStore)
        lease = begin(store)
        one = open_reading(store, lease, [("0:", 1)])
        with pytest.raises(LedgerError, match="cannot be reached"), store.database.write() as connection:
            pid = connection.exec_driver_sql("SELECT pg_backend_pid()").scalar()
            with store.database.write() as other:
                other.exec_driver_sql(f"SELECT pg_terminate_backend({pid})")
            time.sleep(0.2)
            connection.exec_driver_sql("SELECT 1")
        settle(store, lease, one, unit(store, one, "0:"), {0: 1})


@pytest.mark.parametrize("kind", ["sqlite", "postgresql"])
def test_several_threads(kind: str, tmp_path: Path, request: pytest.FixtureRequest) -> None:
    """A lease is renewed in one thread while others hand out, accept and look."""
    where = str(tmp_path / "x.sqlite") if kind == "sqlite" else request.getfixturevalue("postgres")
    with open_store(where, create=True) as store:
        lease = begin(store)
        one = open_reading(store, lease, [(f"{i:04}", 1) for i in range(90)])
        troubles: list[BaseException] = []

        def work(first: int) -> None:
            try:
                for row in store.units(one.reading)[first : first + 30]:
                    settle(store, lease, one, row, {1: 1})
                    store.renew(lease)
                    store.census(one.reading)
            except BaseException as error:  # noqa: BLE001  it is raised below
                troubles.append(error)

        threads = [threading.Thread(target=work, args=(30 * i,)) for i in range(3)]
        for thread in threads:
            thread.start()
        for thread in threads:
            thread.join()
        assert troubles == []
        assert store.merge(DIGEST, one.reading).table.counts() == {1: 90}
