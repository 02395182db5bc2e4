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

    def climb(self) -> Iterator[None]:
        """Finish the deepest open subtrees first, slice by slice, until the caller has had enough or all is done."""
        self._stack.reg[FLOOR] = self._reg(DEPTH)
        while not self.done:
            while not self.slice():
                yield
            yield
            if not self.done:  # the next call leaves the exhausted prefix and goes on beside it
                self._stack.reg[FLOOR] -= 1

    def rest(self) -> Iterator[tuple[tuple[int, ...], int]]:
        """The prefixes not seen yet, each with its images under the symmetries that keep this search's own prefix.

        What their parents have already counted of them is taken out of the sums, so call it once, at the end.
        """
        if self.done:
            return
        stack, last = self._stack, self._reg(DEPTH)
        path = [*self.arms, *(int(stack.arm[d]) - 1 for d in range(self.base, last))]
        for depth in range(self.base, last + 1):
            for arm in range(int(stack.arm[depth]), self._columns()):
                times = self._images(depth, arm)
                if times and self._can_go(path, depth, arm):
                    factor = times * int(stack.weight[depth])
                    self._leave_out(depth + 1, factor)
                    yield (*path[:depth], arm), factor
        self.done = True

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
