"""What a count looks like from outside while it runs: for bars, lines and notebooks."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

from fleetcount.series.table import CoefficientTable


@dataclass(frozen=True)
class Snapshot:
    """A moment of a reading.

    Attributes:
        top: the reach.
        done, remaining: nodes visited, and expected of the units that have no tally.
        units: units that have a tally, by all that exist so far.
        rate: nodes a second of all cores together, lately; 0 where unknown.
        cores: cores that count.
        seconds: core time inside kernels in this run.
    """

    top: int
    done: float
    remaining: float
    settled: int
    units: int
    rate: float
    cores: int
    seconds: float

    @property
    def share(self) -> float:
        """Share done; 1 only when nothing is left."""
        if self.remaining <= 0:
            return 1.0
        return min(self.done / (self.done + self.remaining), 0.9999)

    @property
    def seconds_left(self) -> float | None:
        """Seconds that the rest is expected to take, or None where unknown."""
        return self.remaining / self.rate if self.rate > 0 else None


class Observer(Protocol):
    """Whoever looks on. Called from the coordinator's thread; must return quickly."""

    def stage(self, text: str) -> None:
        """A stage begins: `compiling kernels`, `starting 2 cores`."""

    def terms(self, table: CoefficientTable) -> None:
        """The first terms, from the short reading."""

    def moment(self, snapshot: Snapshot) -> None:
        """Several times a second while units are counted."""

    def note(self, text: str) -> None:
        """Something the user should know."""


class Nobody:
    """An observer that looks away."""

    def stage(self, text: str) -> None: ...

    def terms(self, table: CoefficientTable) -> None: ...

    def moment(self, snapshot: Snapshot) -> None: ...

    def note(self, text: str) -> None: ...
