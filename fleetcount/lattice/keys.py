"""Sites of a lattice as 64-bit integers, so that neighbours are found by adding and sites by sorting.

The key of site s of cell c is  s + S * sum over i of (c_i + o_i) * w_i , S being the number of sites in a
cell, o_i = n m_i the greatest size of c_i within n steps of arcs whose cells are at most m_i in size, and
w_i the product of the extents 2 o_j + 1 over j > i. An arc adds one and the same number to every key.
The greatest key is below S times the product of all extents, which is checked to be below 2^63.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence

import numpy as np
from numpy.typing import NDArray

from fleetcount.errors import InputError
from fleetcount.lattice.model import Arc, Lattice


class Arms:
    """What the arms of each site class add to a key.

    Attributes:
        arms: greatest number of arms of a class.
        shift: int64 [classes, arms], to be added to the key; 0 where there is no such arm.
        exists: bool [classes, arms].
    """

    def __init__(self, shifts: Sequence[Sequence[int]]) -> None:
        self.arms = max(len(row) for row in shifts)
        self.shift = np.zeros((len(shifts), self.arms), dtype=np.int64)
        self.exists = np.zeros((len(shifts), self.arms), dtype=np.bool_)
        for kind, row in enumerate(shifts):
            self.shift[kind, : len(row)] = row
            self.exists[kind, : len(row)] = True


class Keys:
    """Keys of all sites within `radius` steps of cell 0.

    Raises:
        InputError: they do not fit in 64 bits.
    """

    def __init__(self, lattice: Lattice, radius: int) -> None:
        self.lattice, self.radius = lattice, radius
        self._offsets, self._weights, size = _layout(lattice, radius)
        if size >= 2**63:
            what = f"cells {radius} steps away do not fit in 64 bits"
            raise InputError(what, where=lattice.name, mend="ask for a smaller length, or use shorter edges")
        self.cell_type = np.int32 if max(self._offsets) < 2**31 else np.int64
        self.out = Arms([[self._shift(arc) for arc in arms] for arms in lattice.arms])
        self.into = Arms([[-self._shift(arc) for arc in arms] for arms in lattice.arms_in])
        arcs = frozenset(lattice.arcs)
        opposite = [[_opposite(arc) in arcs for arc in arms] for arms in lattice.arms]
        self.two_way = all(all(row) for row in opposite)
        self.back = np.zeros(self.out.exists.shape, dtype=np.bool_)
        for kind, row in enumerate(opposite):
            self.back[kind, : len(row)] = row

    @classmethod
    def that_fit(cls, lattice: Lattice, radius: int) -> Keys:
        """Keys for this radius, or for the greatest less than it that fits."""
        while _layout(lattice, radius)[2] >= 2**63:
            radius -= 1
        return cls(lattice, radius)

    def _shift(self, arc: Arc) -> int:
        cells = sum(c * w for c, w in zip(arc.cell, self._weights, strict=True))
        return cells + arc.target - arc.source

    def of(self, site: int) -> NDArray[np.int64]:
        """The key of a site of cell 0, as an array of one."""
        return np.array([site + sum(map(int.__mul__, self._offsets, self._weights))], dtype=np.int64)

    def kinds(self, keys: NDArray[np.int64]) -> NDArray[np.int64]:
        """Site classes [k]."""
        return keys % len(self.lattice.sites)

    def cells(self, keys: NDArray[np.int64]) -> NDArray[np.int64]:
        """Cells [k, periods]."""
        cells = np.empty((len(keys), len(self._weights)), dtype=np.int64)
        rest = keys
        for axis, (offset, weight) in enumerate(zip(self._offsets, self._weights, strict=True)):
            quotient, rest = np.divmod(rest, weight)
            cells[:, axis] = quotient - offset
        return cells

    def neighbours(self, keys: NDArray[np.int64]) -> Iterator[NDArray[np.int64]]:
        """The ends of the arcs out of these sites, one array an arm."""
        kinds = self.kinds(keys)
        for arm in range(self.out.arms):
            near = keys + self.out.shift[kinds, arm]
            exists = self.out.exists[kinds, arm]
            yield near if exists.all() else near[exists]

    @staticmethod
    def without(keys: NDArray[np.int64], known: NDArray[np.int64]) -> NDArray[np.int64]:
        """The keys that are not among the sorted `known`, of which there is at least one."""
        place = np.minimum(np.searchsorted(known, keys), len(known) - 1)
        unknown: NDArray[np.int64] = keys[known[place] != keys]
        return unknown


def _layout(lattice: Lattice, radius: int) -> tuple[list[int], list[int], int]:
    """Offsets, weights, and the first number that is no key."""
    axes = range(lattice.periods)
    offsets = [radius * max(abs(arc.cell[i]) for arc in lattice.arcs) for i in axes]
    weights = [len(lattice.sites) * math.prod(2 * o + 1 for o in offsets[i + 1 :]) for i in axes]
    return offsets, weights, weights[0] * (2 * offsets[0] + 1)


def _opposite(arc: Arc) -> Arc:
    return Arc(arc.target, arc.source, tuple(-c for c in arc.cell))
