"""Any Dask cluster as a crew: the window is kept here, nothing ever waits on a worker."""

from __future__ import annotations

import queue
import time
from collections.abc import Callable
from typing import TYPE_CHECKING, Any

from fleetcount.fleet.work import STOP, HandBack, HandOut, work

if TYPE_CHECKING:
    from distributed import Client, Future

_LOOK_AGAIN = 1.0


class DaskCrew:
    """Bundles as tasks of a client; one for each running thread of the cluster.

    Args:
        client: connected to the scheduler.
        stop: how to make all workers raise their stop flag.
        upkeep: called now and then, to mend what is broken.
    """

    def __init__(
        self, client: Client, stop: Callable[[], None], upkeep: Callable[[], None] = lambda: None
    ) -> None:
        self._client = client
        self._stop = stop
        self._upkeep = upkeep
        self._futures: dict[str, Future[Any]] = {}
        self._done: queue.SimpleQueue[str] = queue.SimpleQueue()
        self._slots, self._looked = 0, -_LOOK_AGAIN

    def slots(self) -> int:
        now = time.monotonic()
        if now - self._looked >= _LOOK_AGAIN or not self._slots:
            self._slots = running_threads(self._client)
            self._looked = now
        return self._slots

    def submit(self, hand_out: HandOut) -> None:
        token = hand_out.token
        future = self._client.submit(work, hand_out.pack(), key=f"bundle-{token}", pure=False, retries=0)
        self._futures[token] = future
        future.add_done_callback(lambda _: self._done.put(token))

    def collect(self, timeout: float) -> list[tuple[str, HandBack | Exception]]:
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
        self._stop()

    def _take(self, token: str) -> HandBack | Exception:
        future = self._futures.pop(token)
        try:
            return HandBack.unpack(future.result(timeout=30))
        except Exception as error:  # noqa: BLE001 - a lost bundle may be lost in any way; its units wait again
            return error
        finally:
            future.release()


def running_threads(client: Client) -> int:
    """Threads of the workers that are running, not paused or leaving."""
    scheduler: Any = client.scheduler
    return sum(client.sync(scheduler.ncores_running).values())


def on_client(client: Client) -> DaskCrew:
    """The cluster of an open client as a crew; its workers need this package installed."""
    return DaskCrew(client, lambda: _raise_flags(client))


def _raise_flags(client: Client) -> None:
    client.run(_raise_flag, wait=False)


def _raise_flag() -> None:
    STOP.up = True
