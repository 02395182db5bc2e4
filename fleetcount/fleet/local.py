"""The local fleet: a scheduler in this process and one worker process with a thread for each core.

The worker is started as `python -m` with its own session, so that counting works from a plain script and a notebook
and Ctrl-C reaches the coordinator alone. It lives as long as the pipe to its standard input: if the coordinator is
killed, the pipe breaks and the worker has gone within a second.
"""

from __future__ import annotations

import contextlib
import json
import logging
import os
import subprocess
import sys
import tempfile
import time
from pathlib import Path
from typing import TYPE_CHECKING, Any

from fleetcount.errors import FleetError
from fleetcount.fleet.dask_crew import DaskCrew, running_threads
from fleetcount.fleet.interrupt import StopFlag
from fleetcount.host import machine_name
from fleetcount.series.definition import Series

if TYPE_CHECKING:
    from distributed import Client

_START_SECONDS = 120.0
_BAD_STARTS = 5


class LocalFleet:
    """Context manager. `launch` returns at once; `crew` waits until the worker is there."""

    def __init__(self, cores: int) -> None:
        self.cores = cores
        self._process: subprocess.Popen[bytes] | None = None
        self._plan = b""
        self._address = b""
        self._resources = contextlib.ExitStack()
        self._errors = tempfile.TemporaryFile()  # noqa: SIM115 - closed by `close`
        self._client: Client | None = None
        self._starts = 0
        self._closing = False

    def __enter__(self) -> LocalFleet:
        return self

    def __exit__(self, *exc: object) -> None:
        self.close()

    def launch(self, series: Series, method: str, top: int) -> None:
        """Start the worker process; it imports what it needs and prepares its kernels by itself."""
        plan: dict[str, Any] = {
            "series": series.canonical(),
            "written": series.written(),
            "method": method,
            "top": top,
        }
        plan |= {"threads": self.cores, "name": machine_name()}
        self._plan = json.dumps(plan).encode() + b"\n"
        self._spawn()

    def crew(self, stop: StopFlag) -> DaskCrew:
        """Start the scheduler and bring the two together; raises FleetError when the worker cannot start."""
        import dask
        from distributed import Client, LocalCluster

        logger = logging.getLogger("distributed")
        self._resources.callback(logger.setLevel, logger.level)
        logger.setLevel(logging.CRITICAL)
        ours = {"distributed.scheduler.work-stealing": False, "distributed.scheduler.allowed-failures": 0}
        with dask.config.set(ours):
            cluster = LocalCluster(
                n_workers=0,
                processes=False,
                protocol="tcp://",
                host="127.0.0.1",
                dashboard_address="127.0.0.1:0",
                silence_logs=logging.CRITICAL,
            )
        self._resources.callback(cluster.close, timeout=1)
        self._client = self._resources.enter_context(Client(cluster))
        self._address = json.dumps(cluster.scheduler_address).encode() + b"\n"
        self._tell(self._address)
        crew = DaskCrew(self._client, self._stop, self._keep_alive)
        began = time.monotonic()
        while not crew.slots() and not stop.up:
            self._keep_alive()
            if time.monotonic() - began > _START_SECONDS:
                raise FleetError("the worker process did not come up", mend=self._last_words())
            time.sleep(0.02)
        return crew

    def close(self) -> None:
        """Leave nothing behind: close the pipe, wait a moment, kill."""
        self._closing = True
        self._end_process()
        with contextlib.suppress(Exception):
            self._resources.close()
        self._errors.close()

    def _end_process(self) -> None:
        process, self._process = self._process, None
        if process is None:
            return
        assert process.stdin is not None
        with contextlib.suppress(OSError):
            process.stdin.close()
        try:
            process.wait(timeout=1)
        except subprocess.TimeoutExpired:
            process.kill()
            process.wait(timeout=5)

    def _spawn(self) -> None:
        package = str(Path(__file__).resolve().parents[2])
        paths = [package, *filter(None, [os.environ.get("PYTHONPATH")])]
        self._starts += 1
        self._process = subprocess.Popen(
            [sys.executable, "-m", "fleetcount.fleet.worker"],
            stdin=subprocess.PIPE,
            stdout=subprocess.DEVNULL,
            stderr=self._errors,
            env={**os.environ, "PYTHONPATH": os.pathsep.join(paths)},
            start_new_session=True,
        )
        self._tell(self._plan)
        if self._address:
            self._tell(self._address)

    def _tell(self, line: bytes) -> None:
        if self._process is not None and self._process.stdin is not None:
            with contextlib.suppress(OSError):
                self._process.stdin.write(line)
                self._process.stdin.flush()

    def _stop(self) -> None:
        self._tell(b"stop\n")

    def _keep_alive(self) -> None:
        """Start the worker again if it has gone; give up when it goes again and again without having counted."""
        if self._closing or self._process is None or self._process.poll() is None:
            if self._starts > 1 and self._client is not None and running_threads(self._client):
                self._starts = 1
            return
        if self._starts >= _BAD_STARTS:
            raise FleetError("the worker process ends as soon as it starts", mend=self._last_words())
        self._end_process()
        self._spawn()

    def _last_words(self) -> str:
        self._errors.seek(0)
        lines = self._errors.read().decode(errors="replace").strip().splitlines()
        return f"its last words: {lines[-1].strip()}" if lines else "it said nothing"
