"""All configurations of one length, sorted into classes of images, so that people see what is counted.

They are found by the definitions of the plain twin: slow, and meant for small lengths.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass

from fleetcount.errors import InputError
from fleetcount.lattice.model import Cell, Lattice
from fleetcount.lattice.sheet import Drawn, check_drawable, sheet_svg
from fleetcount.lattice.symmetry import Symmetry, group, site_orbits
from fleetcount.methods.direct import twin
from fleetcount.methods.direct.kept import kept_symmetries
from fleetcount.methods.direct.keys import Prefix
from fleetcount.series.definition import Series
from fleetcount.series.figure import Point

MOST_DRAWN = 60
GREATEST_LENGTH = 40
MOST_POINTS = 300_000
"""Points of all beginnings of configurations; more would take longer than one waits for a picture."""

Path = tuple[Point, ...]


@dataclass(frozen=True)
class Specimen:
    """Configurations that symmetries carry into each other.

    Attributes:
        images: each of them, sorted; of a closed one the first point is not repeated.
        times: for how many start sites of the cell they stand.
    """

    images: tuple[Path, ...]
    times: int

    @property
    def number(self) -> int:
        """How many configurations of the count are of this kind."""
        return len(self.images) * self.times

    def caption(self) -> str:
        """The number for people, with its factors where there are two."""
        images = "1 image" if len(self.images) == 1 else f"{len(self.images)} images"
        return images if self.times == 1 else f"{self.times} × {images}"


def picture(series: Series, length: int) -> tuple[str, str]:
    """A sheet in SVG of all inequivalent configurations of a length, or the first of them, and a line that sums it up.

    Raises:
        InputError: more than two dimensions, a length out of range, none of that length, or too many.
    """
    check_drawable(series.lattice)
    found = specimens(series, length)
    if not found:
        what = f"there is no {series.object} of length {length}"
        raise InputError(what, where=series.title(), mend="give another --length")
    total = sum(specimen.number for specimen in found)
    kinds = f"{len(found)} inequivalent"
    line = f"{series.title()}, length {length}: {total} in all, {kinds}"
    first = f", the first {MOST_DRAWN} drawn" if len(found) > MOST_DRAWN else ""
    figures = [Drawn(one.images, series.rule.closed, one.caption()) for one in found[:MOST_DRAWN]]
    starts = (
        "; of each kind of start site one, before the × how many" if any(s.times > 1 for s in found) else ""
    )
    subtitle = f"{series.rule.meaning}; below each the number of its images{starts}"
    return sheet_svg(series.lattice, figures, line + first, subtitle), line + first


def specimens(series: Series, length: int) -> list[Specimen]:
    """The inequivalent configurations of a length; their numbers add up to the term of the series.

    Walks are equivalent where a symmetry that fixes the start, and keeps the direction that the object names,
    carries one to the other; closed objects where any symmetry does. Where the sites are not alike and no start is
    named, each kind of site is a start.

    Raises:
        InputError: a length that is out of range, or with too many configurations.
    """
    least = series.rule.least_length(series.lattice)
    if not least <= length <= GREATEST_LENGTH:
        raise InputError(
            f"{length} is out of range",
            where="--length",
            mend=f"give a number from {least} to {GREATEST_LENGTH}",
        )
    budget = [MOST_POINTS]
    if series.rule.closed:
        return _sorted_out(_closed_paths(series, length, budget), 1, _closed_images(series.lattice))
    kinds = [(series.start, 1)] if series.start is not None else _kinds(series.lattice)
    return [
        specimen
        for start, times in kinds
        for specimen in _sorted_out(
            _open_paths(series, start, length, budget), times, _images(kept_symmetries(series, start))
        )
    ]


def _kinds(lattice: Lattice) -> list[tuple[int, int]]:
    return [(orbit[0], len(orbit)) for orbit in site_orbits(lattice)]


def _sorted_out(
    paths: Iterator[Path], times: int, images: Callable[[Path], tuple[Path, ...]]
) -> list[Specimen]:
    found, seen = [], set[Path]()
    for path in paths:
        if path not in seen:
            found.append(Specimen(images(path), times))
            seen.update(found[-1].images)
    return found


def _images(symmetries: tuple[Symmetry, ...]) -> Callable[[Path], tuple[Path, ...]]:
    return lambda path: tuple(sorted({tuple(g.apply(*point) for point in path) for g in symmetries}))


def _closed_images(lattice: Lattice) -> Callable[[Path], tuple[Path, ...]]:
    turned = _images(group(lattice))
    return lambda path: tuple(sorted({_normal(lattice, image) for image in turned(path)}))


def _normal(lattice: Lattice, path: Path) -> Path:
    """A closed path told from its least point, whose cell is made 0, in the sense that makes it least."""
    senses = (path,) if lattice.one_way else (path, path[::-1])
    root = min(path, key=_order)
    turned = (way[k:] + way[:k] for way in senses for k, point in enumerate(way) if point == root)
    return _moved(min(turned))


def _order(point: Point) -> tuple[Cell, int]:
    """An order that translations keep."""
    return point[1], point[0]


def _moved(path: Path) -> Path:
    origin = path[0][1]
    return tuple((site, tuple(x - o for x, o in zip(cell, origin, strict=True))) for site, cell in path)


def _open_paths(series: Series, start: int, length: int, budget: list[int]) -> Iterator[Path]:
    for prefix, path in _grown(series, Prefix(start, False, ()), length, None, budget):
        if twin.whole(series, prefix, length).counts().get(length):
            yield path


def _closed_paths(series: Series, length: int, budget: list[int]) -> Iterator[Path]:
    """Closed paths in their normal form: polygons from their least site, others from each kind of site."""
    lattice = series.lattice
    least = series.rule.avoids == "sites"
    starts = range(len(lattice.sites)) if least else (start for start, _ in _kinds(lattice))
    for start in starts:
        away = _distances(lattice, start, length // 2)
        for prefix, path in _grown(series, Prefix(start, least, ()), length - 1, away, budget):
            if twin.whole(series, prefix, length).counts().get(length):
                yield _normal(lattice, path)


def _grown(
    series: Series, root: Prefix, steps: int, away: Mapping[Point, int] | None, budget: list[int]
) -> Iterator[tuple[Prefix, Path]]:
    """All beginnings of so many steps.

    Args:
        away: how far points are from the start, if one more step is to lead back to it; what is not in it is too far.
        budget: how many points may still be visited.
    """
    todo = [(root, tuple(twin.sites_along(series.lattice, root) or ()))]
    while todo:
        prefix, path = todo.pop()
        budget[0] -= len(path)
        if budget[0] < 0:
            what = f"too many of length {steps + series.rule.closed} to be sorted for a picture"
            raise InputError(what, where=series.title(), mend="give a smaller --length")
        left = steps - len(prefix.arms)
        if left == 0:
            yield prefix, path
            continue
        for arm in reversed(range(len(series.lattice.arms[path[-1][0]]))):
            there = twin.step(series.lattice, path[-1], arm)
            if away is not None and away.get(there, left + 1) > left:
                continue
            if twin.begins(series, prefix.child(arm), (*path, there)):
                todo.append((prefix.child(arm), (*path, there)))


def _distances(lattice: Lattice, start: int, farthest: int) -> dict[Point, int]:
    """The points so many steps away, senses forgotten."""
    here: Point = (start, (0,) * lattice.periods)
    found, layer = {here: 0}, [here]
    for distance in range(1, farthest + 1):
        ends = {there for point in layer for there in _neighbours(lattice, point)}
        layer = [point for point in ends if point not in found]
        found.update(dict.fromkeys(layer, distance))
    return found


def _neighbours(lattice: Lattice, point: Point) -> Iterator[Point]:
    site, cell = point
    for arm in range(len(lattice.arms[site])):
        yield twin.step(lattice, point, arm)
    for arc in lattice.arms_in[site]:
        yield arc.source, tuple(c - s for c, s in zip(cell, arc.cell, strict=True))
