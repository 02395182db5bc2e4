"""Ctrl-C, SIGTERM and SIGHUP while a series is counted.

The first signal raises the stop flag. While units are counted that is enough: the coordinator sees it within a slice
and hands everything back; after a second one it waits for no answer any more, and only a third one interrupts, since
in the middle of a transaction it would leave the ledger locked. Everywhere else (imports, compiling, starting
processes, reading the ledger) nobody looks at the flag, so there the first signal interrupts at once. A signal that
this process was started to ignore, as `nohup` does, stays ignored.
"""

from __future__ import annotations

import _thread
import contextlib
import signal
import sys
import threading
from collections.abc import Iterator
from types import FrameType, TracebackType
from typing import Any

from fleetcount.errors import FleetcountError

_A_MOMENT = 0.05
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


def _signal_main_thread(number: int) -> None:
    if hasattr(signal, "pthread_kill"):
        signal.pthread_kill(threading.main_thread().ident or 0, number)  # ends what it waits for
    else:
        _thread.interrupt_main(signal.Signals(number))


class Interrupts:
    """Context manager in which the signals raise a stop flag; only a main thread can do that.

    An interrupt that comes where it cannot be raised (in a callback from C, while an extension is initialised) is
    neither printed nor lost: it comes again a moment later, and what it broke meanwhile counts as interrupted.
    """

    def __init__(self, stop: StopFlag) -> None:
        self._stop = stop
        self._patient = self._raised = self._again = False
        self._old: dict[signal.Signals, Any] = {}
        self._hooks = (sys.unraisablehook, sys.excepthook)

    def __enter__(self) -> Interrupts:
        if threading.current_thread() is threading.main_thread():
            known = [signal.Signals[name] for name in SIGNALS if hasattr(signal, name)]
            self._old = {number: signal.getsignal(number) for number in known}
            self._hooks = (sys.unraisablehook, sys.excepthook)
            sys.unraisablehook, sys.excepthook = self._unraisable, self._printed
            for number, before in self._old.items():
                if before is not signal.SIG_IGN:
                    signal.signal(number, self._handle)
        return self

    def __exit__(self, kind: object, error: BaseException | None, trace: object) -> None:
        for number, before in self._old.items():
            if before is not signal.SIG_IGN:
                signal.signal(number, signal.SIG_DFL if before is None else before)
        if self._old:
            sys.unraisablehook, sys.excepthook = self._hooks
        if self._raised and isinstance(error, Exception) and not isinstance(error, FleetcountError):
            raise KeyboardInterrupt from error

    @contextlib.contextmanager
    def patient(self) -> Iterator[None]:
        """Within the block somebody looks at the flag: the first two signals do nothing but raise it."""
        self._patient = True
        try:
            yield
        finally:
            self._patient = False

    def _handle(self, number: int, frame: FrameType | None) -> None:
        self._number = number
        seen = 0 if self._again else self._stop.up + self._stop.hurry
        self._stop.up, self._stop.hurry = True, self._stop.hurry or seen > 0
        self._again = False
        if seen > 1 or not self._patient:
            self._raised = True
            raise KeyboardInterrupt

    def _unraisable(self, lost: sys.UnraisableHookArgs) -> None:
        if lost.exc_type is KeyboardInterrupt and self._raised:
            self._come_again()
        else:
            self._hooks[0](lost)

    def _printed(self, kind: type[BaseException], error: BaseException, trace: TracebackType | None) -> None:
        if kind is KeyboardInterrupt and self._raised:
            self._come_again()
        else:
            self._hooks[1](kind, error, trace)

    def _come_again(self) -> None:
        self._again = True
        timer = threading.Timer(_A_MOMENT, _signal_main_thread, (self._number,))
        timer.daemon = True
        timer.start()
