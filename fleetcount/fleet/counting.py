"""Counting a series up to a length: the short reading first, then the long one on the fleet, then the table."""

from __future__ import annotations

import contextlib
import platform
import threading
import time
from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from fleetcount import host
from fleetcount.errors import HeldError, LedgerError, SeriesError, StoppedError
from fleetcount.fleet.coordinator import LEDGER_BYTES, Coordinator
from fleetcount.fleet.crew import Crew, OwnProcess
from fleetcount.fleet.interrupt import Interrupts, StopFlag
from fleetcount.fleet.local import LocalFleet
from fleetcount.fleet.planning import open_reading
from fleetcount.fleet.snapshot import Nobody, Observer
from fleetcount.fleet.work import Task
from fleetcount.ledger import tables
from fleetcount.ledger.leasing import this_process
from fleetcount.ledger.states import State
from fleetcount.ledger.store import RENEW_SECONDS, Lease, Machine, Store
from fleetcount.methods import registry
from fleetcount.methods.engine import versions
from fleetcount.methods.face import Method
from fleetcount.series import canonical
from fleetcount.series.definition import Series
from fleetcount.series.table import CoefficientTable

if TYPE_CHECKING:
    from distributed import Client

OWN_PROCESS_SECONDS = 2.0
"""A count expected to take less core time than this runs in the own process, without Dask."""

SHORT_SECONDS = 1.0
"""A longer one begins with a short reading that takes at most about this."""

METHOD = "direct"


@dataclass
class Options:
    """How to count.

    Attributes:
        cores: of this machine; None: all that this process may use.
        client: an open Dask client to count on, instead of this machine's cores.
        wait: seconds to wait for another coordinator that holds the series.
        ledger_bytes: size under which the ledger of one reading is to stay.
        readmit: hand out units again that were barred because they failed too often.
    """

    cores: int | None = None
    client: Client | None = None
    wait: float = 0.0
    ledger_bytes: float = LEDGER_BYTES
    readmit: bool = False
    observer: Observer = field(default_factory=Nobody)
    stop: StopFlag = field(default_factory=StopFlag)


def count_series(store: Store, series: Series, top: int, options: Options) -> CoefficientTable:
    """Count a series up to length `top` into a ledger, or go on where an earlier run was stopped.

    Raises:
        StoppedError: stopped by a signal or the stop flag; what was counted is in the ledger.
        HeldError: another coordinator holds the series.
        TrustError: what was counted contradicts itself or an earlier reading.
    """
    check(series, top)
    method = registry.get(METHOD)
    try:
        with Interrupts(options.stop) as interrupts:
            if not _covered(store, series, top):
                _count(store, series, top, method, options, interrupts)
            return tables.view(store, series).table.cut(top)
    except KeyboardInterrupt:
        raise StoppedError("stopped") from None


def check(series: Series, top: int) -> None:
    """Refuse what cannot be counted before a ledger is opened: SeriesError or InputError."""
    method = registry.get(METHOD)
    if top < 0:
        raise SeriesError(f"length {top} is negative", where="--to", mend="lengths begin at 0")
    reason = method.refuses(series)
    if reason:
        raise SeriesError(reason, where=f"method {method.name}")
    method.check_reach(series, top)


def _covered(store: Store, series: Series, top: int) -> bool:
    return any(tables.reach(row) >= top for row in tables.finished(store, series.digest))


