"""The patch: the sites within reach of the start, numbered breadth-first, as arrays that kernels walk on.

Site 0 is the wall; the start is site 1. A region is sites left out, so any lattice and any region is one
and the same set of arrays to a kernel.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fleetcount.errors import InputError
from fleetcount.lattice.keys import Keys
from fleetcount.lattice.model import Lattice

Allowed = Callable[[NDArray[np.int64], NDArray[np.int64]], NDArray[np.bool_]]
"""Which sites are in the region: kinds [k] and cells [k, periods] to a truth value each."""

FAR = 2**30
"""The distance of sites that cannot reach the target."""

GREATEST_MEMORY = 4_000_000_000
"""Bytes that a patch may take unless the caller says otherwise."""

_PROBE_SITES = 30_000
_PROBE_SHELLS = 128


@dataclass(frozen=True, eq=False)
class Patch:
    """The sites within `radius` steps of the start.

    Attributes:
        lattice: what it is a part of.
        start: class of the start, a site of `lattice`.
        radius: steps along arcs, forward.
        next: int32 [sites + 1, arms], the neighbour along each arm, 0 where there is none, or none inside.
            Arms are numbered as in `lattice.arms`; `arms` is the greatest number of them, or the `width` asked for.
        previous: int32 [sites + 1, arms in], the neighbours inside from which an arc comes, in the order of
            `lattice.arms_in`, 0 where there is none.
        back: uint8 [sites + 1, arms], 1 where the arm leads to a site inside and an arc leads back.
        kind: int16 [sites + 1], the site class; 0 for the wall.
        free: int16 [sites + 1], the number of arcs out to allowed sites, also to those beyond the radius.
        depth: int32 [sites + 1], steps from the start; 0 for the wall.
        cells: int32 or int64 [sites + 1, periods], the cell, that of the start being zero.
    """

    lattice: Lattice
    start: int
    radius: int
    next: NDArray[np.int32]
    previous: NDArray[np.int32]
    back: NDArray[np.uint8]
    kind: NDArray[np.int16]
    free: NDArray[np.int16]
    depth: NDArray[np.int32]
    cells: NDArray[np.signedinteger]

    @property
    def sites(self) -> int:
        """Number of sites, the wall not counted."""
        return len(self.kind) - 1

    @property
    def nbytes(self) -> int:
        """Bytes held by the arrays."""
        held = (self.next, self.previous, self.back, self.kind, self.free, self.depth, self.cells)
        return sum(array.nbytes for array in held)


def build(
    lattice: Lattice,
    start: int,
    radius: int,
    allowed: Allowed | None = None,
    limit: int | None = None,
    width: int = 0,
) -> Patch:
    """The patch of all sites that `radius` steps from the start can reach without leaving the region.

    Args:
        start: the site class where walks start; in cell 0.
        allowed: which sites are in the region; the start always is.
        limit: bytes it may take; by default 4 GB or what is available, whichever is less.
        width: columns that the tables of neighbours have at least; what is too wide for the lattice is zeros.

    Raises:
        InputError: the patch would not fit; it says how much it would need.
    """
    limit = check_fits(lattice, start, radius, allowed, limit, width)
    keys = Keys(lattice, radius + 1)
    shells = []
    sites = 0
    for shell in _shells(keys, start, radius + (allowed is not None), allowed):
        shells.append(shell)
        sites += len(shell)
        _check_size(lattice, radius, sites, 2 * limit, width)
    return _assemble(keys, shells, start, radius, allowed is not None, width)


def check_fits(
    lattice: Lattice,
    start: int,
    radius: int,
    allowed: Allowed | None = None,
    limit: int | None = None,
    width: int = 0,
) -> int:
    """Raise InputError, as `build` does, if the patch would not fit; returns the limit in bytes."""
    _check_arguments(lattice, start, radius)
    limit = _memory() if limit is None else limit
    _check_size(lattice, radius, sites_needed(lattice, start, radius, allowed), limit, width)
    return limit


def sites_needed(lattice: Lattice, start: int, radius: int, allowed: Allowed | None = None) -> int:
    """About how many sites a patch has: exact while small, then by the growth of its first shells.

    The number of sites within n steps in a periodic graph grows as a polynomial of degree `periods`.
    """
    _check_arguments(lattice, start, radius)
    keys = Keys.that_fit(lattice, min(radius, _PROBE_SHELLS))
    sizes = [0]
    for shell in _shells(keys, start, keys.radius, allowed):
        sizes.append(sizes[-1] + len(shell))
        if sizes[-1] > _PROBE_SITES and (len(sizes) > lattice.periods + 2 or sizes[-1] > 10 * _PROBE_SITES):
            break
    else:
        if len(sizes) < keys.radius + 2:  # the region ended before the radius
            return sizes[-1]
    reached = len(sizes) - 2
    if reached >= radius:
        return sizes[radius + 1]
    used = min(reached + 1, max(lattice.periods + 2, (reached + 1) // 2))
    lengths = np.arange(reached + 1 - used, reached + 1)
    degree = min(lattice.periods, used - 1)
    growth = np.polynomial.Polynomial.fit(lengths, np.array(sizes[-used:], dtype=float), degree)
    return max(sizes[-1], round(float(growth(float(min(radius, 10**9))))))


def bytes_needed(lattice: Lattice, sites: int, width: int = 0) -> int:
    """Bytes that building a patch of so many sites takes, arrays and work space."""
    arms = max(width, *map(len, lattice.arms))
    arms_in = max(width, *map(len, lattice.arms_in))
    held = 5 * arms + 4 * arms_in + 8 * lattice.periods + 8
    return (sites + 1) * (held + 72)


def distance_to(patch: Patch, targets: NDArray[np.bool_] | Sequence[int]) -> NDArray[np.int32]:
    """Least number of steps along arcs, inside the patch, from each site to the nearest target.

    Args:
        targets: truth values [sites + 1], or site numbers.

    Returns:
        int32 [sites + 1], `FAR` where no target can be reached, and for the wall.
    """
    distance = np.full(patch.sites + 1, FAR, dtype=np.int32)
    found = np.asarray(targets)
    frontier = np.flatnonzero(found) if found.dtype == np.bool_ else np.unique(found.astype(np.int64))
    frontier = frontier[frontier != 0]
    steps = 0
    while len(frontier):
        distance[frontier] = steps
        steps += 1
        near = patch.previous[frontier].ravel()
        near = near[distance[near] == FAR]
        frontier = np.unique(near[near != 0])
    return distance


def _check_arguments(lattice: Lattice, start: int, radius: int) -> None:
    if not 0 <= start < len(lattice.sites):
        mend = f"its sites are 0 to {len(lattice.sites) - 1}"
        raise InputError(f"no site number {start}", where=lattice.name, mend=mend)
    if radius < 0:
        raise InputError(
            f"a patch of radius {radius}", where=lattice.name, mend="give a length of at least 0"
        )


def _check_size(lattice: Lattice, radius: int, sites: int, limit: int, width: int) -> None:
    needed = bytes_needed(lattice, sites, width)
    if needed > limit or sites > 2**31 - 2:
        what = f"the patch of radius {radius} needs about {_amount(needed)} of memory"
        mend = f"at most {_amount(limit)} can be used; ask for a smaller length or a smaller region"
        raise InputError(what, where=lattice.name, mend=mend)


def _amount(size: int) -> str:
    if size >= 10**15:
        return "a million GB or more"
    return f"{size / 1e9:.3g} GB" if size >= 10**9 else f"{size / 1e6:.3g} MB"


def _memory() -> int:
    import psutil

    return min(GREATEST_MEMORY, int(psutil.virtual_memory().available))


def _shells(keys: Keys, start: int, radius: int, allowed: Allowed | None) -> Iterator[NDArray[np.int64]]:
    """The sorted keys of the sites at 0, 1, ... steps; ends early where a region does."""
    seen = shell = keys.of(start)
    last = shell[:0]
    two_way = keys.two_way
    for _ in range(radius):
        yield shell
        near = np.unique(np.concatenate(list(keys.neighbours(shell))))
        # If every arc has its opposite, neighbours of a shell lie in it, the last and the next.
        near = keys.without(near, np.sort(np.concatenate((last, shell))) if two_way else seen)
        if allowed is not None and len(near):
            near = near[np.asarray(allowed(keys.kinds(near), keys.cells(near)), dtype=np.bool_)]
        last, shell = shell, near
        if not len(shell):
            return
        if not two_way:
            seen = np.sort(np.concatenate((seen, shell)), kind="stable")
    yield shell


def _assemble(
    keys: Keys, shells: Sequence[NDArray[np.int64]], start: int, radius: int, beyond: bool, width: int
) -> Patch:
    """Number the sites and look up their neighbours; `beyond`: the last shell may lie past the radius."""
    lattice = keys.lattice
    every = np.concatenate(shells)
    inside = shells[: radius + 1]
    sites = sum(len(shell) for shell in inside)
    order = np.argsort(every, kind="stable")
    ordered = every[order]
    numbers = (order + 1).astype(np.int32)
    rows = numbers[numbers <= sites]
    asked = ordered[numbers <= sites]
    kind = np.zeros(sites + 1, dtype=np.int16)
    kind[rows] = keys.kinds(asked)

    def look_up(wanted: NDArray[np.int64], exists: NDArray[np.bool_]) -> NDArray[np.int32]:
        place = np.minimum(np.searchsorted(ordered, wanted), len(ordered) - 1)
        return np.where((ordered[place] == wanted) & exists, numbers[place], 0).astype(np.int32)

    kinds = kind[rows]
    following = np.zeros((sites + 1, max(width, keys.out.arms)), dtype=np.int32)
    free = np.zeros(sites + 1, dtype=np.int16)
    for arm in range(keys.out.arms):
        exists = keys.out.exists[kinds, arm]
        near = look_up(asked + keys.out.shift[kinds, arm], exists)
        free[rows] += (near != 0) if beyond else exists
        near[near > sites] = 0
        following[rows, arm] = near
    previous = np.zeros((sites + 1, max(width, keys.into.arms)), dtype=np.int32)
    for arm in range(keys.into.arms):
        near = look_up(asked + keys.into.shift[kinds, arm], keys.into.exists[kinds, arm])
        near[near > sites] = 0
        previous[rows, arm] = near
    back = np.zeros(following.shape, dtype=np.uint8)
    back[:, : keys.out.arms] = keys.back[kind]
    back[following == 0] = 0
    cells = np.zeros((sites + 1, lattice.periods), dtype=keys.cell_type)
    cells[rows] = keys.cells(asked)
    depth = np.repeat(np.arange(len(inside), dtype=np.int32), [len(shell) for shell in inside])
    return Patch(
        lattice=lattice,
        start=start,
        radius=radius,
        next=following,
        previous=previous,
        back=back,
        kind=kind,
        free=free,
        depth=np.concatenate((np.zeros(1, dtype=np.int32), depth)),
        cells=cells,
    )
