"""The coordinator's loop: feeds a crew from the ledger and writes what comes back into it."""

from __future__ import annotations

import contextlib
import time
import uuid
from collections import deque
from collections.abc import Iterator, Sequence

from fleetcount.errors import FleetcountError, StoppedError, TrustError
from fleetcount.fleet.core import BYTES_A_TALLY, MOST_UNITS, Bundle, Core, Pace, budget_for
from fleetcount.fleet.crew import Crew
from fleetcount.fleet.interrupt import StopFlag
from fleetcount.fleet.planning import divide_roots
from fleetcount.fleet.snapshot import Observer, Snapshot
from fleetcount.fleet.work import HandBack, HandOut, Task
from fleetcount.ledger.record import pack
from fleetcount.ledger.states import State
from fleetcount.ledger.store import Answer, Lease, Store, UnitRow, Verdict
from fleetcount.methods.face import Forecast

_TICK = 0.1
_MOMENT = 0.25
_PATIENCE = 2.0
_UNIT_BYTES = 300

LEDGER_BYTES = 1e9
"""The size under which the ledger of one reading is to stay."""


class Coordinator:
    """Counts one reading to its end, or until it is told to stop; whoever gives it the lease keeps it alive."""

    def __init__(
        self,
        store: Store,
        lease: Lease,
        task: Task,
        crew: Crew,
        forecast: Forecast,
        observer: Observer,
        stop: StopFlag,
        ledger_bytes: float = LEDGER_BYTES,
    ) -> None:
        self._store, self._lease, self._task, self._crew = store, lease, task, crew
        self._forecast, self._observer, self._stop = forecast, observer, stop
        rate = forecast.nodes / max(forecast.seconds, 1e-9)
        self._core = Core(budget_for(forecast.seconds, ledger_bytes), Pace(rate))
        self._shown = 0.0
        self._arrived: deque[tuple[str, HandBack | Exception]] = deque()
        self._unbooked: list[Bundle] = []
        self._ledger_bytes = ledger_bytes
        self._bytes, self._tallies = 0, 0
        self._machines: set[str] = set()
        self._seconds = 0.0

    def run(self) -> None:
        """Count until every unit has a tally.

        Raises:
            StoppedError: the stop flag went up; what was counted has been accepted.
            TrustError: an answer contradicts its unit, or units are barred.
            FleetError: those who count are out of reach, or cannot count at all.
        """
        self._look_again()
        try:
            divide_roots(
                self._store,
                self._lease,
                self._task,
                self._forecast,
                max(1, self._crew.slots()),
                0.1,
                self._heed_stop,
                most=max(1, int(self._ledger_bytes / (4 * BYTES_A_TALLY))),
            )
            self._look_again()
            while self._waiting or self._core.out:
                self._heed_stop()
                self._send()
                self._receive(self._crew.collect(_TICK))
                self._show()
        except BaseException:
            self._wind_up()
            raise
        self._show(at_once=True)
        self._finish()

    def _finish(self) -> None:
        barred = self._store.units(self._task.reading, State.BARRED, limit=1)
        if barred:
            raise TrustError(
                f"barred after {barred[0].attempts} failures, the last one: {barred[0].last_error}",
                where=f"unit {barred[0].key}",
                mend="its terms are not final; nothing else is missing; `count --readmit` hands it out again",
            )
        self._store.finish_reading(self._lease, self._task.reading)

    def _heed_stop(self) -> None:
        if self._stop.up:
            raise StoppedError("stopped")

    def _look_again(self) -> None:
        """Take the state of the reading from the ledger."""
        census = self._store.census(self._task.reading)
        self._waiting = census.states[State.WAITING].units
        self._units = census.units
        self._settled = census.states[State.COUNTED].units + census.states[State.DIVIDED].units
        self._nodes, self._remaining = float(census.nodes), census.expected

    def _send(self) -> None:
        slots = self._crew.slots()
        room = self._core.room(slots)
        if not room or not self._waiting:
            return
        waiting = self._store.waiting(self._task.reading, room * MOST_UNITS)
        if not waiting:
            self._look_again()
        tokens = [uuid.uuid4().hex for _ in range(room)]
        for bundle in self._core.deal(waiting, tokens, self._remaining, slots):
            units = self._store.hand_out(self._lease, self._task.reading, bundle.keys, bundle.token)
            sent = Bundle(bundle.token, tuple(units), bundle.seconds)
            self._core.sent(sent)
            self._waiting -= len(units)
            parts = tuple((unit.key, unit.factor) for unit in units)
            self._crew.submit(HandOut(self._task, bundle.token, parts, bundle.seconds))

    def _receive(self, arrived: Sequence[tuple[str, HandBack | Exception]]) -> None:
        self._arrived.extend(arrived)
        while self._arrived:
            token, what = self._arrived.popleft()
            if isinstance(what, HandBack):
                self._take_back(what)
            elif isinstance(what, FleetcountError):
                raise what
            else:
                self._take_lost(token, what)

    def _take_back(self, back: HandBack) -> None:
        self._machines.add(back.machine)
        bundle = self._core.back(back.token, back.nodes, back.seconds)
        if bundle is None:
            return
        try:
            self._book(back, bundle)
        except BaseException:
            self._unbooked.append(bundle)
            raise

    def _book(self, back: HandBack, bundle: Bundle) -> None:
        verdicts = self._store.accept(self._lease, back.answers)
        refused = [a for a, v in zip(back.answers, verdicts, strict=True) if v is Verdict.REFUSED]
        if refused:
            raise TrustError(
                "an answer contradicts the unit it was asked for", where=f"machine {back.machine}"
            )
        accepted = [a for a, v in zip(back.answers, verdicts, strict=True) if v is Verdict.ACCEPTED]
        unsettled = {key for key, _ in back.failed}
        for key, error in back.failed:
            self._hand_back(back.token, [key], error, back.machine)
        if len(accepted) + len(unsettled) < len(bundle.units):  # whatever else is still out waits again
            unsettled |= {row.key for row in self._hand_back(back.token, bundle.keys)}
        for answer in accepted:
            self._units += len(answer.expected)
            self._waiting += len(answer.expected)
            self._remaining += sum(answer.expected)
        kept = [unit.expected for unit in bundle.units if unit.key not in unsettled]
        self._settled += len(kept)
        self._remaining = max(0.0, self._remaining - sum(kept))
        self._nodes, self._seconds = self._nodes + back.nodes, self._seconds + back.seconds
        self._learn_sizes(accepted)

    def _learn_sizes(self, accepted: Sequence[Answer]) -> None:
        """Large tallies, as joint counts have, ask for longer bundles, so that the ledger keeps within its size."""
        self._bytes += sum(len(pack(a.text)) + _UNIT_BYTES * (1 + len(a.expected)) for a in accepted)
        self._tallies += len(accepted)
        if self._tallies:
            mean = self._bytes / self._tallies
            self._core.budget = budget_for(self._forecast.seconds, self._ledger_bytes, mean)

    def _take_lost(self, token: str, error: Exception) -> None:
        again, failed = self._core.lost(token)
        self._observer.note(
            f"a bundle of {len(again) + len(failed)} units was lost with its process; counted again"
        )
        self._store.event(
            self._task.series.digest, "bundle lost", f"{type(error).__name__}: {len(again)} units"
        )
        self._hand_back(token, again)
        self._hand_back(token, failed, "the process died each time it was counted", "one that died")

    def _hand_back(
        self, token: str, keys: Sequence[str], failed: str | None = None, machine: str = ""
    ) -> list[UnitRow]:
        if not keys:
            return []
        machines = max(1, len(self._machines))
        rows = self._store.hand_back(self._lease, self._task.reading, keys, token, failed, machine, machines)
        self._waiting += sum(row.state is State.WAITING for row in rows)
        return rows

    def _wind_up(self) -> None:
        """Stop the kernels, take what they have, put the rest back; whatever goes wrong here is left to the lease."""
        deadline = time.monotonic() + _PATIENCE
        with self._in_passing("not everything could be awaited"):
            self._crew.stop()
            while self._core.out and time.monotonic() < deadline and not self._stop.hurry:
                self._receive(self._crew.collect(_TICK))
        with self._in_passing("not everything could be handed back"):
            for bundle in [*self._unbooked, *self._core.out.values()]:
                self._hand_back(bundle.token, bundle.keys)

    @contextlib.contextmanager
    def _in_passing(self, what: str) -> Iterator[None]:
        """Only note what goes wrong: an error that came before is the one to report."""
        try:
            yield
        except Exception as error:  # noqa: BLE001 - see above
            self._observer.note(f"{what}: {error}")

    def _show(self, at_once: bool = False) -> None:
        now = time.monotonic()
        if now - self._shown < _MOMENT and not at_once:
            return
        self._shown = now
        cores = self._crew.slots()
        self._observer.moment(
            Snapshot(
                top=int(self._task.lengths.rpartition("-")[2]),
                done=self._nodes,
                remaining=self._remaining if self._waiting or self._core.out else 0.0,
                settled=self._settled,
                units=self._units,
                rate=self._core.pace.rate * cores,
                cores=cores,
                seconds=self._seconds,
            )
        )
