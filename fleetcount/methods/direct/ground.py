"""What a search needs besides its prefix: the patch, the symmetry states and the kernel, made once a reach."""

from __future__ import annotations

import operator
import threading
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, field
from functools import cache, lru_cache
from typing import Any

import numpy as np

from fleetcount.errors import SeriesError
from fleetcount.lattice.model import Lattice
from fleetcount.lattice.patch import Patch, build, check_fits, distance_to
from fleetcount.methods import compiled
from fleetcount.methods.direct import kernels
from fleetcount.methods.direct.allowed import allowed_sites
from fleetcount.methods.direct.keys import Prefix
from fleetcount.methods.direct.symmetry_states import SymmetryStates, states_of
from fleetcount.series.definition import Series

Array = np.ndarray[Any, np.dtype[Any]]

_building = threading.Lock()
START = 1
"""The start's number in every patch."""

WIDTHS = (2, 3, 4, 6, 8, 10, 12, 16, 24, 32, 48, 64)
"""Widths of the tables that kernels are compiled for: those of the built-in lattices, and few between."""


@dataclass(frozen=True)
class Ground:
    """Read-only arrays shared by all searches of one series from one start, up to one reach.

    `images` and `onward` are the symmetry states as int32 arrays [states, kinds, arms].
    """

    series: Series
    root: Prefix
    top: int
    patch: Patch
    states: SymmetryStates
    images: Array
    onward: Array
    run: Callable[..., bool]
    _homes: dict[int, Array] = field(default_factory=dict)

    def tables(self) -> tuple[Array, ...]:
        """Neighbours, in-neighbours, whether there is a way back, and kinds, as the kernels index with them: unsigned,
        which spares them the test for counting from the end."""
        patch = self.patch
        return (
            patch.next.view(np.uint32),
            patch.previous.view(np.uint32),
            patch.back,
            patch.kind.view(np.uint16),
        )

    @property
    def arms(self) -> int:
        return int(self.patch.next.shape[1])

    def home(self, first_arm: int) -> Array:
        """Least number of steps from each site back to the start, int32 [sites + 1]; see `polygon_kernel`.

        Rooted at the least site of an undirected lattice each polygon is run through in one sense only: it comes
        home by a greater arm than it left by.
        """
        one_sense = self.root.least and not self.series.lattice.one_way
        above = first_arm if one_sense else -1
        if above not in self._homes:
            patch = self.patch
            entries = patch.previous[START] if self.series.lattice.one_way else patch.next[START, above + 1 :]
            home = distance_to(patch, [int(x) for x in entries]) + 1
            home[0] = kernels.VISITED
            self._homes[above] = np.minimum(home, kernels.VISITED).astype(np.int32)
        return self._homes[above]

    def returning(self, arms: Sequence[int]) -> list[list[int]]:
        """Before each step of a polygon's prefix and after its last: the arms from which it can still come home."""
        here, seen, found = START, {START}, []
        for depth in range(len(arms) + 1):
            ways = []
            for arm, there in enumerate(self.patch.next[here].tolist()):
                home = self.home(arms[0] if depth else arm)
                if there and there not in seen and depth + 1 + int(home[there]) <= self.top:
                    ways.append(arm)
            found.append(ways)
            if depth < len(arms):
                here = int(self.patch.next[here, arms[depth]])
                seen.add(here)
        return found


def ground(series: Series, root: Prefix, top: int) -> Ground:
    """The ground of a series from a root, a prefix without arms, for lengths up to `top`; from a small cache."""
    with _building:
        return _ground(series, root, top)


def patch_of(series: Series, root: Prefix, top: int) -> Patch:
    """The sites that a search up to length `top` can stand on or look at.

    Walks look at the neighbours of all sites up to step top - 1. A polygon on an undirected lattice never goes
    further from its root than half its length.
    """
    return build(
        series.lattice,
        root.start,
        _radius(series, top),
        allowed_sites(series, root),
        width=width(series.lattice),
    )