def _count(
    store: Store, series: Series, top: int, method: Method, options: Options, interrupts: Interrupts
) -> None:
    observer = options.observer
    if not method.is_warm(series):
        observer.stage("compiling kernels for this machine, the first time only")
    method.prepare(series, range(min(top, 4) + 1))
    forecast = method.forecast(series, range(top + 1))
    written = canonical.text(series.written())
    store.open_series(series.digest, series.text, written, time.time_ns() // 1000)
    with _lease(store, series, options.wait) as lease:
        if _covered(store, series, top):
            return  # whoever held it has just finished it
        _note_machine(store, series)
        count = _Count(store, lease, series, method, options, interrupts)
        if forecast.seconds <= OWN_PROCESS_SECONDS:
            count.reading(top, OwnProcess(options.stop))
        elif options.client is not None:
            from fleetcount.fleet.dask_crew import on_client

            count.short_reading(top, forecast.shares, forecast.seconds)
            count.reading(top, on_client(options.client, options.stop))
        else:
            with LocalFleet(options.cores or host.cores()) as fleet:
                fleet.launch(series, method.name, top)
                count.short_reading(top, forecast.shares, forecast.seconds)
                observer.stage(f"starting {fleet.cores} core{'s' * (fleet.cores > 1)}")
                count.reading(top, fleet.crew(options.stop))


@dataclass
class _Count:
    store: Store
    lease: Lease
    series: Series
    method: Method
    options: Options
    interrupts: Interrupts

    def short_reading(self, top: int, shares: tuple[float, ...], seconds: float) -> None:
        """The lengths that a second reaches: the first terms at once, and a check of the long reading.

        One is enough: where the long reading was begun before, whatever is finished checks it; and one that was
        left unfinished is as good as another that is a little longer or shorter, as forecasts vary.
        """
        short = max(
            (n for n, nodes in enumerate(shares) if nodes / shares[-1] * seconds <= SHORT_SECONDS), default=0
        )
        rows = self.store.readings(self.series.digest)
        left = [tables.reach(row) for row in rows if row.finished is None]
        short = next((n for n in left if n < top and short - 2 <= n <= short + 1), short)
        begun = top in left and len(left) < len(rows)
        if not begun and not _covered(self.store, self.series, short):
            self.reading(short, OwnProcess(self.options.stop))
        self.options.observer.terms(tables.view(self.store, self.series).table)

    def reading(self, top: int, crew: Crew) -> None:
        """Go on with the open reading of that reach, or open one, and count it to its end."""
        forecast = self.method.forecast(self.series, range(top + 1))
        with self.interrupts.patient():
            task = self._open_one(top) or open_reading(
                self.store, self.lease, self.series, self.method.name, top
            )
            o = self.options
            if o.readmit:
                barred = [unit.key for unit in self.store.units(task.reading, State.BARRED)]
                self.store.readmit(self.lease, task.reading, barred)
            Coordinator(
                self.store, self.lease, task, crew, forecast, o.observer, o.stop, ledger_bytes=o.ledger_bytes
            ).run()

    def _open_one(self, top: int) -> Task | None:
        for row in self.store.readings(self.series.digest):
            if row.finished is None and tables.reach(row) == top and row.method == self.method.name:
                return Task.of(self.series, row.reading, row.method, top)
        return None


@contextlib.contextmanager
def _lease(store: Store, series: Series, wait: float) -> Iterator[Lease]:
    """Hold the series. A thread renews the lease, also while a large ledger is read or the fleet starts."""
    lease, done = store.take(series.digest, this_process(), wait), threading.Event()
    keeper = threading.Thread(target=_keep, args=(store, lease, done), name="lease", daemon=True)
    keeper.start()
    try:
        yield lease
    finally:
        done.set()
        keeper.join(timeout=1)
        with contextlib.suppress(Exception):  # it ends by itself; the error that brought us here matters more
            store.release(lease)


def _keep(store: Store, lease: Lease, done: threading.Event) -> None:
    while not done.wait(RENEW_SECONDS):
        try:
            store.renew(lease)
        except HeldError:
            return  # the next write says so
        except LedgerError:
            continue  # the next write says so, or all is well again


def _note_machine(store: Store, series: Series) -> None:
    machine = Machine(host.machine_name(), host.processor(), platform.platform(terse=True), versions())
    store.note_machine(machine)
    store.event(series.digest, "coordinator started", f"on {machine.name}")
