"""Any Dask cluster as a crew: the window is kept here, nothing ever waits on a worker."""

from __future__ import annotations

import asyncio
import queue
import time
import uuid
from collections.abc import Callable
from typing import TYPE_CHECKING, Any

from fleetcount.errors import FleetError, InputError
from fleetcount.fleet.interrupt import StopFlag
from fleetcount.fleet.work import HandBack, HandOut, stop_run, work

if TYPE_CHECKING:
    from distributed import Client, Future

_LOOK_AGAIN = 1.0
_GATHER_SECONDS = 30
NOBODY_SECONDS = 60.0
"""How long the first worker of somebody else's cluster is waited for."""


class DaskCrew:
    """Bundles as tasks of a client; one for each running thread of the cluster.

    Args:
        client: connected to the scheduler.
        stop: how to make all workers hand back what they have; default: as any cluster can be told.
        upkeep: called now and then, to mend what is broken.
    """

    def __init__(
        self,
        client: Client,
        stop: Callable[[], None] | None = None,
        upkeep: Callable[[], None] = lambda: None,
    ) -> None:
        self._client = client
        self._run = uuid.uuid4().hex
        self._stop = stop
        self._upkeep = upkeep
        self._futures: dict[str, Future[Any]] = {}
        self._done: queue.SimpleQueue[str] = queue.SimpleQueue()
        self._slots, self._looked = 0, -_LOOK_AGAIN
        self._stopped = False

    def slots(self) -> int:
        now = time.monotonic()
        if now - self._looked >= _LOOK_AGAIN or not self._slots:
            self._slots = running_threads(self._client)
            self._looked = now
        return self._slots

    def submit(self, hand_out: HandOut) -> None:
        token = hand_out.token
        future = self._client.submit(
            work, hand_out.pack(), self._run, key=f"bundle-{token}", pure=False, retries=0
        )
        self._futures[token] = future
        future.add_done_callback(lambda _: self._done.put(token))

    def collect(self, timeout: float) -> list[tuple[str, HandBack | Exception]]:
        if not self._stopped:
            self._upkeep()
        tokens = []
        try:
            tokens.append(self._done.get(timeout=timeout))
            while True:
                tokens.append(self._done.get_nowait())
        except queue.Empty:
            pass
        return [(token, self._take(token)) for token in tokens if token in self._futures]

    def stop(self) -> None:
        self._stopped = True
        if self._stop is not None:
            self._stop()
        else:
            self._client.run(stop_run, self._run, wait=False)

    def _take(self, token: str) -> HandBack | Exception:
        """A bundle, or how it was lost; FleetError where the machine cannot count at all."""
        from distributed import KilledWorker

        future = self._futures.pop(token)
        try:
            return HandBack.unpack(future.result(timeout=_GATHER_SECONDS))
        except (KilledWorker, asyncio.CancelledError, OSError) as lost:
            return Exception(f"{type(lost).__name__}: {lost}")
        except Exception as error:  # noqa: BLE001 - work() itself fails only where the surroundings are wrong
            return FleetError(
                f"a worker cannot count: {type(error).__name__}: {error}",
                mend="install this version of fleetcount on every worker",
            )
        finally:
            future.release()


def running_threads(client: Client) -> int:
    """Threads of the workers that are running, not paused or leaving; FleetError if the scheduler is out of reach."""
    scheduler: Any = client.scheduler
    try:
        if client.status in ("closing", "closed"):
            raise OSError("the client is closed")
        return sum(client.sync(scheduler.ncores_running).values())
    except (OSError, RuntimeError, asyncio.CancelledError) as error:
        raise FleetError(
            f"the scheduler of the Dask cluster is out of reach ({error})",
            mend="what was counted is kept; start the cluster and count again",
        ) from None


def on_client(client: Client, stop: StopFlag) -> DaskCrew:
    """The cluster of an open client as a crew; its workers need this package installed."""
    if client.asynchronous:
        raise InputError(
            "an asynchronous Dask client", where="client", mend="give one without asynchronous=True"
        )
    crew = DaskCrew(client)
    began = time.monotonic()
    while not crew.slots() and not stop.up:
        if time.monotonic() - began > NOBODY_SECONDS:
            raise FleetError(
                "no worker of the Dask cluster is running",
                mend="start some; client.wait_for_workers(1) waits for them",
            )
        time.sleep(0.1)
    return crew