def check_reach(series: Series, roots: Iterable[Prefix], top: int) -> None:
    """Raise InputError if this machine's memory or the kernels' marks do not allow that length."""
    if top < 0:
        raise SeriesError(f"length {top} is negative", where=series.title(), mend="lengths begin at 0")
    for root in roots:
        allowed = allowed_sites(series, root)
        check_fits(series.lattice, root.start, _radius(series, top), allowed, width=width(series.lattice))
    if top > kernels.VISITED // 2:
        raise SeriesError(
            f"length {top} is beyond what the direct method can mark",
            where=series.title(),
            mend=f"ask for at most {kernels.VISITED // 2}",
        )


def _radius(series: Series, top: int) -> int:
    if series.rule.closed and not series.lattice.one_way:
        return max(top // 2, 1)
    return max(top - 1, 1)


@lru_cache(maxsize=24)
def _ground(series: Series, root: Prefix, top: int) -> Ground:
    lattice = series.lattice
    patch = patch_of(series, root, top)
    states = states_of(series, root.start, root.least)
    images, onward = states.tables(width(lattice))
    return Ground(series, root, top, patch, states, images, onward, load(series))


def width(lattice: Lattice) -> int:
    """Columns of the tables of a lattice: as many as arms leave or enter a site, or a few more."""
    arms = max(*map(len, lattice.arms), *map(len, lattice.arms_in))
    return next((columns for columns in WIDTHS if columns >= arms), arms)


def kernel_of(series: Series) -> tuple[str, tuple[int, ...]]:
    """Name and traits of the kernel that counts a series."""
    columns, lattice = width(series.lattice), series.lattice
    if series.rule.closed:
        return "polygon", (columns,)
    return "walk", (columns, int(lattice.one_way), levels(series))


def levels(series: Series) -> int:
    """How many of the last steps the kernel adds up without visiting, beyond the very last."""
    if series.rule.closed:
        return 2
    return 2 if series.lattice.one_way or _has_triangle(series.lattice) else 3


@cache
def _has_triangle(lattice: Lattice) -> bool:
    """Whether three steps can lead around a triangle."""
    joined = {(arc.source, arc.target, arc.cell) for arc in lattice.arcs}
    return any(
        (a.source, b.target, tuple(map(operator.add, a.cell, b.cell))) in joined
        for a in lattice.arcs
        for b in lattice.arms[a.target]
    )


def load(series: Series) -> Callable[..., bool]:
    """The kernel of a series, compiled or from the cache."""
    name, traits = kernel_of(series)
    table = np.zeros((1, traits[0]), dtype=np.uint32)
    back = np.zeros((1, traits[0]), dtype=np.uint8)
    images, onward = (np.ones((1, 1, traits[0]), dtype=kept) for kept in (np.int32, np.uint32))
    marks = np.full(1, -1, dtype=np.int32)
    kind = np.zeros(1, dtype=np.uint16)
    stack = Stack.of(8)

    def walk(run: Callable[..., bool]) -> None:
        run(table, table, back, kind, images, onward, marks, *stack.arrays(), 0)

    def polygon(run: Callable[..., bool]) -> None:
        run(table, kind, images, onward, marks, *stack.arrays(), 0)

    if series.rule.closed:
        return compiled.kernel("direct", name, kernels.polygon_kernel, traits, polygon)
    return compiled.kernel("direct", name, kernels.walk_kernel, traits, walk)


@dataclass
class Stack:
    """The state of a search, in the arrays that kernels work on."""

    path: Array
    arm: Array
    state: Array
    weight: Array
    sums: Array
    reg: Array

    @classmethod
    def of(cls, top: int) -> Stack:
        """Empty arrays for lengths up to `top`."""
        small = [np.zeros(top + 3, dtype=np.uint32) for _ in range(3)]
        wide = [np.zeros(top + 3, dtype=np.int64) for _ in range(2)]
        path, arm, state = small
        weight, sums = wide
        return cls(path, arm, state, weight, sums, np.zeros(kernels.REGISTERS, dtype=np.int64))

    def arrays(self) -> tuple[Array, ...]:
        return (self.path, self.arm, self.state, self.weight, self.sums, self.reg)
