"""One depth-first search below one prefix: slice by slice, resumable, able to hand back what it has not seen."""

from __future__ import annotations

import time
from collections.abc import Iterator

import numpy as np

from fleetcount.errors import InputError
from fleetcount.methods.direct.ground import START, Array, Ground, Stack, levels
from fleetcount.methods.direct.kernels import DEPTH, FLOOR, NODES, TOP, VISITED

SLICE_NODES = 1 << 24
"""No call of a kernel visits more nodes than this (and one node's leaves)."""

SLICE_SECONDS = 0.05
"""Length of a slice to aim at, between 0.02 and 0.1 s."""

FIRST_SLICE = 1 << 17
LEAST_SLICE = 1 << 10


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


class Search:
    """The subtree below `arms`, on a ground. Sums are Python integers by length; kernels' own are cleared each slice.

    A prefix is legal when it avoids itself; `Search` raises InputError when it is not.
    """

    def __init__(self, ground: Ground, arms: tuple[int, ...]) -> None:
        check_bound(ground.series.lattice.name, ground.arms, max(ground.states.orders))
        self.ground = ground
        self.arms = arms
        self.base = len(arms)
        self.sums: dict[int, int] = {}
        self.nodes = 0
        self.seconds = 0.0
        self.done = False
        self._slice = FIRST_SLICE
        self._stack = Stack.of(ground.top)
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

    def slice(self) -> bool:
        """Run one slice; returns whether the subtree is exhausted down to the floor."""
        if self.done:
            return True
        began = time.thread_time()
        ground = self.ground
        following, previous, back, kind = ground.tables()
        if self._closed:
            arrays: tuple[Array, ...] = (following, kind, ground.images, ground.onward, self._marks)
        else:
            arrays = (following, previous, back, kind, ground.images, ground.onward, self._marks)
        done = ground.run(*arrays, *self._stack.arrays(), self._slice)
        spent = time.thread_time() - began
        self._collect(spent)
        self.done = bool(done) and self._reg(FLOOR) == self.base
        return bool(done)

    def climb(self, share: float) -> Iterator[None]:
        """Finish the deepest open subtrees, slice by slice, so that only siblings near the prefix are left.

        Args:
            share: of the nodes visited so far; how many more that may take, by the looks of it.
        """
        floor = self._floor_within(share)
        if floor > self._reg(DEPTH):
            return
        self._stack.reg[FLOOR] = floor
        self._slice = max(LEAST_SLICE, min(self._slice, int(share * self.nodes / 4)))
        while not self.slice():
            yield

    def _floor_within(self, share: float) -> int:
        """The least depth below which no more than that share of what is done is still open.

        As if every subtree were as large as its siblings.
        """
        done, part = 0.0, 1.0
        left: list[float] = []
        deepest = self._reg(DEPTH)
        for depth, ways in enumerate(self._open(), self.base):
            waiting, tried = len(ways), self._tried(depth)
            all_ways = max(waiting + tried, 1)
            left.append(part * waiting / all_ways)
            done += part * (tried - (depth < deepest)) / all_ways
            part /= all_ways
        floor, more = deepest + 1, 0.0
        for depth in range(deepest, self.base - 1, -1):
            more += left[depth - self.base]
            if more > share * done:
                break
            floor = depth
        return floor

    def rest(self) -> Iterator[tuple[tuple[int, ...], int]]:
        """The prefixes not seen yet, each with its images under the symmetries that keep this search's own prefix.

        What their parents have already counted of them (the prefix itself, for walks) is taken out of the sums, so
        call it once, at the end.
        """
        if self.done:
            return
        stack = self._stack
        path = [*self.arms, *(int(stack.arm[d]) - 1 for d in range(self.base, self._reg(DEPTH)))]
        for depth, ways in enumerate(self._open(), self.base):
            for arm, times in ways:
                factor = times * int(stack.weight[depth])
                if not self._closed:
                    self.sums[depth + 1] -= factor
                yield (*path[:depth], arm), factor
        self.done = True

    def _open(self) -> list[list[tuple[int, int]]]:
        """For each depth from the base on the arms not tried yet, each with its images."""
        return [self._ways(depth, int(self._stack.arm[depth]), self.ground.arms) for depth in self._depths()]

    def _tried(self, depth: int) -> int:
        """How many arms were tried at a depth, that of the path included."""
        return len(self._ways(depth, 0, int(self._stack.arm[depth])))

    def _depths(self) -> range:
        return range(self.base, self._reg(DEPTH) + 1)

    def _ways(self, depth: int, first: int, last: int) -> list[tuple[int, int]]:
        ground, stack = self.ground, self._stack
        here, state = int(stack.path[depth]), int(stack.state[depth])
        kind = int(ground.patch.kind[here])
        found = []
        for arm in range(first, last):
            there = int(ground.patch.next[here, arm])
            times = int(ground.images[state, kind, arm])
            if times and there and self._can_go(there, depth):
                found.append((arm, times))
        return found

    def _can_go(self, there: int, depth: int) -> bool:
        """Whether a step from `depth` may go to a site: sites visited further on are no obstacle to it."""
        sites = self._stack.path[: self._reg(DEPTH) + 1]
        if there in sites[: depth + 1]:
            return False
        if not self._closed:
            return True
        home = int(self._marks[there]) - (VISITED if there in sites else 0)
        return depth + 1 + home <= self.ground.top

    def _reg(self, which: int) -> int:
        return int(self._stack.reg[which])

    def _collect(self, spent: float) -> None:
        stack = self._stack
        for n in np.flatnonzero(stack.sums):
            self.sums[int(n)] = self.sums.get(int(n), 0) + int(stack.sums[n])
        stack.sums[:] = 0
        nodes = self._reg(NODES)
        stack.reg[NODES] = 0
        self.nodes += nodes
        self.seconds += spent
        if nodes >= self._slice and spent > 0:
            aim = int(self._slice * min(4.0, SLICE_SECONDS / spent))
            self._slice = max(LEAST_SLICE, min(SLICE_NODES, aim))

    def _walk_to_base(self) -> None:
        ground, stack = self.ground, self._stack
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
        here = int(self._stack.path[self.base])
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
