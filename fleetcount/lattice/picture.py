"""A small picture of a lattice of one or two dimensions, in plain characters.

Not to scale: the distinct heights of the sites are the rows and their distinct places across the
columns, at equal distances, so that edges run straight or along a diagonal of characters.
"""

from __future__ import annotations

import operator
from collections.abc import Iterator, Sequence
from fractions import Fraction

from fleetcount.lattice.model import Arc, Cell, Lattice
from fleetcount.lattice.symmetry import site_orbits

START = "@"
MARKS = "o*+x%&=$"
"""Marks of the sites that symmetries do not carry into each other, in the order of `site_orbits`."""

Node = tuple[int, Cell]
Point = tuple[int, int]

_BALL = 1500
_CROSSINGS = {frozenset("/\\"): "X", frozenset("-|"): "+"}


def sketch(lattice: Lattice, start: int = 0, columns: int = 61, rows: int = 15) -> list[str]:
    """Lines of at most `columns` characters, about `rows` of them, with the start in the middle.

    Empty in three dimensions and more. One-way arcs carry `>`, `<`, `^` or `v` in the middle.
    """
    if lattice.dimension > 2:
        return []
    nodes = ball(lattice, start, _BALL)
    places = _ranks(lattice, nodes)
    pairs = list(joints(lattice, nodes))
    wide, high = _spacing(lattice, places, pairs)
    half_columns, half_rows = (columns - 1) // 2 // wide, (rows - 1) // 2 // high
    shown = {
        node: (x * wide, y * high)
        for node, (x, y) in places.items()
        if abs(x) <= half_columns and abs(y) <= half_rows
    }
    drawing: dict[Point, str] = {}
    for tail, head, both in pairs:
        if tail in shown and head in shown:
            _line(drawing, shown[tail], shown[head], both)
    marks = site_marks(lattice)
    for node, point in shown.items():
        drawing[point] = marks[node[0]]
    drawing[0, 0] = START
    return _lines(drawing)


def site_marks(lattice: Lattice) -> list[str]:
    """The mark of each site of the cell: alike sites have the same."""
    marks = {site: k for k, orbit in enumerate(site_orbits(lattice)) for site in orbit}
    return [MARKS[min(marks[site], len(MARKS) - 1)] for site in range(len(lattice.sites))]


def ball(lattice: Lattice, start: int, sites: int, steps: int | None = None) -> dict[Node, int]:
    """The first sites around the start with their distances, directions of arcs forgotten unless `steps` is
    given: then those within so many steps along arcs."""
    nodes: dict[Node, int] = {(start, (0,) * lattice.periods): 0}
    for node in (queue := list(nodes)):
        if len(nodes) >= sites or nodes[node] == steps:
            break
        ends = [(arc.target, arc.cell) for arc in lattice.arms[node[0]]]
        if steps is None:
            ends += [(arc.source, tuple(-c for c in arc.cell)) for arc in lattice.arms_in[node[0]]]
        for target, cell in ends:
            near = (target, tuple(a + b for a, b in zip(node[1], cell, strict=True)))
            if near not in nodes:
                nodes[near] = nodes[node] + 1
                queue.append(near)
    return nodes


def coordinates(lattice: Lattice, node: Node) -> tuple[Fraction, ...]:
    """Where a site of a cell is, on the axes of the definition."""
    cell = node[1] + (0,) * (lattice.dimension - lattice.periods)
    return tuple(x + c for x, c in zip(lattice.sites[node[0]].at, cell, strict=True))


def joints(lattice: Lattice, nodes: dict[Node, int]) -> Iterator[tuple[Node, Node, bool]]:
    """Pairs of joined sites, each once, with whether both ways are open."""
    arcs = frozenset(lattice.arcs)
    for node in nodes:
        for arc in lattice.arms[node[0]]:
            end = (arc.target, tuple(a + b for a, b in zip(node[1], arc.cell, strict=True)))
            both = Arc(arc.target, arc.source, tuple(-c for c in arc.cell)) in arcs
            if end in nodes and (not both or node < end):
                yield node, end, both


def _ranks(lattice: Lattice, nodes: dict[Node, int]) -> dict[Node, Point]:
    """Column and row of each site, counted from the start, by rank among all."""
    up, across = _forms(lattice)
    at = {node: coordinates(lattice, node) for node in nodes}
    start = next(iter(nodes))

    def rank(form: Sequence[Fraction]) -> dict[Node, int]:
        values = {node: sum(map(operator.mul, form, place)) for node, place in at.items()}
        number = {value: k for k, value in enumerate(sorted(set(values.values())))}
        return {node: number[value] - number[values[start]] for node, value in values.items()}

    x, y = rank(across), rank(up)
    return {node: (x[node], y[node]) for node in nodes}


def _forms(lattice: Lattice) -> tuple[tuple[Fraction, ...], tuple[Fraction, ...]]:
    """The form that is drawn upwards, and the one at right angles to it that is drawn to the right."""
    if lattice.dimension == 1:
        return (Fraction(0),), (Fraction(1),)
    up = tuple(map(Fraction, lattice.up if lattice.periods == 2 else (0, 1)))
    (a, b), (_, d) = lattice.metric
    gradient = (d * up[0] - b * up[1], a * up[1] - b * up[0])  # the inverse metric, up to its determinant
    across = (gradient[1], -gradient[0])
    sign = 1 if next(x for x in across if x) > 0 else -1
    return up, tuple(sign * x for x in across)


def _spacing(
    lattice: Lattice, places: dict[Node, Point], pairs: Sequence[tuple[Node, Node, bool]]
) -> tuple[int, int]:
    """Characters from one column to the next and from one row to the next."""
    steps = [(places[b][0] - places[a][0], places[b][1] - places[a][1]) for a, b, _ in pairs]
    if not any(x and y for x, y in steps):
        return 4, 2
    return (4, 4) if lattice.one_way else (2, 2)


def _line(drawing: dict[Point, str], tail: Point, head: Point, both: bool) -> None:
    """Draw between two points, leaving out the ends."""
    dx, dy = head[0] - tail[0], head[1] - tail[1]
    length = max(abs(dx), abs(dy))
    points = [(tail[0] + round(dx * k / length), tail[1] + round(dy * k / length)) for k in range(length + 1)]
    for before, point, after in zip(points, points[1:], points[2:], strict=False):
        x, y = after[0] - before[0], after[1] - before[1]
        flat, steep = abs(x) > abs(y), abs(y) > abs(x)
        _put(drawing, point, "-" if flat else "|" if steep else "/" if x * y > 0 else "\\")
    if not both:
        middle = points[length // 2]
        drawing[middle] = (">" if dx > 0 else "<") if dy == 0 else ("^" if dy > 0 else "v")


def _put(drawing: dict[Point, str], point: Point, mark: str) -> None:
    there = drawing.get(point, mark)
    drawing[point] = mark if there == mark else _CROSSINGS.get(frozenset((there, mark)), mark)


def _lines(drawing: dict[Point, str]) -> list[str]:
    left = min(x for x, _ in drawing)
    right = max(x for x, _ in drawing)
    top, bottom = max(y for _, y in drawing), min(y for _, y in drawing)
    rows = range(top, bottom - 1, -1)
    return ["".join(drawing.get((x, y), " ") for x in range(left, right + 1)).rstrip() for y in rows]
