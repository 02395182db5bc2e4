"""Counting that shares nothing with the package but the lattice: polygons as sets of sites on a cycle."""

from __future__ import annotations

from collections.abc import Iterator

from fleetcount.lattice.model import Cell, Lattice

Point = tuple[int, Cell]
Cycle = tuple[Point, ...]


def neighbours(lattice: Lattice, point: Point) -> Iterator[Point]:
    """Where the arcs out of a site lead."""
    for arc in lattice.arcs:
        if arc.source == point[0]:
            yield arc.target, tuple(a + b for a, b in zip(point[1], arc.cell, strict=True))


def polygons(lattice: Lattice, top: int) -> dict[int, int]:
    """The number of different cycles of each length, up to translations by the periods of the cell.

    Two that differ in the sense in which they are run through are one, except on a one-way lattice.
    """
    found: set[Cycle] = set()
    for site in range(len(lattice.sites)):
        for path in _returns(lattice, [(site, (0,) * lattice.periods)], top):
            found.add(_normal(lattice, path))
    counts: dict[int, int] = {}
    for cycle in found:
        counts[len(cycle)] = counts.get(len(cycle), 0) + 1
    return counts


def _returns(lattice: Lattice, path: list[Point], top: int) -> Iterator[list[Point]]:
    for there in neighbours(lattice, path[-1]):
        if there == path[0] and len(path) >= (2 if lattice.one_way else 3):
            yield path
        elif there not in path and len(path) < top:
            yield from _returns(lattice, [*path, there], top)


def _normal(lattice: Lattice, cycle: list[Point]) -> Cycle:
    """The same for all cycles that are translations of each other, whatever their first site and sense."""
    senses = [cycle] if lattice.one_way else [cycle, list(reversed(cycle))]
    return min(_moved(sense[k:] + sense[:k]) for sense in senses for k in range(len(cycle)))


def _moved(cycle: list[Point]) -> Cycle:
    origin = cycle[0][1]
    return tuple((site, tuple(c - o for c, o in zip(cell, origin, strict=True))) for site, cell in cycle)
