"""The pure core of the coordinator: events in, actions out, no clock, no database, no network.

It deals waiting units into bundles and remembers what is out with whom. The ledger is the queue: the core keeps
nothing of a unit that waits, but how often a process died while it was out.
"""

from __future__ import annotations

from collections import Counter, deque
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field

from fleetcount.errors import InternalError
from fleetcount.ledger.store import UnitRow

LEAST_SECONDS = 1.0
"""No bundle is shorter: dealing one costs 10-15 ms."""

USUAL_SECONDS = 3.0
"""A bundle of a short count: what a killed process loses on each core, at most."""

MOST_SECONDS = 900.0
MOST_UNITS = 400
BYTES_A_TALLY = 2_500
"""Stored size of a plain tally with its units, roughly: what is reckoned with before any has come back."""

TALLIES_A_BUNDLE = 20
"""So many tallies a bundle leaves, roughly."""

DEATHS_TO_SUSPECT = 2
DEATHS_TO_FAIL = 8


@dataclass(frozen=True)
class Bundle:
    """Units that are out together: their keys, the nodes expected of them, the seconds they are given."""

    token: str
    units: tuple[UnitRow, ...]
    seconds: float

    @property
    def keys(self) -> list[str]:
        return [unit.key for unit in self.units]


@dataclass
class Pace:
    """How fast it goes: nodes a second of one core."""

    rate: float
    _nodes: float = 0.0
    _seconds: float = 0.0

    def learn(self, nodes: int, seconds: float) -> None:
        """Take in what a bundle did; the last bundles weigh most."""
        self._nodes = 0.9 * self._nodes + nodes
        self._seconds = 0.9 * self._seconds + seconds
        if self._seconds > 0.05:
            self.rate = max(self._nodes / self._seconds, 1.0)


@dataclass
class Core:
    """What the coordinator decides.

    Attributes:
        budget: seconds of a bundle far from the end of the count.
        pace: what has been learnt of the speed.
        out: bundles in flight, by token.
        deaths: for each unit the times that a process died while it was out.
    """

    budget: float
    pace: Pace
    out: dict[str, Bundle] = field(default_factory=dict)
    deaths: Counter[str] = field(default_factory=Counter)

    def room(self, slots: int) -> int:
        """Bundles that may still go out: one for each core that counts, so nothing ever waits on a worker."""
        return max(0, slots - len(self.out))

    def seconds(self, remaining: float, slots: int) -> float:
        """The budget of the next bundle: shorter towards the end, so that all cores finish together.

        Args:
            remaining: nodes still expected of all units that have no tally.
            slots: cores that count.
        """
        left = remaining / self.pace.rate / max(1, slots)
        return max(LEAST_SECONDS, min(self.budget, left / 2))

    def deal(
        self, waiting: Sequence[UnitRow], tokens: Iterable[str], remaining: float, slots: int
    ) -> list[Bundle]:
        """Bundles for the free cores out of the units that wait, the largest first.

        Of the units that processes died over only one is out at a time, in a short bundle of its own: whatever
        kills processes is then blamed alone in the end. The bundles are not out before `sent`.
        """
        seconds, bundles = self.seconds(remaining, slots), []
        enough = seconds * self.pace.rate
        suspects = [unit for unit in waiting if self.suspect(unit.key)][:1]
        if any(self.suspect(key) for bundle in self.out.values() for key in bundle.keys):
            suspects = []
        queue = deque(unit for unit in waiting if not self.suspect(unit.key))
        for token in tokens:
            if suspects:
                bundles.append(Bundle(token, (suspects.pop(),), LEAST_SECONDS))
                continue
            nodes, units = 0.0, list[UnitRow]()
            while queue and nodes < enough and len(units) < MOST_UNITS:
                units.append(queue.popleft())
                nodes += units[-1].expected
            if not units:
                break
            bundles.append(Bundle(token, tuple(units), seconds))
        return bundles

    def suspect(self, key: str) -> bool:
        """Whether processes have died over this unit."""
        return self.deaths[key] >= DEATHS_TO_SUSPECT

    def sent(self, bundle: Bundle) -> None:
        """A bundle is on its way."""
        self.out[bundle.token] = bundle
        self.validate()

    def back(self, token: str, nodes: int, seconds: float) -> Bundle | None:
        """A bundle came back; None if it is none of ours."""
        bundle = self.out.pop(token, None)
        if bundle is not None:
            self.pace.learn(nodes, seconds)
        return bundle

    def lost(self, token: str) -> tuple[list[str], list[str]]:
        """A process died with a bundle: keys that just wait again, and keys that are to count as failed."""
        bundle = self.out.pop(token, None)
        if bundle is None:
            return [], []
        self.deaths.update(bundle.keys)
        failed = [k for k in bundle.keys if len(bundle.units) == 1 and self.deaths[k] >= DEATHS_TO_FAIL]
        return [k for k in bundle.keys if k not in failed], failed

    def validate(self) -> None:
        """No unit is out twice."""
        keys = [key for bundle in self.out.values() for key in bundle.keys]
        if len(keys) != len(set(keys)):
            raise InternalError("a unit is out twice")


def budget_for(core_seconds: float, ledger_bytes: float, tally_bytes: float = BYTES_A_TALLY) -> float:
    """Seconds of a bundle such that a count of that many seconds keeps its ledger within a size."""
    bundles = ledger_bytes / (tally_bytes * TALLIES_A_BUNDLE)
    return min(MOST_SECONDS, max(USUAL_SECONDS, core_seconds / bundles))
