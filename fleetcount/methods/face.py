"""The small face that every counting method shows; coordinator, ledger and trust know nothing else of it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from enum import Enum
from typing import Protocol

from fleetcount.series.definition import Series
from fleetcount.series.tally import Tally


@dataclass(frozen=True)
class Child:
    """A unit to be counted: the root of a reading, or what another unit left over.

    Attributes:
        key: its prefix, as text.
        factor: images under the symmetries that keep the parent, times the method's sign; of a root its weight.
        expected: nodes that counting it is expected to visit. A forecast: it never enters a tally.
    """

    key: str
    factor: int
    expected: float


@dataclass(frozen=True)
class Counted:
    """What counting (or dividing) one unit gave.

    whole(unit) = explored + sum over children of factor * whole(child)

    Attributes:
        explored: the exact partial sums of what was seen.
        children: the prefixes that were not, sorted by key.
        nodes: nodes of the enumeration tree that were visited.
        seconds: core time inside kernels.
    """

    explored: Tally
    children: tuple[Child, ...]
    nodes: int
    seconds: float


class Word(Enum):
    """What a clock says at the end of a slice."""

    GO = "go"
    TIME_UP = "time up"
    STOP_NOW = "stop now"


class Clock(Protocol):
    """Asked after each slice (0.02-0.1 s) whether to go on."""

    def word(self) -> Word: ...


@dataclass(frozen=True)
class Forecast:
    """What a count is expected to cost. Floats: these never enter a tally.

    Attributes:
        nodes: nodes to visit for the whole reach.
        seconds: core time on this machine.
        spread: factor by which `nodes` may well be wrong, at least 1.
        shares: nodes expected for each reach from 0 up to the one asked, cumulative method by method.
    """

    nodes: float
    seconds: float
    spread: float
    shares: tuple[float, ...]


class Method(Protocol):
    """How a sum is carried out. `lengths` is sorted and not empty."""

    name: str
    version: int

    def refuses(self, series: Series) -> str | None:
        """Why it cannot count this series, or None."""

    def check_reach(self, series: Series, top: int) -> None:
        """Raise InputError if that length is beyond what memory or the method's own arrays allow."""

    def is_warm(self, series: Series) -> bool:
        """Whether the compiled parts lie in this machine's cache already."""

    def prepare(self, series: Series, lengths: Sequence[int]) -> None:
        """Make everything that counting needs in this process: compiled parts, tables."""

    def roots(self, series: Series, lengths: Sequence[int]) -> tuple[Child, ...]:
        """The first units, sorted by key."""

    def divide(self, series: Series, lengths: Sequence[int], key: str) -> Counted:
        """Explored part and child units of a unit, without counting; no child where nothing is left."""

    def count(
        self, series: Series, lengths: Sequence[int], key: str, clock: Clock, without: Sequence[str] = ()
    ) -> Counted:
        """Count a unit until it is done or the clock says otherwise, leaving out the subtrees in `without`."""

    def assemble(self, series: Series, sums: Tally, partial: bool = False) -> Tally:
        """The coefficient table from the weighted sum of all explored tallies.

        Args:
            partial: they are not all there. Then each number is a lower bound, rounded down where complete sums
                leave no remainder.
        """

    def forecast(self, series: Series, lengths: Sequence[int]) -> Forecast:
        """The expected cost."""
