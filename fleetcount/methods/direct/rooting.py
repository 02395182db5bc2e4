"""Where objects are rooted: the start sites that a series is counted from, and what the sums are divided by.

Walks start where the series says. Closed objects are found as closed walks from roots: from each kind of site (with
the symmetries that fix it; where directions are named, from every site), or, polygons only, from the least site of each
(order of positions, no symmetry left).
In a half-space the root is the least of the sites on the surface; in a slab or tube each site between the walls is a
root, up to the translations that keep them; in other regions the one root is the start.
"""

from __future__ import annotations

import operator
from collections import deque
from collections.abc import Callable, Iterator
from fractions import Fraction
from typing import NamedTuple

from fleetcount.errors import SeriesError
from fleetcount.lattice.model import Cell
from fleetcount.lattice.symmetry import site_orbits
from fleetcount.series import forms
from fleetcount.series.definition import Series
from fleetcount.series.region import Wall, contains, shape

_MOST_ROOTS = 4096
_MOST_CLASSES = 10**6


class Root(NamedTuple):
    """A start site, the cell it lies in where a region makes that matter, and how many sites it stands for."""

    start: int
    cell: Cell
    weight: int


def rootings(series: Series) -> tuple[bool, ...]:
    """The ways in which a series can be rooted: at the least site (True), at fixed sites (False)."""
    if not series.rule.closed:
        return (False,)
    if series.start is not None or series.rule.avoids == "edges":
        return (False,)
    return (True,) if series.walls else (True, False)


def refusal(series: Series) -> str | None:
    """Why a series cannot be rooted, or None."""
    if (
        series.rule.avoids == "edges"
        and shape(series.lattice, series.walls) == "half-space"
        and series.rule.closed
    ):
        return (
            f"a {series.object} in a half-space has no root of its own; give a slab, or a corner and a start"
        )
    return None


def roots(series: Series, least: bool) -> tuple[Root, ...]:
    """The roots, in the order of site and cell."""
    if series.start is not None:
        return (Root(series.start, (), 1),)
    if series.rule.closed and series.walls:
        return _between(series)
    turned = any(s.direction for s in series.statistics)  # a symmetry between sites may turn what they name
    if least or turned:
        return tuple(Root(site, (), 1) for site in range(len(series.lattice.sites)))
    return tuple(Root(orbit[0], (), len(orbit)) for orbit in site_orbits(series.lattice))


def ways(series: Series, length: int) -> int:
    """How many closed walks from the roots belong to one closed object."""
    senses = 1 if series.lattice.one_way else 2
    return senses if series.start is not None else senses * length


def _between(series: Series) -> tuple[Root, ...]:
    """The sites of a region up to the translations that keep it; in a half-space those of its surface.

    Sites of one kind are images of each other exactly if all walls' forms have the same values there. Cells are
    searched by steps of one period each. Between any two cells of a convex region there is such a path that leaves
    it by no more than the sum of the steps.
    """
    lattice, walls = series.lattice, series.walls
    surface = shape(lattice, walls) == "half-space"
    margins = [_margin(series, w) for w in walls]

    def near(cell: Cell) -> bool:
        above = [w.excess(lattice, 0, cell) for w in walls]
        inside = all(a >= -m for a, m in zip(above, margins, strict=True))
        return inside and (not surface or above[0] <= margins[0])

    found: list[Root] = []
    for cell in _cells(series, near):
        for site in range(len(lattice.sites)):
            if surface and walls[0].excess(lattice, site, cell) != 0:
                continue
            if contains(lattice, walls, site, cell):
                found.append(Root(site, cell, 1))
        if len(found) > _MOST_ROOTS:
            raise SeriesError(f"more than {_MOST_ROOTS} sites between the walls", where=series.title())
    if not found:
        raise SeriesError("no site of the lattice lies between the walls", where=series.title())
    return tuple(sorted(found))


def _margin(series: Series, wall: Wall) -> Fraction:
    values = [forms.value(wall.form, series.lattice, site) for site in range(len(series.lattice.sites))]
    return 2 * (max(values) - min(values) + sum(map(abs, wall.form)))


def _cells(series: Series, near: Callable[[Cell], bool]) -> Iterator[Cell]:
    """One cell of each class that is near the region, going out from cell 0."""
    periods = range(series.lattice.periods)
    moves = [tuple(sign * (i == axis) for i in periods) for axis in periods for sign in (1, -1)]
    here: Cell = tuple(0 for _ in periods)
    seen, todo, arrived = {_class(series, here)}, deque([here]), False
    while todo and len(seen) < _MOST_CLASSES:
        cell = todo.popleft()
        if near(cell):
            if not arrived:  # from here on only what is near counts
                arrived, seen, todo = True, {_class(series, cell)}, deque()
            yield cell
        elif arrived:
            continue
        for move in moves:
            there = tuple(a + b for a, b in zip(cell, move, strict=True))
            if _class(series, there) not in seen:
                seen.add(_class(series, there))
                todo.append(there)
    if not arrived:
        raise SeriesError("no site of the lattice near cell 0 lies in the region", where=series.title())


def _class(series: Series, cell: Cell) -> tuple[int, ...]:
    return tuple(sum(map(operator.mul, w.form, cell)) for w in series.walls)
