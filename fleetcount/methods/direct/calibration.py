"""What the direct method is expected to cost here: a fraction of a second of real counting, extrapolated.

These are floats. They order units, size bundles and show progress; they never enter a tally.
"""

from __future__ import annotations

import time
from dataclasses import dataclass

from fleetcount.methods.direct.keys import Prefix

SECONDS = 0.15
_LEAST_NODES = 20_000


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
        last = -1 if (reach - self.reaches[-1]) % 2 == 0 or len(self.reaches) < 2 else -2  # parity: see polygons
        return max(1.0, self.nodes[last] * self.growth ** (reach - self.reaches[last]))


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
        return spent > 2 * SECONDS or (bool(self.nodes) and spent > SECONDS and self.nodes[-1] > _LEAST_NODES)

    def result(self) -> Calibration:
        """Growth from the last terms, two apart where parity makes single steps jump."""
        nodes, seconds = self.nodes, self.seconds
        back = min(4, len(nodes) - 1)
        growth = (nodes[-1] / nodes[-1 - back]) ** (1 / back) if back else 2.0
        rate = sum(nodes[-3:]) / max(sum(seconds[-3:]), 1e-6)
        return Calibration(tuple(self.reaches), tuple(nodes), max(growth, 1.01), max(rate, 1e5))
