"""What the direct method is expected to cost here: a fraction of a second of real counting, extrapolated.

These are floats. They order units, size bundles and show progress; they never enter a tally.
"""

from __future__ import annotations

import math
import time
from dataclasses import dataclass

from fleetcount.methods.direct.keys import Prefix

KERNEL_SECONDS = 0.04
"""A trial that spent so long in kernels tells the rate well enough."""

ALL_SECONDS = 1.0
"""No more core time than this goes into trials, the making of patches included."""

_MOST = 600.0
"""Greatest logarithm of an extrapolation: beyond it everything is equally hopeless."""


@dataclass(frozen=True)
class Calibration:
    """Nodes visited for each reach that was tried, and how they grow.

    Attributes:
        reaches, nodes: reach and nodes of the whole count up to it, symmetry used.
        growth: factor by which the nodes grow with each further step.
        rate: nodes a second of core time on this machine.
    """

    reaches: tuple[int, ...]
    nodes: tuple[float, ...]
    growth: float
    rate: float

    def total(self, reach: int) -> float:
        """Nodes expected for the whole count up to a reach."""
        if reach in self.reaches:
            return self.nodes[self.reaches.index(reach)]
        last = (
            -1 if (reach - self.reaches[-1]) % 2 == 0 or len(self.reaches) < 2 else -2
        )  # parity: see polygons
        steps = min(reach - self.reaches[last], _MOST / math.log(self.growth))
        return float(max(1.0, self.nodes[last] * self.growth**steps))


def below(calibration: Calibration, top: int, prefix: Prefix, order: int, whole_order: int) -> float:
    """Nodes expected below one prefix, whose symmetries have order `order`, of `whole_order` at the start."""
    depth = len(prefix.arms)
    share = whole_order / order / calibration.growth**depth
    return max(1.0, calibration.total(top) * min(1.0, share))


class Calibrator:
    """Collects the trial counts; `enough` tells when the last one took long enough to judge the rate."""

    def __init__(self) -> None:
        self.reaches: list[int] = []
        self.nodes: list[float] = []
        self.seconds: list[float] = []
        self._began = time.thread_time()

    def add(self, reach: int, nodes: int, seconds: float) -> None:
        self.reaches.append(reach)
        self.nodes.append(float(max(nodes, 1)))
        self.seconds.append(seconds)

    def enough(self) -> bool:
        spent = time.thread_time() - self._began
        return spent > ALL_SECONDS or (bool(self.seconds) and self.seconds[-1] > KERNEL_SECONDS)

    def result(self) -> Calibration:
        """Growth from the last terms, two apart where parity makes single steps jump."""
        nodes, seconds = self.nodes, self.seconds
        back = min(4, len(nodes) - 1)
        growth = (nodes[-1] / nodes[-1 - back]) ** (1 / back) if back else 2.0
        rate = sum(nodes[-3:]) / max(sum(seconds[-3:]), 1e-6)
        return Calibration(tuple(self.reaches), tuple(nodes), max(growth, 1.01), max(rate, 1e5))
