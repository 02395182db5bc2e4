"""Hypothesis strategies: random small periodic lattices that pass every check."""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from itertools import permutations, product

from hypothesis import strategies as st

from fleetcount.lattice import definition
from fleetcount.lattice.model import Lattice

ARMS = 6
"""Greatest number of arcs out of a site, and into it."""

Joint = tuple[int, int, tuple[int, ...]]
"""From a site of cell 0 to a site of a cell."""

Place = tuple[Fraction, ...]


@st.composite
def small_lattices(draw: st.DrawFn, one_way: bool | None = None, dimension: int | None = None) -> Lattice:
    """Lattices in 1 to 3 dimensions with 1 to 4 sites a cell and at most 6 arms out of each.

    Args:
        one_way: True for lattices with one-way arcs, False for those without, None for both.
        dimension: the only one; None for any.

    About half of them are drawn so that some reflections and rotations keep them.
    """
    dimension = draw(st.integers(1, 3)) if dimension is None else dimension
    periods = draw(st.one_of(st.just(dimension), st.integers(1, dimension)))
    directed = draw(st.booleans()) if one_way is None else one_way
    places = draw(_places(dimension, periods))
    joints = draw(_joints(len(places), periods))
    operations = draw(_operations(places, periods))
    edges, arcs = draw(_directed(joints, len(places))) if directed else (joints, [])
    for operation in operations:
        edges, arcs = _closed(edges, arcs, operation, len(places))
    metric = _unit(dimension) if operations else draw(_metrics(dimension))
    return definition.parse(_text(dimension, periods, metric, places, edges, arcs), "drawn")


@st.composite
def _places(draw: st.DrawFn, dimension: int, periods: int) -> list[Place]:
    """Positions that fill the dimensions: the first sites stand one step along each axis without period."""
    least = dimension - periods + 1
    number = draw(st.integers(least, max(4, least)))
    denominator = draw(st.sampled_from((2, 2, 3, 4)))
    grid = list(product(*[range(denominator)] * periods))
    inner = draw(st.lists(st.sampled_from(grid), min_size=number, max_size=number))
    places: list[Place] = []
    for k, numerators in enumerate(inner):
        outer = [int(k == axis + 1) for axis in range(dimension - periods)]
        place = (*(Fraction(x, denominator) for x in numerators), *map(Fraction, outer))
        if place not in places:
            places.append(place)
    return places


@st.composite
def _joints(draw: st.DrawFn, sites: int, periods: int) -> list[Joint]:
    """A tree over the sites, one more joint for each period, then a few at random; none twice.

    The cells of tree and period joints are those of a connected graph seen from shifted sites.
    """
    entry = st.integers(-1, 1)
    shifts = [draw(st.tuples(*[entry] * periods)) if s else (0,) * periods for s in range(sites)]
    joints: list[Joint] = []
    degree = [0] * sites

    def add(a: int, b: int, cell: tuple[int, ...]) -> None:
        joint = min((a, b, cell), _opposite((a, b, cell)))
        if joint not in joints and (a != b or any(cell)) and max(degree[a] + (a == b), degree[b]) < ARMS:
            joints.append(joint)
            degree[a] += 1
            degree[b] += 1

    def between(a: int, b: int, cell: tuple[int, ...]) -> tuple[int, ...]:
        return tuple(c + y - x for c, x, y in zip(cell, shifts[a], shifts[b], strict=True))

    for site in range(1, sites):
        earlier = draw(st.integers(0, site - 1))
        add(earlier, site, between(earlier, site, (0,) * periods))
    for axis in range(periods):
        free = sorted(range(sites), key=lambda s: degree[s])
        a, b = draw(st.permutations((free[0], free[min(1, sites - 1)])))
        add(a, b, between(a, b, tuple(int(i == axis) for i in range(periods))))
    extra = st.tuples(st.integers(0, sites - 1), st.integers(0, sites - 1), st.tuples(*[entry] * periods))
    for joint in draw(st.lists(extra, max_size=4)):
        add(*joint)
    return joints


