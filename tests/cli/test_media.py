"""Media that fill up, cannot be written, or are written by another process meanwhile."""

from __future__ import annotations

import contextlib
import json
import shutil
import signal
import subprocess
from collections.abc import Iterator
from pathlib import Path

import pytest

from tests.cli.conftest import Answer, Fleetcount
from tests.fleet.program import (
    counting,
    few_seconds,
    finished,
    line,
    published_walks,
    run,
    running,
    tallies,
    wait_for,
)


@contextlib.contextmanager
def mounted(folder: Path, *options: str) -> Iterator[Path]:
    """A file system of its own, where the user may mount one."""
    folder.mkdir(exist_ok=True)
    if (
        shutil.which("mount") is None
        or subprocess.run(["mount", *options, str(folder)], capture_output=True, check=False).returncode
    ):
        pytest.skip("no file system can be mounted here")
    try:
        yield folder
    finally:
        subprocess.run(["umount", str(folder)], check=True)


def test_a_disk_that_fills_up(tmp_path: Path, fleetcount: Fleetcount) -> None:
    """A full disk stops the count with a clear line; after space is made the same line goes on to the exact table."""
    with mounted(tmp_path / "small", "-t", "tmpfs", "-o", "size=1m", "tmpfs") as small:
        ledger, ballast = small / "x.sqlite", small / "ballast"
        arguments = (*line(), "--ledger", str(ledger))
        with running(*arguments, cwd=tmp_path) as one:
            wait_for(lambda: counting(one, ledger))
            with contextlib.suppress(OSError), ballast.open("wb", buffering=0) as file:
                while True:
                    file.write(b"0" * 4096)
            assert one.wait() == 2, one.stderr
        (said,) = [text for text in one.stderr.splitlines() if text.startswith("fleetcount:")]
        assert said == (
            f"fleetcount: {ledger}: the disk is full; make space and start again; what was accepted is safe"
        )
        assert one.stdout == ""
        kept = tallies(ledger)
        again = fleetcount(*arguments)
        assert again.status == 2 and "full" in again.err.splitlines()[-1]
        ballast.unlink()
        subprocess.run(["mount", "-o", "remount,size=8m", str(small)], check=True)
        done = run(*arguments, cwd=tmp_path)
        assert done.returncode == 0, done.stderr
        assert tallies(ledger)[: len(kept)] == kept
        finished(ledger)


def test_a_table_from_a_read_only_medium(fleetcount: Fleetcount, tmp_path: Path) -> None:
    """`table` and `progress` read a ledger on a read-only medium, and leave nothing there."""
    medium = tmp_path / "medium"
    medium.mkdir()
    ledger = medium / "x.sqlite"
    assert fleetcount("count", "square", "walk", "--to", "9", "--ledger", str(ledger)).status == 0
    with mounted(medium, "--bind", str(medium)):
        subprocess.run(["mount", "-o", "remount,ro,bind", str(medium)], check=True)
        table = fleetcount("table", "square", "walk", "--plain", "--ledger", str(ledger))
        assert table.status == 0 and table.out.endswith("9 16268\n")
        assert fleetcount("progress", "--ledger", str(ledger)).status == 0
        counted = fleetcount("count", "square", "walk", "--to", "10", "--ledger", str(ledger))
        assert counted.status == 2 and "x.sqlite" in counted.err
    assert [path.name for path in medium.iterdir()] == ["x.sqlite"]


def partial(got: Answer) -> Answer | None:
    """A table with partial sums, once there are any."""
    assert got.status == 0, got.err
    return got if " so far\n" in got.out else None


def test_a_table_while_another_process_counts(tmp_path: Path, fleetcount: Fleetcount) -> None:
    """`table` and `progress` show what is there while the ledger is being written, and do not disturb it."""
    ledger = tmp_path / "fleetcount.sqlite"
    top = few_seconds() + 3  # so that it is not done before everything has been looked at
    with running("count", "square", "walk", "--to", str(top), cwd=tmp_path) as one:
        wait_for(lambda: counting(one, ledger))
        table = fleetcount("table", "square", "walk", "--json")
        assert table.status == 0, table.err
        document = json.loads(table.out)
        assert document["complete"] is False and 15 < document["final"] < top
        assert document["rows"] == [[n, str(published_walks()[n])] for n in range(document["final"] + 1)]
        so_far = wait_for(lambda: partial(fleetcount("table", "square", "walk", "--so-far")))
        assert f"open reading to n={top}: " in so_far.err and "% done" in so_far.err
        beyond = fleetcount("table", "square", "walk", "--to", str(top))
        assert beyond.status == 2 and f"lengths 0 to {document['final']}" in beyond.err
        progress = fleetcount("progress")
        assert progress.status == 0 and f"held by process {one.process.pid} on" in progress.out
        shown = json.loads(fleetcount("progress", "--json").out)["series"][0]
        assert shown["held_by"]["process"] == one.process.pid
        reading = shown["readings"][-1]
        assert 0 < reading["share_done"] < 1 and reading["finished"] is None
        assert reading["units"]["waiting"] + reading["units"]["out"] > 0
        one.process.send_signal(signal.SIGTERM)
        assert one.wait() == 3, one.stderr
