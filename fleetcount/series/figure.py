"""One configuration, measured by the definitions: slow, exact, and short enough to be read as what they mean.

Sites are pairs of a site number and a cell. The compiled kernels are held against this on every small case.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from itertools import combinations, pairwise

from fleetcount.lattice.model import Cell, Lattice
from fleetcount.series import forms, moments
from fleetcount.series.area import area_unit
from fleetcount.series.definition import Series
from fleetcount.series.region import Wall
from fleetcount.series.statistics import Statistic

Point = tuple[int, Cell]
Vector = tuple[int, ...]


@dataclass(frozen=True)
class Figure:
    """A walk, or with `closed` one that steps from its last point back to the first.

    Attributes:
        points: the positions in their order; of a closed figure the first is not repeated.
        walls: the region as seen from the cell that the points' cells are counted from.
    """

    series: Series
    points: tuple[Point, ...]
    walls: tuple[Wall, ...]
    closed: bool

    @property
    def lattice(self) -> Lattice:
        return self.series.lattice

    @property
    def length(self) -> int:
        return len(self.points) - 1 + self.closed

    @cached_property
    def positions(self) -> tuple[Vector, ...]:
        """Positions in units of 1/scale."""
        return tuple(position(self.lattice, point) for point in self.points)

    @cached_property
    def steps(self) -> tuple[Vector, ...]:
        ring = [*self.positions, *self.positions[:1]] if self.closed else list(self.positions)
        return tuple(tuple(b - a for a, b in zip(p, q, strict=True)) for p, q in pairwise(ring))

    def place(self) -> tuple[int, ...]:
        """The length, then the values of the statistics."""
        return (self.length, *(x for s in self.series.statistics for x in VALUES[s.name](self, s)))

    def values(self) -> tuple[int, ...]:
        """One, then the moments times the series' denominator."""
        scaled = [MOMENTS[name](self) * self.series.denominator for name in self.series.moments]
        assert all(x.denominator == 1 for x in scaled)
        return (1, *map(int, scaled))


def position(lattice: Lattice, point: Point) -> Vector:
    """Coordinates in units of 1/scale."""
    site, cell = point
    away = (*cell, *([0] * (lattice.dimension - lattice.periods)))
    return tuple(x + lattice.scale * c for x, c in zip(lattice.positions[site], away, strict=True))


def adjacent(lattice: Lattice, a: Point, b: Point) -> bool:
    """Whether the lattice joins two sites, in either sense."""
    shift = tuple(y - x for x, y in zip(a[1], b[1], strict=True))
    back = tuple(-x for x in shift)
    return any((arc.target, arc.cell) == (b[0], shift) for arc in lattice.arms[a[0]]) or any(
        (arc.target, arc.cell) == (a[0], back) for arc in lattice.arms[b[0]]
    )


def _contacts(figure: Figure, _: Statistic) -> Iterator[int]:
    points = figure.points
    ring = [*points, *points[:1]] if figure.closed else list(points)
    joined = {frozenset(pair) for pair in pairwise(ring)}
    pairs = (frozenset(pair) for pair in combinations(set(points), 2) if adjacent(figure.lattice, *pair))
    yield sum(pair not in joined for pair in pairs)


def _visits(figure: Figure, statistic: Statistic) -> Iterator[int]:
    walls = figure.walls if statistic.wall == 0 else (figure.walls[statistic.wall - 1],)
    counted = figure.points if figure.closed else figure.points[1:]
    yield sum(any(wall.excess(figure.lattice, *point) == 0 for wall in walls) for point in counted)


def _turns(figure: Figure, _: Statistic) -> Iterator[int]:
    steps = figure.steps
    pairs = zip(steps, steps[1:] + steps[:1] if figure.closed else steps[1:], strict=False)
    yield sum(not forms.same_direction(a, b) for a, b in pairs)


def _steps(figure: Figure, statistic: Statistic) -> Iterator[int]:
    yield sum(forms.parallel(step, statistic.direction) for step in figure.steps)


def _span(figure: Figure, statistic: Statistic) -> Iterator[int]:
    form = forms.direction_form(statistic.direction, figure.lattice)
    values = [forms.value(form, figure.lattice, *point) for point in figure.points]
    yield int((max(values) - min(values)) / forms.spacing(form, figure.lattice))


def height(lattice: Lattice, point: Point, start: Point) -> int:
    """Height above the start, in layers."""
    difference = forms.value(lattice.up, lattice, *point) - forms.value(lattice.up, lattice, *start)
    return int(difference / forms.spacing(lattice.up, lattice))


def _height(figure: Figure, _: Statistic) -> Iterator[int]:
    yield height(figure.lattice, figure.points[-1], figure.points[0])


def _area(figure: Figure, _: Statistic) -> Iterator[int]:
    ring = [*figure.positions, figure.positions[0]]
    twice = sum(forms.cross(p, q) for p, q in pairwise(ring))
    unit = area_unit(figure.lattice)
    yield int(Fraction(abs(twice), 2 * figure.lattice.scale**2) * unit.denominator)


def _revisits(figure: Figure, _: Statistic) -> Iterator[int]:
    yield sum(figure.points.count(point) > 1 for point in set(figure.points))


def _end(figure: Figure, _: Statistic) -> Iterator[int]:
    site, cell = figure.points[-1]
    yield from (*cell, site)


VALUES: dict[str, Callable[[Figure, Statistic], Iterator[int]]] = {
    "contacts": _contacts,
    "visits": _visits,
    "turns": _turns,
    "steps": _steps,
    "span": _span,
    "height": _height,
    "area": _area,
    "revisits": _revisits,
    "end": _end,
}


def _squared(figure: Figure, a: Vector, b: Vector) -> Fraction:
    lattice = figure.lattice
    away = [y - x for x, y in zip(a, b, strict=True)]
    return Fraction(forms.dot(lattice, away, away), lattice.scale**2 * lattice.metric_scale)


def _end2(figure: Figure) -> Fraction:
    return _squared(figure, figure.positions[0], figure.positions[-1])


def _height2(figure: Figure) -> Fraction:
    layers = height(figure.lattice, figure.points[-1], figure.points[0])
    return layers**2 * moments.height_unit(figure.lattice)


def _along2(figure: Figure) -> Fraction:
    return _end2(figure) - _height2(figure)


def _gyration2(figure: Figure) -> Fraction:
    return sum((_squared(figure, p, q) for p, q in combinations(figure.positions, 2)), Fraction(0))


def _monomer2(figure: Figure) -> Fraction:
    return sum((_squared(figure, figure.positions[0], p) for p in figure.positions), Fraction(0))


MOMENTS: dict[str, Callable[[Figure], Fraction]] = {
    "end2": _end2,
    "height2": _height2,
    "along2": _along2,
    "gyration2": _gyration2,
    "monomer2": _monomer2,
}
