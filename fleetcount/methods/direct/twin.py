"""The plain twin of the direct method: the rules of the objects, as short as they can be said.

No patch, no symmetry, no pruning, no trick. It is what the kernels are held against on every small case, and slow.
How one configuration is measured stands in `series.figure`.
"""

from __future__ import annotations

import itertools
from collections.abc import Sequence

from fleetcount.lattice.model import Lattice
from fleetcount.methods.direct.keys import Prefix
from fleetcount.series.definition import Series
from fleetcount.series.figure import Figure, Point, adjacent, height, position
from fleetcount.series.region import Wall, contains, moved
from fleetcount.series.tally import Tally


def whole(series: Series, prefix: Prefix, to: int) -> Tally:
    """Everything that begins with a prefix, up to length `to`; closed objects as closed walks from the start.

    A polygon rooted at its least site is found there only, so it counts for all the closed walks along it:
    n, or 2n where it can be run through in either sense.
    """
    tally = Tally(series.width)
    path = sites_along(series.lattice, prefix)
    if path is not None and len(prefix.arms) <= to and begins(series, prefix, path):
        _extend(series, prefix, path, to, tally)
    return tally


def sites_along(lattice: Lattice, prefix: Prefix) -> list[Point] | None:
    """The sites along a prefix, or None where an arm does not exist."""
    here: Point = (prefix.start, (0,) * lattice.periods)
    path = [here]
    for arm in prefix.arms:
        if arm >= len(lattice.arms[here[0]]):
            return None
        here = step(lattice, here, arm)
        path.append(here)
    return path


def step(lattice: Lattice, here: Point, arm: int) -> Point:
    """The site that an arm leads to."""
    arc = lattice.arms[here[0]][arm]
    return arc.target, tuple(c + s for c, s in zip(here[1], arc.cell, strict=True))


def walls_at(series: Series, prefix: Prefix) -> tuple[Wall, ...]:
    """The region as seen from the cell of the prefix' start."""
    return moved(series.walls, prefix.cell) if prefix.cell else series.walls


def begins(series: Series, prefix: Prefix, path: Sequence[Point]) -> bool:
    """Whether an object can begin with these sites."""
    lattice, rule, start = series.lattice, series.rule, path[0]
    if not _avoids(series, path) or not all(
        contains(lattice, walls_at(series, prefix), *point) for point in path
    ):
        return False
    if rule.above_start and any(height(lattice, point, start) <= 0 for point in path[1:]):
        return False
    if series.end in path[:-1]:
        return False
    return not prefix.least or all(_may_follow(series, prefix, start, point) for point in path[1:])


def _avoids(series: Series, path: Sequence[Point]) -> bool:
    avoids = series.rule.avoids
    if avoids == "edges":
        edges = [_edge(series.lattice, a, b) for a, b in itertools.pairwise(path)]
        return len(set(edges)) == len(edges)
    if len(set(path)) < len(path):
        return False
    if avoids == "neighbours":
        pairs = ((a, b) for i, a in enumerate(path) for b in path[i + 2 :])
        return not any(adjacent(series.lattice, a, b) for a, b in pairs)
    return True


def _edge(lattice: Lattice, a: Point, b: Point) -> object:
    return (a, b) if lattice.one_way else frozenset((a, b))


def _may_follow(series: Series, prefix: Prefix, start: Point, point: Point) -> bool:
    """Rooted at the least site: greater than it; in a half-space only sites of the surface are compared."""
    if surface_rooted(series) and walls_at(series, prefix)[0].excess(series.lattice, *point) > 0:
        return True
    return position(series.lattice, point) > position(series.lattice, start)


def surface_rooted(series: Series) -> bool:
    """Whether closed objects are counted up to the translations along the one wall of a half-space."""
    return series.rule.closed and series.start is None and len(series.walls) == 1


def _ends(series: Series, prefix: Prefix, path: Sequence[Point]) -> bool:
    lattice, ends = series.lattice, series.rule.ends
    if series.end is not None:
        return path[-1] == series.end
    if ends == "on top":
        return all(height(lattice, point, path[-1]) <= 0 for point in path)
    if ends == "trapped":
        arms = range(len(lattice.arms[path[-1][0]]))
        return not any(begins(series, prefix, [*path, step(lattice, path[-1], arm)]) for arm in arms)
    return True


def _extend(series: Series, prefix: Prefix, path: list[Point], to: int, tally: Tally) -> None:
    lattice, n = series.lattice, len(path) - 1
    if not series.rule.closed and _ends(series, prefix, path):
        _count(series, prefix, path, 1, tally)
    for arm in range(len(lattice.arms[path[-1][0]]) if n < to else 0):
        there = step(lattice, path[-1], arm)
        if there == path[0] and _closes(series, path):
            _count(series, prefix, path, _times(lattice, prefix, path), tally)
        if begins(series, prefix, [*path, there]):
            _extend(series, prefix, [*path, there], to, tally)


def _closes(series: Series, path: Sequence[Point]) -> bool:
    """Whether the step from the last site of a path back to its first closes an object."""
    rule = series.rule
    long_enough = rule.closed and len(path) >= rule.least_length(series.lattice)
    return long_enough and (rule.avoids != "edges" or _avoids(series, [*path, path[0]]))


def _count(series: Series, prefix: Prefix, path: Sequence[Point], times: int, tally: Tally) -> None:
    if times:
        figure = Figure(series, tuple(path), walls_at(series, prefix), series.rule.closed)
        place, values = figure.place(), figure.values()
        old = tally.rows.get(place, (0,) * series.width)
        tally.rows[place] = tuple(o + times * v for o, v in zip(old, values, strict=True))


def _times(lattice: Lattice, prefix: Prefix, path: Sequence[Point]) -> int:
    """For how many closed walks the one that closes `path` stands."""
    if not prefix.least:
        return 1
    n = len(path)
    if lattice.one_way:
        return n
    arms = range(len(lattice.arms[prefix.start]))
    first, last = (next(k for k in arms if step(lattice, path[0], k) == p) for p in (path[1], path[-1]))
    return 2 * n if first < last else 0
