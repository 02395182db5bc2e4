"""Crews in this process that misbehave on purpose, and what is needed to set a coordinator to work on them."""

from __future__ import annotations

import random
from collections import Counter
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

from fleetcount.fleet.coordinator import Coordinator
from fleetcount.fleet.core import DEATHS_TO_FAIL
from fleetcount.fleet.interrupt import StopFlag
from fleetcount.fleet.planning import open_reading
from fleetcount.fleet.snapshot import Nobody, Observer, Snapshot
from fleetcount.fleet.work import HandBack, HandOut, Task, count_bundle
from fleetcount.lattice.catalogue import find
from fleetcount.ledger import leasing
from fleetcount.ledger.states import State
from fleetcount.ledger.store import Lease, Store
from fleetcount.methods.face import Forecast
from fleetcount.series import canonical
from fleetcount.series.defining import define
from fleetcount.series.definition import Series

SQUARE_WALKS = [1, 4, 12, 36, 100, 284, 780, 2172, 5916, 16268, 44100]
"""Self-avoiding walks of the square lattice, OEIS A001411."""

TOP = 8
MANY_UNITS = Forecast(nodes=100.0, seconds=1e6, spread=1.0, shares=())
"""So slow a machine that even a short count is divided into many units, and each bundle holds few."""

Answered = tuple[str, HandBack | Exception]


def square_walks() -> Series:
    return define(find("square"), "walk", None)


def held(store: Store, series: Series | None = None) -> Lease:
    """The lease of a series that the store knows afterwards."""
    series = series or square_walks()
    store.open_series(series.digest, series.text, canonical.text(series.written()), 1)
    return store.take(series.digest, leasing.this_process())


@dataclass
class Recorder(Nobody):
    """An observer that keeps what it is told."""

    notes: list[str] = field(default_factory=list)
    moments: list[Snapshot] = field(default_factory=list)

    def note(self, text: str) -> None:
        self.notes.append(text)

    def moment(self, snapshot: Snapshot) -> None:
        self.moments.append(snapshot)


class Crew:
    """Counts for real, at once, in this process; subclasses say what comes back, and when."""

    def __init__(self, slots: int = 2, stop: StopFlag | None = None) -> None:
        self.cores = slots
        self.own_stop = stop or StopFlag()
        self.queue: list[HandOut] = []

    def slots(self) -> int:
        return self.cores

    def submit(self, hand_out: HandOut) -> None:
        self.queue.append(HandOut.unpack(hand_out.pack()))

    def collect(self, timeout: float) -> list[Answered]:
        queue, self.queue = self.queue, []
        return [answered for hand_out in queue for answered in self.answer(hand_out)]

    def answer(self, hand_out: HandOut) -> Sequence[Answered]:
        return [(hand_out.token, self.count(hand_out))]

    def count(self, hand_out: HandOut) -> HandBack:
        """As a machine does; it says that it took its time, so that bundles stay small."""
        back = HandBack.unpack(count_bundle(hand_out, self.own_stop).pack())
        back.seconds = max(back.seconds, back.nodes / 50.0)
        return back

    def stop(self) -> None:
        self.own_stop.up = True


class Capricious(Crew):
    """What a network does: answers late, twice, after they were given up, incomplete, or never."""

    def __init__(self, seed: int, slots: int = 3) -> None:
        super().__init__(slots)
        self.chance = random.Random(seed)
        self.held_up: list[Answered] = []
        self.tricks: dict[str, Callable[[HandOut], list[Answered]]] = {
            "at once": lambda out: [(out.token, self.count(out))],
            "late": self._late,
            "twice": lambda out: [(out.token, self.count(out))] * 2,
            "lost": self._lost,
            "lost, then found": self._found,
            "untouched": lambda out: [(out.token, self._untouched(out))],
            "forgetful": self._forgetful,
            "failing once": self._failing,
            "stranger": lambda out: [("no such token", self.count(out)), (out.token, self.count(out))],
        }
        self.failed: set[str] = set()
        self.losses: Counter[str] = Counter()

    def slots(self) -> int:
        return self.chance.randint(0, self.cores)

    def collect(self, timeout: float) -> list[Answered]:
        arrived = super().collect(timeout)
        self.chance.shuffle(self.held_up)
        if self.held_up and (not arrived or self.chance.random() < 0.5):
            arrived.append(self.held_up.pop())
        return arrived

    def answer(self, hand_out: HandOut) -> Sequence[Answered]:
        return self.tricks[self.chance.choice(sorted(self.tricks))](hand_out)

    def _late(self, out: HandOut) -> list[Answered]:
        self.held_up.append((out.token, self.count(out)))
        return []

    def _lost(self, out: HandOut) -> list[Answered]:
        """Not so often that a unit would have to be suspected of killing its process."""
        self.losses.update(key for key, _ in out.units)
        if any(self.losses[key] > DEATHS_TO_FAIL // 2 for key, _ in out.units):
            return [(out.token, self.count(out))]
        return [(out.token, Exception("gone"))]

    def _found(self, out: HandOut) -> list[Answered]:
        answered = self._lost(out)
        self._late(out)
        return answered

    def _untouched(self, out: HandOut) -> HandBack:
        return HandBack(out.token, "alder", untouched=[key for key, _ in out.units])

    def _forgetful(self, out: HandOut) -> list[Answered]:
        back = self.count(out)
        back.answers = back.answers[: len(back.answers) // 2]
        return [(out.token, back)]

    def _failing(self, out: HandOut) -> list[Answered]:
        key = out.units[0][0]
        if key in self.failed:
            return [(out.token, self.count(out))]
        self.failed.add(key)
        rest = HandOut(out.task, out.token, out.units[1:], out.seconds)
        back = self.count(rest)
        back.failed.append((key, "ValueError: just once"))
        return [(out.token, back)]


def set_to_work(
    store: Store,
    lease: Lease,
    crew: Crew,
    top: int = TOP,
    task: Task | None = None,
    stop: StopFlag | None = None,
    observer: Observer | None = None,
    forecast: Forecast = MANY_UNITS,
) -> Task:
    """Open a reading (or go on with one) and count it to its end; returns the task."""
    task = task or open_reading(store, lease, square_walks(), "direct", top)
    observer, stop = observer or Nobody(), stop or StopFlag()
    Coordinator(store, lease, task, crew, forecast, observer, stop).run()
    return task


def only_reading(store: Store) -> str:
    (reading,) = store.readings(square_walks().digest)
    return reading.reading


def states(store: Store) -> dict[State, int]:
    """Number of units by state, those that occur."""
    census = store.census(only_reading(store))
    return {state: share.units for state, share in census.states.items() if share.units}
