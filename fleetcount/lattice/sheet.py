"""A sheet of figures on a lattice of at most two dimensions, in SVG: walks, polygons and their like side by side.

The coordinates are floats: they are drawn, never counted with.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass
from xml.sax.saxutils import escape

from fleetcount.errors import InputError
from fleetcount.lattice.model import Lattice
from fleetcount.lattice.picture import Node, joints
from fleetcount.lattice.svg import Point, projection

_WIDTH = 1080.0
_EDGE = 26.0  # margin of the sheet
_STEP = 26.0  # drawn length of the shortest step, where there is room
_LARGEST = 330.0  # a figure wider or higher than this is drawn smaller
_AROUND = 0.55  # how far the lattice is shown beyond a figure, in steps
_GAP = 20.0
_CAPTION = 24.0
_LETTER = 6.6  # about the width of a letter in a caption
_HEAD = 66.0
_BEND = 0.22  # how far from a site a bend begins, in steps
_GROUND, _INK, _PALE = "#d7dde3", "#1f4e79", "#5b6673"
_FILL, _START = "#c5dbf0", "#c23b3b"
_FONT = "font-family=\"system-ui, 'DejaVu Sans', sans-serif\""

Place = Callable[[Node], Point]


@dataclass(frozen=True)
class Drawn:
    """A figure: images of it, of which the one that lies flattest is drawn, and the text below it."""

    images: Sequence[Sequence[Node]]
    closed: bool
    caption: str


def check_drawable(lattice: Lattice) -> None:
    """Refuse lattices of three dimensions and more."""
    if lattice.dimension > 2:
        mend = "figures are drawn on lattices of one and two dimensions"
        raise InputError(f"no picture in {lattice.dimension} dimensions", where=lattice.name, mend=mend)


def sheet_svg(lattice: Lattice, figures: Sequence[Drawn], title: str, subtitle: str) -> str:
    """The figures in rows under a title, each on the piece of the lattice around it.

    Open figures begin at the red dot and end at the arrow head; of closed ones the inside is tinted. Bends are
    rounded, so that a figure that meets itself is seen to cross or to touch.

    Raises:
        InputError: the lattice has more than two dimensions.
    """
    check_drawable(lattice)
    at = projection(lattice)
    paths = [min(figure.images, key=lambda image: _flatness(at, image)) for figure in figures]
    boxes = [_box(map(at, path)) for path in paths]
    wide, high = (max(box[i + 2] - box[i] for box in boxes) + 2 * _AROUND for i in (0, 1))
    step = min(_STEP, _LARGEST / max(wide, high))
    cell = (
        max(wide * step, *(_LETTER * len(figure.caption) for figure in figures)) + _GAP,
        high * step + _CAPTION + _GAP,
    )
    across = max(1, min(len(figures), int((_WIDTH - 2 * _EDGE) // cell[0])))
    width = max(across * cell[0], 1.45 * _LETTER * len(title), _LETTER * len(subtitle)) + 2 * _EDGE
    height = _HEAD + -(-len(figures) // across) * cell[1] + _EDGE - _GAP
    drawn = []
    for k, (figure, path, box) in enumerate(zip(figures, paths, boxes, strict=True)):
        middle = _EDGE + (k % across + 0.5) * cell[0], _HEAD + (k // across) * cell[1] + high * step / 2
        drawn.append(f'<g class="figure" transform="translate({middle[0]:.1f} {middle[1]:.1f})">')
        drawn += _figure(lattice, _scaled(at, box, step), at, box, path, figure.closed, step)
        drawn.append(_text(0, high * step / 2 + 15, figure.caption, 12, _PALE, "middle"))
        drawn.append("</g>")
    return "\n".join(
        [
            f'<svg xmlns="http://www.w3.org/2000/svg" width="{width:.0f}" height="{height:.0f}"'
            f' viewBox="0 0 {width:.1f} {height:.1f}" {_FONT}>',
            f"<title>{escape(title)}</title>",
            '<rect width="100%" height="100%" fill="white"/>',
            _text(_EDGE, 30, title, 17, "#20262d", "start"),
            _text(_EDGE, 50, subtitle, 12, _PALE, "start"),
            *drawn,
            "</svg>",
            "",
        ]
    )


def _flatness(at: Place, path: Sequence[Node]) -> tuple[object, ...]:
    """Low first, then narrow, then to the right and upwards."""
    places = [at(node) for node in path]
    left, top, right, bottom = _box(places)
    begin, end = places[0], places[-1]
    sizes = bottom - top, right - left, begin[0] - end[0], end[1] - begin[1]
    return (*(round(x, 6) for x in sizes), tuple(path))


def _box(places: Iterable[Point]) -> tuple[float, float, float, float]:
    """Left, top, right, bottom."""
    xs, ys = zip(*places, strict=True)
    return min(xs), min(ys), max(xs), max(ys)


def _scaled(at: Place, box: tuple[float, float, float, float], step: float) -> Place:
    """Places on the sheet, the middle of the box at the origin."""
    x, y = (box[0] + box[2]) / 2, (box[1] + box[3]) / 2
    return lambda node: ((at(node)[0] - x) * step, (at(node)[1] - y) * step)


def _figure(
    lattice: Lattice,
    place: Place,
    at: Place,
    box: tuple[float, float, float, float],
    path: Sequence[Node],
    closed: bool,
    step: float,
) -> Iterator[str]:
    nodes = _within(lattice, at, box, path)
    ends = (f"M{_pair(place(a))}L{_pair(place(b))}" for a, b, _ in joints(lattice, nodes))
    ground = "".join(ends)
    if ground:
        yield f'<path d="{ground}" stroke="{_GROUND}" stroke-width="1" fill="none"/>'
    dots = "".join(f"M{_pair(place(node))}h0" for node in nodes)
    yield f'<path d="{dots}" stroke="{_GROUND}" stroke-width="4" stroke-linecap="round" fill="none"/>'
    places = [place(node) for node in path]
    thick = max(1.6, min(3.2, step / 8))
    line = f'stroke="{_INK}" stroke-width="{thick:.1f}" stroke-linecap="round" stroke-linejoin="round"'
    if closed:
        inside = f'fill="{_FILL}" fill-opacity="0.6" fill-rule="evenodd"'
        yield f'<path class="path" d="{_loop(places, _BEND)}" {inside} {line}/>'
        if lattice.one_way:
            yield _head(places[0], places[1], 0.65, 3.2 * thick)
        return
    if len(places) > 1:
        yield f'<path class="path" d="{_line(places, _BEND)}" fill="none" {line}/>'
        yield _head(places[-2], places[-1], 1.0, 3.4 * thick)
        if len(set(path)) < len(path):  # which way it goes is not seen from its ends
            yield _head(places[0], places[1], 0.65, 3.2 * thick)
    yield f'<circle cx="{places[0][0]:.1f}" cy="{places[0][1]:.1f}" r="{1.5 * thick:.1f}" fill="{_START}"/>'


def _within(
    lattice: Lattice, at: Place, box: tuple[float, float, float, float], path: Sequence[Node]
) -> dict[Node, int]:
    """The sites around a figure that its box holds."""
    found = dict.fromkeys(path, 0)
    for site, cell in (queue := list(found)):
        ends = [(arc.target, arc.cell) for arc in lattice.arms[site]]
        ends += [(arc.source, tuple(-c for c in arc.cell)) for arc in lattice.arms_in[site]]
        for target, shift in ends:
            near = (target, tuple(a + b for a, b in zip(cell, shift, strict=True)))
            x, y = at(near)
            inside = box[0] - _AROUND < x < box[2] + _AROUND and box[1] - _AROUND < y < box[3] + _AROUND
            if inside and near not in found:
                found[near] = 0
                queue.append(near)
    return found


def _line(places: Sequence[Point], bend: float) -> str:
    parts = [f"M{_pair(places[0])}"]
    parts += [_bent(*three, bend) for three in zip(places, places[1:], places[2:], strict=False)]
    return "".join([*parts, f"L{_pair(places[-1])}"])


def _loop(places: Sequence[Point], bend: float) -> str:
    ring = [*places, places[0], places[1]]
    parts = [_bent(*three, bend) for three in zip(ring, ring[1:], ring[2:], strict=False)]
    return f"M{_pair(_between(places[0], places[1], 0.5))}{''.join(parts)}Z"


def _bent(before: Point, here: Point, after: Point, bend: float) -> str:
    """A line to shortly before a site, and round it."""
    return f"L{_pair(_between(here, before, bend))}Q{_pair(here)} {_pair(_between(here, after, bend))}"


def _between(a: Point, b: Point, share: float) -> Point:
    return a[0] + (b[0] - a[0]) * share, a[1] + (b[1] - a[1]) * share


def _head(tail: Point, tip: Point, share: float, size: float) -> str:
    """An arrow head whose tip lies at a share of the way."""
    x, y = _between(tail, tip, share)
    length = math.hypot(tip[0] - tail[0], tip[1] - tail[1]) or 1.0
    u, v = (tip[0] - tail[0]) / length * size, (tip[1] - tail[1]) / length * size
    x, y = x + u * 0.35, y + v * 0.35
    corners = ((x, y), (x - u - 0.5 * v, y - v + 0.5 * u), (x - u + 0.5 * v, y - v - 0.5 * u))
    return f'<polygon points="{" ".join(map(_pair, corners))}" fill="{_INK}"/>'


def _text(x: float, y: float, text: str, size: int, fill: str, anchor: str) -> str:
    place = f'x="{x:.1f}" y="{y:.1f}" font-size="{size}"'
    return f'<text {place} fill="{fill}" text-anchor="{anchor}">{escape(text)}</text>'


def _pair(point: Point) -> str:
    return f"{point[0]:.1f},{point[1]:.1f}"
