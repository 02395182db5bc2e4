"""Ctrl-C, SIGTERM and SIGHUP while a series is counted.

The first signal raises the stop flag. While units are counted that is enough: the coordinator sees it within a slice
and hands everything back; after a second one it waits for no answer any more, and only a third one interrupts, since
in the middle of a transaction it would leave the ledger locked. Everywhere else (imports, compiling, starting
processes, reading the ledger) nobody looks at the flag, so there the first signal interrupts at once. A signal that
this process was started to ignore, as `nohup` does, stays ignored.
"""

from __future__ import annotations

import contextlib
import signal
import threading
from collections.abc import Iterator
from types import FrameType
from typing import Any

SIGNALS = ("SIGINT", "SIGTERM", "SIGHUP")


class StopFlag:
    """Plain attributes that are looked at after each slice: `up`, stop; `hurry`, and wait for nobody."""

    def __init__(self) -> None:
        self.up = False
        self.hurry = False


def ignore() -> None:
    """From now on the signals do nothing in this process."""
    for name in SIGNALS:
        if hasattr(signal, name):
            signal.signal(signal.Signals[name], signal.SIG_IGN)


class Interrupts:
    """Context manager in which the signals raise a stop flag; only a main thread can do that."""

    def __init__(self, stop: StopFlag) -> None:
        self._stop = stop
        self._patient = False
        self._old: dict[signal.Signals, Any] = {}

    def __enter__(self) -> Interrupts:
        if threading.current_thread() is threading.main_thread():
            known = [signal.Signals[name] for name in SIGNALS if hasattr(signal, name)]
            self._old = {number: signal.getsignal(number) for number in known}
            for number, before in self._old.items():
                if before is not signal.SIG_IGN:
                    signal.signal(number, self._handle)
        return self

    def __exit__(self, *exc: object) -> None:
        for number, before in self._old.items():
            if before is not signal.SIG_IGN:
                signal.signal(number, signal.SIG_DFL if before is None else before)

    @contextlib.contextmanager
    def patient(self) -> Iterator[None]:
        """Within the block somebody looks at the flag: the first two signals do nothing but raise it."""
        self._patient = True
        try:
            yield
        finally:
            self._patient = False

    def _handle(self, number: int, frame: FrameType | None) -> None:
        seen = self._stop.up + self._stop.hurry
        self._stop.up, self._stop.hurry = True, seen > 0
        if seen > 1 or not self._patient:
            raise KeyboardInterrupt
