"""The search with the plain kernels: walks and polygons by length."""

from __future__ import annotations

import numpy as np

from fleetcount.errors import InputError
from fleetcount.methods.direct.ground import START, Array, Ground, Stack, levels
from fleetcount.methods.direct.kernels import DEPTH, FLOOR, TOP, VISITED
from fleetcount.methods.direct.slices import SLICE_NODES, Slices
from fleetcount.series.tally import Tally


def check_bound(lattice: str, arms: int, order: int) -> None:
    """Prove that no 64-bit sum overflows within a slice.

    Each node visited adds to a sum at most arms * arms * arms objects times its weight, and the weight never exceeds
    the order of the symmetry group of the start, since it is the index of one of its subgroups. A call may visit what
    is below one node more than its limit.

    Args:
        lattice: its name.
        arms: columns of the tables of neighbours.
        order: symmetries that keep the start.
    """
    nodes = SLICE_NODES + arms * arms + arms + 1
    if nodes * arms * arms * arms * order >= 2**63:
        raise InputError(
            "too many arms and symmetries for 64-bit slices",
            where=f"lattice {lattice}",
            mend=f"arms * arms * arms * order of the group must stay under {2**63 // nodes}",
        )


class Search(Slices):
    """The subtree below `arms`, on a ground. A prefix that the object cannot begin with is an InputError."""

    def __init__(self, ground: Ground, arms: tuple[int, ...]) -> None:
        check_bound(ground.series.lattice.name, ground.arms, max(ground.states.orders))
        self._own = Stack.of(ground.top)
        super().__init__(arms, self._own)
        self.ground = ground
        self.sums: dict[int, int] = {}
        self._closed = ground.series.rule.closed
        patch = ground.patch
        if self._closed:
            self._marks = ground.home(arms[0] if arms else 0).copy()
        else:
            self._marks = patch.free.astype(np.int32)
            self._marks[0] = -VISITED
        self._walk_to_base()
        if not self.done:
            self._count_base()

    @staticmethod
    def reaches(ground: Ground, depth: int) -> bool:
        """Whether a prefix of that depth leaves the kernels enough steps; they count the last ones without visiting."""
        return depth < ground.top - 1 - levels(ground.series)

    def tally(self) -> Tally:
        """Counts by length; closed objects as closed walks."""
        ground = self.ground
        least = ground.series.rule.least_length(ground.series.lattice)
        return Tally.of_counts({n: c for n, c in self.sums.items() if least <= n <= ground.top})

    def _call(self, limit: int) -> bool:
        ground = self.ground
        following, previous, back, kind = ground.tables()
        if self._closed:
            arrays: tuple[Array, ...] = (following, kind, ground.images, ground.onward, self._marks)
        else:
            arrays = (following, previous, back, kind, ground.images, ground.onward, self._marks)
        return bool(ground.run(*arrays, *self._own.arrays(), limit))

    def _collect(self) -> None:
        sums = self._own.sums
        for n in np.flatnonzero(sums):
            self.sums[int(n)] = self.sums.get(int(n), 0) + int(sums[n])
        sums[:] = 0

    def _columns(self) -> int:
        return self.ground.arms

    def _images(self, depth: int, arm: int) -> int:
        ground, stack = self.ground, self._own
        return int(ground.images[int(stack.state[depth]), ground.patch.kind[int(stack.path[depth])], arm])

    def _can_go(self, path: list[int], depth: int, arm: int) -> bool:
        """Sites visited further on are no obstacle to a step from `depth`."""
        sites = self._own.path[: self._reg(DEPTH) + 1]
        there = int(self.ground.patch.next[int(sites[depth]), arm])
        if there == 0 or there in sites[: depth + 1]:
            return False
        if not self._closed:
            return True
        home = int(self._marks[there]) - (VISITED if there in sites else 0)
        return depth + 1 + home <= self.ground.top

    def _leave_out(self, length: int, factor: int) -> None:
        if not self._closed:
            self.sums[length] -= factor

    def _walk_to_base(self) -> None:
        ground, stack = self.ground, self._own
        stack.reg[TOP], stack.reg[FLOOR] = ground.top, self.base
        stack.state[0] = ground.states.first
        stack.weight[:] = 1
        stack.path[0] = START
        self._mark(START)
        for depth, arm in enumerate(self.arms):
            here, state = int(stack.path[depth]), int(stack.state[depth])
            kind = int(ground.patch.kind[here])
            there = int(ground.patch.next[here, arm]) if arm < ground.arms else 0
            if there == 0 and self._closed:  # too far away to come home: nothing is there to be counted
                self.done = True
                return
            if there == 0 or there in stack.path[: depth + 1]:
                raise InputError(
                    "a prefix that the object cannot begin with", where=".".join(map(str, self.arms))
                )
            if int(ground.images[state, kind, arm]) == 0:
                raise InputError("a prefix that another one stands for", where=".".join(map(str, self.arms)))
            stack.path[depth + 1] = there
            stack.state[depth + 1] = ground.onward[state, kind, arm]
            stack.arm[depth] = ground.arms
            self._mark(there)
        stack.reg[DEPTH] = self.base

    def _count_base(self) -> None:
        """What a parent would have counted when it stepped onto this prefix, and the prefix itself."""
        here = int(self._own.path[self.base])
        if not self._closed:
            self.sums = {self.base: 1, self.base + 1: int(self._marks[here]) + VISITED}
        elif self.base and int(self._marks[here]) - VISITED == 1:
            self.sums = {self.base + 1: 1}

    def _mark(self, site: int) -> None:
        if self._closed:
            self._marks[site] += VISITED
            return
        np.subtract.at(self._marks, self.ground.patch.previous[site], 1)
        self._marks[site] -= VISITED