@st.composite
def _directed(draw: st.DrawFn, joints: list[Joint], sites: int) -> tuple[list[Joint], list[Joint]]:
    """Each joint an edge or an arc either way, at least one an arc, and a way out of every site."""
    edges: list[Joint] = []
    arcs: list[Joint] = []
    for number, joint in enumerate(joints):
        kind = draw(st.sampled_from("abe" if number else "ab"))
        if kind == "e":
            edges.append(joint)
        else:
            arcs.append(joint if kind == "a" else _opposite(joint))
    for site in range(sites):
        if any(site in joint[:2] for joint in edges) or any(arc[0] == site for arc in arcs):
            continue
        coming = next(arc for arc in arcs if arc[1] == site)
        arcs.append(_opposite(coming))
    return edges, arcs


Operation = Callable[[Joint], Joint]


@st.composite
def _operations(draw: st.DrawFn, places: list[Place], periods: int) -> list[Operation]:
    """None, or an inversion, reflection or exchange of periodic axes that keeps the sites."""
    if draw(st.booleans()):
        return []
    found = [
        operation
        for axes in permutations(range(periods))
        for signs in product((1, -1), repeat=periods)
        if (axes != tuple(range(periods)) or -1 in signs)
        and (operation := _operation(places, axes, signs)) is not None
    ]
    return [draw(st.sampled_from(found))] if found else []


def _operation(places: list[Place], axes: tuple[int, ...], signs: tuple[int, ...]) -> Operation | None:
    periods = len(axes)
    images: list[int] = []
    shifts: list[tuple[int, ...]] = []
    for place in places:
        moved = [sign * place[axis] for axis, sign in zip(axes, signs, strict=True)]
        cell = tuple(x.__floor__() for x in moved)
        inside = tuple(x - c for x, c in zip(moved, cell, strict=True)) + place[periods:]
        if inside not in places:
            return None
        images.append(places.index(inside))
        shifts.append(cell)

    def operation(joint: Joint) -> Joint:
        a, b, cell = joint
        turned = (sign * cell[axis] for axis, sign in zip(axes, signs, strict=True))
        moved = tuple(c + y - x for c, x, y in zip(turned, shifts[a], shifts[b], strict=True))
        return images[a], images[b], moved

    return operation


def _closed(
    edges: list[Joint], arcs: list[Joint], operation: Operation, sites: int
) -> tuple[list[Joint], list[Joint]]:
    """Edges and arcs with all their images, or as they are if a site would get too many arms."""
    ways = {way for edge in edges for way in (edge, _opposite(edge))} | set(arcs)
    size = 0
    while size < len(ways):
        size = len(ways)
        ways |= {operation(way) for way in ways}
    for site in range(sites):
        if max(sum(way[end] == site for way in ways) for end in (0, 1)) > ARMS:
            return edges, arcs
    if not arcs:
        return sorted({min(way, _opposite(way)) for way in ways}), []
    return [], sorted(ways)


@st.composite
def _metrics(draw: st.DrawFn, dimension: int) -> list[list[Fraction]]:
    """Diagonally dominant, so positive definite."""
    metric = _unit(dimension)
    for i in range(dimension):
        metric[i][i] = Fraction(draw(st.sampled_from((1, 1, 2, 3))))
    for i in range(dimension):
        for j in range(i):
            metric[i][j] = metric[j][i] = draw(
                st.sampled_from((Fraction(0), Fraction(1, 3), Fraction(-1, 4)))
            )
    return metric


def _unit(dimension: int) -> list[list[Fraction]]:
    return [[Fraction(int(i == j)) for j in range(dimension)] for i in range(dimension)]


def _opposite(joint: Joint) -> Joint:
    return joint[1], joint[0], tuple(-c for c in joint[2])


def _text(
    dimension: int,
    periods: int,
    metric: list[list[Fraction]],
    places: list[Place],
    edges: list[Joint],
    arcs: list[Joint],
) -> str:
    """The definition file."""

    def row(numbers: tuple[Fraction, ...] | list[Fraction]) -> str:
        return "[" + ", ".join(f'"{x}"' for x in numbers) + "]"

    lines = ['name = "drawn"', f"dimension = {dimension}", f"periods = {periods}"]
    lines.append(f"metric = [{', '.join(row(r) for r in metric)}]")
    for number, place in enumerate(places):
        lines += ["[[sites]]", f'name = "s{number}"', f"at = {row(place)}"]
    for key, joints in (("edges", edges), ("arcs", arcs)):
        for a, b, cell in joints:
            lines += [f"[[{key}]]", f'from = "s{a}"', f'to = "s{b}"', f"cell = {list(cell)}"]
    return "\n".join(lines) + "\n"
