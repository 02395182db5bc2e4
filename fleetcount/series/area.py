"""The unit of area of a lattice in two dimensions: every closed walk encloses a multiple of it."""

from __future__ import annotations

from collections import deque
from collections.abc import Iterable, Iterator
from fractions import Fraction
from functools import cache

from fleetcount.lattice.model import Cell, Lattice
from fleetcount.series.forms import cross, rational_gcd

Vector = tuple[int, ...]
Point = tuple[int, Cell]


@cache
def area_unit(lattice: Lattice) -> Fraction:
    """The greatest number, in units of the cell's area, of which all areas of closed walks are multiples.

    Fix a walk from site 0 to each site of its cell and to itself one period on. Any closed walk is made of loops
    around the parallelograms of those periods, and, for each arc, of one loop: from site 0 to the arc, over it, back,
    and home by the periods. So the areas of these generate all others. Senses are forgotten: that adds loops only.
    """
    here = (0,) * lattice.periods
    to_site = [_walk(lattice, (site, here)) for site in range(len(lattice.sites))]
    axes = [tuple(int(i == axis) for i in range(lattice.periods)) for axis in range(lattice.periods)]
    period = [_walk(lattice, (0, axis)) for axis in axes]
    loops = [[*period[0], *period[1], *_back(period[0]), *_back(period[1])]] if lattice.periods == 2 else []
    for arc in lattice.arcs:
        loop = [*to_site[arc.source], lattice.step(arc), *_back(to_site[arc.target])]
        for count, walk in zip(arc.cell, period, strict=True):
            loop += (_back(walk) if count > 0 else walk) * abs(count)
        loops.append(loop)
    return rational_gcd([Fraction(_twice_area(loop), 2 * lattice.scale**2) for loop in loops])


def _walk(lattice: Lattice, goal: Point) -> list[Vector]:
    """The steps of a shortest walk from site 0 of cell 0, senses forgotten."""
    start: Point = (0, (0,) * lattice.periods)
    found: dict[Point, list[Vector]] = {start: []}
    todo = deque([start])
    while goal not in found:
        here = todo.popleft()
        for there, step in _neighbours(lattice, here):
            if there not in found:
                found[there] = [*found[here], step]
                todo.append(there)
    return found[goal]


def _neighbours(lattice: Lattice, here: Point) -> Iterator[tuple[Point, Vector]]:
    site, cell = here
    for arc in lattice.arms[site]:
        yield (arc.target, tuple(a + b for a, b in zip(cell, arc.cell, strict=True))), lattice.step(arc)
    for arc in lattice.arms_in[site]:
        step = tuple(-x for x in lattice.step(arc))
        yield (arc.source, tuple(a - b for a, b in zip(cell, arc.cell, strict=True))), step


def _back(walk: Iterable[Vector]) -> list[Vector]:
    return [tuple(-x for x in step) for step in reversed(list(walk))]


def _twice_area(steps: Iterable[Vector]) -> int:
    """Twice the area that a closed walk encloses, with its sign, in units of 1/scale squared."""
    x, total = (0, 0), 0
    for step in steps:
        y = (x[0] + step[0], x[1] + step[1])
        total += cross(x, y)
        x = y
    return total
