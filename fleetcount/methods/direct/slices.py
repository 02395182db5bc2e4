"""What all compiled searches have in common: slices, climbing, and handing back what has not been seen."""

from __future__ import annotations

import time
from collections.abc import Iterator
from typing import Any, Protocol

import numpy as np

from fleetcount.methods.direct.kernels import DEPTH, FLOOR, NODES
from fleetcount.series.tally import Tally

Array = np.ndarray[Any, np.dtype[Any]]

SLICE_NODES = 1 << 24
"""No call of a kernel visits more nodes than this (and what is below one of them)."""

SLICE_SECONDS = 0.05
"""Length of a slice to aim at, between 0.02 and 0.1 s."""

FIRST_SLICE = 1 << 17
LEAST_SLICE = 1 << 10


class Walked(Protocol):
    """The arrays of a search's stack that are looked at between slices."""

    path: Array
    arm: Array
    state: Array
    weight: Array
    reg: Array


class Slices:
    """A depth-first search below a prefix, run slice by slice.

    Attributes:
        arms: the prefix; `base` its length.
        nodes, seconds: visited so far, and core time inside kernels.
        done: nothing is left.
        most: greatest number of nodes of a slice.
    """

    def __init__(self, arms: tuple[int, ...], stack: Walked, most: int = SLICE_NODES) -> None:
        self.arms = arms
        self.base = len(arms)
        self.nodes = 0
        self.seconds = 0.0
        self.done = False
        self.most = most
        self._stack = stack
        self._slice = min(FIRST_SLICE, most)

    def slice(self) -> bool:
        """Run one slice; returns whether the subtree is exhausted down to the floor."""
        if self.done:
            return True
        began = time.thread_time()
        done = self._call(self._slice)
        spent = time.thread_time() - began
        nodes = self._reg(NODES)
        self._stack.reg[NODES] = 0
        self._collect()
        self.nodes += nodes
        self.seconds += spent
        if nodes >= self._slice and spent > 0:
            aim = int(self._slice * min(4.0, SLICE_SECONDS / spent))
            self._slice = min(self.most, max(LEAST_SLICE, aim))
        self.done = done and self._reg(FLOOR) == self.base
        return done

    def climb(self, share: float) -> Iterator[None]:
        """Finish the deepest open subtrees, slice by slice, so that only siblings near the prefix are left.

        Args:
            share: of the nodes visited so far; how many more that may take, by the looks of it.
        """
        floor = self._floor_within(share)
        if floor > self._reg(DEPTH):
            return
        self._stack.reg[FLOOR] = floor
        self._slice = min(self.most, max(LEAST_SLICE, min(self._slice, int(share * self.nodes / 4))))
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

        What their parents have already counted of them is taken out of the sums, so call it once, at the end.
        """
        if self.done:
            return
        path = self._path()
        for depth, ways in enumerate(self._open(), self.base):
            for arm, times in ways:
                factor = times * int(self._stack.weight[depth])
                self._leave_out(depth + 1, factor)
                yield (*path[:depth], arm), factor
        self.done = True

    def _path(self) -> list[int]:
        """The arms that lead to where the search stands."""
        return [*self.arms, *(int(self._stack.arm[d]) - 1 for d in range(self.base, self._reg(DEPTH)))]

    def _open(self) -> list[list[tuple[int, int]]]:
        """For each depth from the base on the arms not tried yet, each with its images."""
        depths = range(self.base, self._reg(DEPTH) + 1)
        return [self._ways(depth, int(self._stack.arm[depth]), self._columns()) for depth in depths]

    def _tried(self, depth: int) -> int:
        """How many arms were tried at a depth, that of the path included."""
        return len(self._ways(depth, 0, int(self._stack.arm[depth])))

    def _ways(self, depth: int, first: int, last: int) -> list[tuple[int, int]]:
        """The possible arms from `first` up to before `last`, each with its images."""
        path = self._path()
        arms = ((arm, self._images(depth, arm)) for arm in range(first, last))
        return [(arm, times) for arm, times in arms if times and self._can_go(path, depth, arm)]

    def tally(self) -> Tally:
        """The sums so far."""
        raise NotImplementedError

    def _reg(self, which: int) -> int:
        return int(self._stack.reg[which])

    def _call(self, limit: int) -> bool:
        """Call the kernel."""
        raise NotImplementedError

    def _collect(self) -> None:
        """Add the kernel's sums to Python integers and clear them."""
        raise NotImplementedError

    def _columns(self) -> int:
        raise NotImplementedError

    def _images(self, depth: int, arm: int) -> int:
        """Images of a step under the symmetries that keep the prefix before it; 0 where another stands for it."""
        raise NotImplementedError

    def _can_go(self, path: list[int], depth: int, arm: int) -> bool:
        """Whether the step is possible after the first `depth` arms of the path."""
        raise NotImplementedError

    def _leave_out(self, length: int, factor: int) -> None:
        """Take out what a parent has already counted of a prefix that is handed back."""
