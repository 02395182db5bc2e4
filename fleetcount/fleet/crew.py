"""Who counts, as the coordinator sees it: a number of cores that take bundles and give answers."""

from __future__ import annotations

import time
from collections import deque
from typing import Protocol

from fleetcount.fleet.interrupt import StopFlag
from fleetcount.fleet.work import HandBack, HandOut, count_bundle


class Crew(Protocol):
    """Cores that count. What comes back may come in any order, or never."""

    def slots(self) -> int:
        """Cores that could count a bundle now, busy ones included."""

    def submit(self, hand_out: HandOut) -> None:
        """Send a bundle on its way."""

    def collect(self, timeout: float) -> list[tuple[str, HandBack | Exception]]:
        """What has come back, by token; an exception where the bundle is lost. Waits for the first, at most so long."""

    def stop(self) -> None:
        """Tell all kernels to stop after their slice and hand back the rest."""


class OwnProcess:
    """One core, that of the calling thread: `collect` counts."""

    def __init__(self, stop: StopFlag) -> None:
        self._stop = stop
        self._queue: deque[HandOut] = deque()

    def slots(self) -> int:
        return 1

    def submit(self, hand_out: HandOut) -> None:
        self._queue.append(hand_out)

    def collect(self, timeout: float) -> list[tuple[str, HandBack | Exception]]:
        if not self._queue:
            time.sleep(min(timeout, 0.01))
            return []
        hand_out = self._queue.popleft()
        return [(hand_out.token, count_bundle(hand_out, self._stop))]

    def stop(self) -> None:
        self._stop.up = True
