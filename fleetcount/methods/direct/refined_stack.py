"""The arrays that a refined search writes: marks on the patch, and the stack by depth."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from fleetcount.methods.direct.kernels import REGISTERS
from fleetcount.methods.direct.refined_kernel import VISITED

Array = np.ndarray[Any, np.dtype[Any]]


PAGE = 4096


def placed(shape: tuple[int, ...], dtype: type, row: int, at: int) -> Array:
    """Zeros, so placed that a row of theirs begins `at` bytes into a page.

    A processor takes a load for one of what was stored just before if both lie at the same place of their pages, and
    waits. On the last step every load of `near` follows a store to the sums: kept apart, counts take a tenth to a
    fifth less.
    """
    count = int(np.prod(shape))
    size = np.dtype(dtype).itemsize
    raw = np.zeros(count * size + PAGE, dtype=np.uint8)
    begin = (at - row * (count // shape[0]) * size - raw.ctypes.data) % PAGE
    return raw[begin : begin + count * size].view(dtype).reshape(shape)


@dataclass
class RefinedMarks:
    """How many visited sites are beside each site, with `VISITED` added where it is visited itself; and for objects
    that avoid edges instead how often each site is visited, and which edges are used."""

    seen: Array
    near: Array
    used: Array

    @classmethod
    def of(cls, sites: int, edges: int) -> RefinedMarks:
        """Nothing visited but the wall, where nothing can go."""
        seen = np.zeros(sites + 1, dtype=np.int32)
        near = placed((sites + 1,), np.int32, 0, 0)
        near[0] = VISITED
        return cls(seen, near, np.zeros(edges + 1, dtype=np.uint8))

    def arrays(self) -> tuple[Array, ...]:
        return self.seen, self.near, self.used


@dataclass
class RefinedStack:
    """By depth, in the order of the kernel's arguments."""

    level: Array
    most: Array
    least: Array
    crest: Array
    last_way: Array
    spread: Array
    norm: Array
    vector: Array
    path: Array
    arm: Array
    state: Array
    weight: Array
    sums: Array
    reg: Array

    @classmethod
    def of(cls, top: int, dimension: int, shape: tuple[int, int, int, int]) -> RefinedStack:
        """Empty arrays for lengths up to `top`."""
        depths = top + 3
        level, most, least = (np.zeros((depths, 2), dtype=np.int32) for _ in range(3))
        crest, last_way = (np.zeros(depths, dtype=np.int32) for _ in range(2))
        spread, norm, weight = (np.zeros(depths, dtype=np.int64) for _ in range(3))
        vector = np.zeros((depths, max(dimension, 1)), dtype=np.int64)
        path, arm, state = (np.zeros(depths, dtype=np.uint32) for _ in range(3))
        sums = placed(shape, np.int64, min(top, shape[0] - 1), PAGE // 2)
        reg = np.zeros(REGISTERS, dtype=np.int64)
        return cls(
            level, most, least, crest, last_way, spread, norm, vector, path, arm, state, weight, sums, reg
        )

    def arrays(self) -> tuple[Array | int, ...]:
        return (
            self.level, self.most, self.least, self.crest, self.last_way, self.spread, self.norm, self.vector,
            self.path, self.arm, self.state, self.weight, self.sums.reshape(len(self.sums), -1), self.reg,
            self.sums.shape[2],
        )  # fmt: skip
