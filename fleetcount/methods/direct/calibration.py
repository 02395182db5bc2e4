"""What the direct method is expected to cost here: a fraction of a second of real counting, extrapolated.

These are floats. They order units, size bundles and show progress; they never enter a tally.
"""

from __future__ import annotations

import math
import time
from collections.abc import Mapping
from dataclasses import dataclass

from fleetcount.methods.direct.keys import Prefix

KERNEL_SECONDS = 0.04
"""A trial that spent so long in kernels tells the rate well enough."""

ALL_SECONDS = 1.0
"""No more core time than this goes into trials, the making of patches included."""

_MOST = 600.0
"""Greatest logarithm of an extrapolation: beyond it everything is equally hopeless."""

PERIOD = 4
"""Growth is measured over so many steps: on some lattices polygons have even lengths only, or multiples of four."""


@dataclass(frozen=True)
class Calibration:
    """Nodes visited for each reach that was tried, and how they grow.

    Attributes:
        first: the least reach that was tried; the others follow without a gap.
        nodes: nodes of the whole count up to each reach, symmetry used; they never decrease.
        parts: for each root its part of the nodes at the greatest reach.
        growth: factor by which the nodes grow with each further step.
        rate: nodes a second of core time on this machine.
    """

    first: int
    nodes: tuple[float, ...]
    parts: Mapping[Prefix, float]
    growth: float
    rate: float

    @property
    def reach(self) -> int:
        """The greatest reach that was tried."""
        return self.first + len(self.nodes) - 1

    def total(self, reach: int) -> float:
        """Nodes expected for the whole count up to a reach; a longer reach never needs fewer."""
        if reach < self.first:
            return 1.0
        if reach <= self.reach:
            return self.nodes[reach - self.first]
        period = min(PERIOD, len(self.nodes))
        last = (self.reach - reach) % period
        steps = min(reach - self.reach + last, 10**9)
        return math.exp(min(_MOST, math.log(self.nodes[-1 - last]) + steps * math.log(self.growth)))


class Calibrator:
    """Collects the trial counts; `enough` tells when the last one took long enough to judge the rate."""

    def __init__(self, first: int) -> None:
        self.first = first
        self.nodes: list[float] = []
        self.parts: dict[Prefix, float] = {}
        self.seconds: list[float] = []
        self._began = time.thread_time()

    def add(self, nodes: Mapping[Prefix, int], seconds: float) -> None:
        """Take in the nodes of the next reach, by start site."""
        total = float(max(sum(nodes.values()), 1, *self.nodes[-1:]))
        self.nodes.append(total)
        self.parts = {start: max(number, 1) / total for start, number in nodes.items()}
        self.seconds.append(seconds)

    def enough(self) -> bool:
        spent = time.thread_time() - self._began
        return spent > ALL_SECONDS or (bool(self.seconds) and self.seconds[-1] > KERNEL_SECONDS)

    def result(self) -> Calibration:
        """Growth from terms some steps apart, because single steps may jump."""
        nodes = self.nodes
        back = min(PERIOD, len(nodes) - 1)
        growth = (nodes[-1] / nodes[-1 - back]) ** (1 / back) if back else 2.0
        rate = sum(nodes[-3:]) / max(sum(self.seconds[-3:]), 1e-6)
        return Calibration(self.first, tuple(nodes), self.parts, max(growth, 1.01), max(rate, 1e5))
