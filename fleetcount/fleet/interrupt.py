"""Ctrl-C and SIGTERM while units are counted: the first raises the stop flag, a second one is not waited for."""

from __future__ import annotations

import contextlib
import signal
import threading
from collections.abc import Iterator
from types import FrameType

from fleetcount.fleet.work import StopFlag


@contextlib.contextmanager
def raising(stop: StopFlag) -> Iterator[None]:
    """Within the block the signals raise the flag instead of interrupting; only a main thread can do that."""
    if threading.current_thread() is not threading.main_thread():
        yield
        return

    def handler(number: int, frame: FrameType | None) -> None:
        if stop.up:
            raise KeyboardInterrupt
        stop.up = True

    names = [name for name in ("SIGINT", "SIGTERM", "SIGHUP") if hasattr(signal, name)]
    old = {name: signal.signal(getattr(signal, name), handler) for name in names}
    try:
        yield
    finally:
        for name, before in old.items():
            signal.signal(getattr(signal, name), before)
