"""A patch of a lattice as a drawing in SVG, to scale; three dimensions in oblique projection.

The coordinates are floats: they are drawn, never counted with.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Sequence
from xml.sax.saxutils import escape

from fleetcount.errors import InputError
from fleetcount.lattice.model import Lattice
from fleetcount.lattice.picture import Node, ball, coordinates, joints
from fleetcount.lattice.symmetry import site_orbits

GREATEST_DRAWN = 5000
"""Sites; more cannot be told apart."""

_STEP = 44.0  # drawn length of the shortest step
_MARGIN = 24.0
_DEPTH = (0.42, 0.30)  # how far a step into the depth moves to the right and up
_FILLS = ("#3d6b99", "#c98a2b", "#5b8c5a", "#8d5a8c", "#777777")
_START = "#c23b3b"
_EDGE = "#9aa5b1"

Point = tuple[float, float]


def patch_svg(lattice: Lattice, steps: int, start: int = 0) -> str:
    """The sites within `steps` steps of the start along arcs, and all arcs between them.

    One-way arcs carry an arrow head. Sites that no symmetry carries into each other have different colours.

    Raises:
        InputError: the lattice has more than three dimensions, or the patch too many sites to draw.
    """
    if lattice.dimension > 3:
        mend = "lattices of one, two and three dimensions can be drawn"
        raise InputError(f"no picture in {lattice.dimension} dimensions", where=lattice.name, mend=mend)
    nodes = ball(lattice, start, GREATEST_DRAWN + 1, steps)
    if len(nodes) > GREATEST_DRAWN:
        what = f"a picture of {steps} steps has more than {GREATEST_DRAWN} sites"
        raise InputError(what, where=lattice.name, mend="draw fewer steps")
    points = _points(lattice, nodes)
    lines = [_edge(points[a], points[b], both) for a, b, both in joints(lattice, nodes)]
    kinds = {site: k for k, orbit in enumerate(site_orbits(lattice)) for site in orbit}
    dots = [_dot(points[node], _FILLS[min(kinds[node[0]], len(_FILLS) - 1)], 5.0) for node in nodes]
    dots.append(_dot(points[start, (0,) * lattice.periods], _START, 7.0))
    width, height = (max(p[i] for p in points.values()) + _MARGIN for i in (0, 1))
    title = escape(f"{lattice.title}: {len(nodes)} sites within {steps} steps")
    return "\n".join(
        [
            f'<svg xmlns="http://www.w3.org/2000/svg" width="{width:.0f}" height="{height:.0f}"'
            f' viewBox="0 0 {width:.2f} {height:.2f}">',
            f"<title>{title}</title>",
            '<rect width="100%" height="100%" fill="white"/>',
            f'<g stroke="{_EDGE}" stroke-width="2" stroke-linecap="round">',
            *lines,
            "</g>",
            '<g stroke="white" stroke-width="1.5">',
            *dots,
            "</g>",
            "</svg>",
            "",
        ]
    )


def projection(lattice: Lattice) -> Callable[[Node], Point]:
    """Where a site is drawn, y downwards, in units of the shortest step."""
    frame = _frame(lattice)

    def place(vector: Sequence[float]) -> Point:
        flat = [sum(f * x for f, x in zip(form, vector, strict=True)) for form in frame]
        up, right, depth = (*flat, 0.0, 0.0, 0.0)[:3] if lattice.dimension > 1 else (0.0, flat[0], 0.0)
        return right + _DEPTH[0] * depth, -up - _DEPTH[1] * depth

    steps = [math.hypot(*place([x / lattice.scale for x in lattice.step(arc)])) for arc in lattice.arcs]
    unit = min((step for step in steps if step > 1e-9), default=1.0)

    def at(node: Node) -> Point:
        x, y = place([float(c) for c in coordinates(lattice, node)])
        return x / unit, y / unit

    return at


def _points(lattice: Lattice, nodes: Iterable[Node]) -> dict[Node, Point]:
    """Where the sites of a patch are drawn, the shortest step as long as `_STEP`."""
    at = projection(lattice)
    raw = {node: at(node) for node in nodes}
    left, top = (min(p[i] for p in raw.values()) for i in (0, 1))
    return {node: ((x - left) * _STEP + _MARGIN, (y - top) * _STEP + _MARGIN) for node, (x, y) in raw.items()}


def _frame(lattice: Lattice) -> list[list[float]]:
    """Orthonormal forms on the coordinates: upwards first, then to the right, then into the depth."""
    size = lattice.dimension
    inverse = _inverse([[float(x) for x in row] for row in lattice.metric])
    up = [float(x) for x in lattice.up]
    if lattice.periods == 1 and size == 2:
        up = [0.0, 1.0]
    frame: list[list[float]] = []
    for form in [up, *([float(i == j) for j in range(size)] for i in range(size))]:
        rest = list(form)
        for unit in frame:
            along = _product(inverse, form, unit)
            rest = [r - along * u for r, u in zip(rest, unit, strict=True)]
        length = math.sqrt(max(_product(inverse, rest, rest), 0.0))
        if length > 1e-6 * math.sqrt(_product(inverse, form, form)) and len(frame) < size:
            frame.append([r / length for r in rest])
    return frame


def _product(inverse: Sequence[Sequence[float]], a: Sequence[float], b: Sequence[float]) -> float:
    return sum(x * m * y for x, row in zip(a, inverse, strict=True) for m, y in zip(row, b, strict=True))


def _inverse(matrix: list[list[float]]) -> list[list[float]]:
    """Inverse of a positive definite matrix by Gauss and Jordan."""
    size = len(matrix)
    rows = [row + [float(i == j) for j in range(size)] for i, row in enumerate(matrix)]
    for i in range(size):
        rows[i] = [x / rows[i][i] for x in rows[i]]
        for k in range(size):
            if k != i:
                rows[k] = [x - rows[k][i] * y for x, y in zip(rows[k], rows[i], strict=True)]
    return [row[size:] for row in rows]


def _edge(tail: Point, head: Point, both: bool) -> str:
    (x, y), (u, v) = tail, head
    line = f'<line x1="{x:.2f}" y1="{y:.2f}" x2="{u:.2f}" y2="{v:.2f}"/>'
    length = math.hypot(u - x, v - y)
    if both or length < 1e-9:
        return line
    along, across = ((u - x) / length, (v - y) / length), (-(v - y) / length, (u - x) / length)
    tip = (x + u) / 2 + 6 * along[0], (y + v) / 2 + 6 * along[1]
    wings = [
        (tip[0] - 11 * along[0] + side * across[0], tip[1] - 11 * along[1] + side * across[1])
        for side in (5, -5)
    ]
    corners = " ".join(f"{a:.2f},{b:.2f}" for a, b in (tip, *wings))
    return f'{line}<polygon points="{corners}" fill="{_EDGE}" stroke="none"/>'


def _dot(point: Point, fill: str, radius: float) -> str:
    return f'<circle cx="{point[0]:.2f}" cy="{point[1]:.2f}" r="{radius:g}" fill="{fill}"/>'
