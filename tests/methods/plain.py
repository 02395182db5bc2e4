"""Counting that shares nothing with the package but the lattice: closed objects as cycles of sites."""

from __future__ import annotations

import itertools
import operator
from collections.abc import Callable, Iterable, Iterator, Sequence
from fractions import Fraction

from fleetcount.lattice.model import Cell, Lattice

Point = tuple[int, Cell]
Cycle = tuple[Point, ...]
Place = tuple[Fraction, ...]
Form = tuple[int, ...]


def neighbours(lattice: Lattice, point: Point) -> Iterator[Point]:
    """Where the arcs out of a site lead."""
    for arc in lattice.arcs:
        if arc.source == point[0]:
            yield arc.target, tuple(a + b for a, b in zip(point[1], arc.cell, strict=True))


def polygons(lattice: Lattice, top: int) -> dict[int, int]:
    """The number of different cycles of each length, up to translations by the periods of the cell.

    Two that differ in the sense in which they are run through are one, except on a one-way lattice.
    """
    return lengths(cycles(lattice, top))


def closed_trails(lattice: Lattice, top: int) -> dict[int, int]:
    """The same for closed walks that use no edge twice."""
    return lengths(cycles(lattice, top, edges=True))


def lengths(found: Iterable[Cycle]) -> dict[int, int]:
    """How many there are of each length."""
    counts: dict[int, int] = {}
    for cycle in found:
        counts[len(cycle)] = counts.get(len(cycle), 0) + 1
    return counts


def cycles(lattice: Lattice, top: int, edges: bool = False) -> set[Cycle]:
    """One of each class of cycles; with `edges` those that use no edge twice, but perhaps a site."""
    found: set[Cycle] = set()
    for site in range(len(lattice.sites)):
        for path in _returns(lattice, [(site, (0,) * lattice.periods)], top, edges):
            found.add(_normal(lattice, path))
    return found


def _returns(lattice: Lattice, path: list[Point], top: int, edges: bool) -> Iterator[list[Point]]:
    for there in neighbours(lattice, path[-1]):
        longer = [*path, there]
        if edges and _uses_one_twice(lattice, longer):
            continue
        if there == path[0] and len(path) >= (2 if lattice.one_way else 3):
            yield path
        if (edges or there not in path) and len(path) < top:
            yield from _returns(lattice, longer, top, edges)


def _uses_one_twice(lattice: Lattice, path: list[Point]) -> bool:
    steps = list(itertools.pairwise(path))
    ways = steps if lattice.one_way else [tuple(sorted(step)) for step in steps]
    return len(set(ways)) < len(ways)


def placed(
    lattice: Lattice, cycle: Cycle, inside: Callable[[Place], bool], forms: Sequence[Form]
) -> set[Form]:
    """Where a cycle may lie so that all its sites are inside: the values by which translations change the forms.

    Translations that change none of them keep the region, so they count once.
    """
    found, far = set(), len(cycle) // 2 + 2
    for shift in itertools.product(range(-far, far + 1), repeat=lattice.periods):
        sites = [at(lattice, (site, tuple(map(sum, zip(cell, shift, strict=True))))) for site, cell in cycle]
        if all(map(inside, sites)):
            found.add(tuple(sum(map(operator.mul, form, shift)) for form in forms))
    return found


def at(lattice: Lattice, point: Point) -> Place:
    """Cell coordinates of a site."""
    away = (*point[1], *([0] * (lattice.dimension - lattice.periods)))
    return tuple(x + c for x, c in zip(lattice.sites[point[0]].at, away, strict=True))


def _normal(lattice: Lattice, cycle: list[Point]) -> Cycle:
    """The same for all cycles that are translations of each other, whatever their first site and sense."""
    senses = [cycle] if lattice.one_way else [cycle, list(reversed(cycle))]
    return min(_moved(sense[k:] + sense[:k]) for sense in senses for k in range(len(cycle)))


def _moved(cycle: list[Point]) -> Cycle:
    origin = cycle[0][1]
    return tuple((site, tuple(c - o for c, o in zip(cell, origin, strict=True))) for site, cell in cycle)
