"""The plain twin of the direct method: the definitions of the objects, as short as they can be said.

No patch, no symmetry, no pruning, no trick. Sites are pairs of a site number and a cell. It is what the kernels are
held against on every small case, and slow.
"""

from __future__ import annotations

from fleetcount.lattice.model import Cell, Lattice
from fleetcount.methods.direct.keys import Prefix
from fleetcount.series.definition import Series
from fleetcount.series.tally import Tally

Point = tuple[int, Cell]


def whole(series: Series, prefix: Prefix, to: int) -> Tally:
    """Everything that begins with a prefix, up to length `to`; polygons as closed walks from the start.

    A polygon rooted at its least site is found there only, so it counts for all the closed walks along it:
    n, or 2n where it can be run through in either sense.
    """
    counts: dict[int, int] = {}
    path = sites_along(series.lattice, prefix)
    if path is not None and len(prefix.arms) <= to and allowed(series.lattice, prefix, path):
        _extend(series, prefix, path, to, counts)
    return Tally.of_counts(counts)


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
    arc = lattice.arms[here[0]][arm]
    return arc.target, tuple(c + s for c, s in zip(here[1], arc.cell, strict=True))


def _position(lattice: Lattice, point: Point) -> tuple[object, ...]:
    site, cell = point
    shift = (*cell, *([0] * (lattice.dimension - lattice.periods)))
    return tuple(x + c for x, c in zip(lattice.sites[site].at, shift, strict=True))


def allowed(lattice: Lattice, prefix: Prefix, path: list[Point]) -> bool:
    if len(set(path)) < len(path):
        return False
    positions = [_position(lattice, point) for point in path]
    return not prefix.least or all(p > positions[0] for p in positions[1:])


def _extend(series: Series, prefix: Prefix, path: list[Point], to: int, counts: dict[int, int]) -> None:
    lattice, n = series.lattice, len(path) - 1
    if not series.rule.closed:
        counts[n] = counts.get(n, 0) + 1
    for arm in range(len(lattice.arms[path[-1][0]]) if n < to else 0):
        there = step(lattice, path[-1], arm)
        if there == path[0] and series.rule.closed and n + 1 >= series.rule.least_length(lattice):
            times = _times(lattice, prefix, path)
            counts[n + 1] = counts.get(n + 1, 0) + times
        elif allowed(lattice, prefix, [*path, there]):
            _extend(series, prefix, [*path, there], to, counts)


def _times(lattice: Lattice, prefix: Prefix, path: list[Point]) -> int:
    """For how many closed walks the one that closes `path` stands."""
    if not prefix.least:
        return 1
    n = len(path)
    if lattice.one_way:
        return n
    first, last = (
        next(k for k, _ in enumerate(lattice.arms[prefix.start]) if step(lattice, path[0], k) == p)
        for p in (path[1], path[-1])
    )
    return 2 * n if first < last else 0
