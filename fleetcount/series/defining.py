"""From words to a series: options of the command line, keys of a series file, arguments of the Python interface."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

from fleetcount.errors import SeriesError
from fleetcount.lattice.model import Cell, Lattice
from fleetcount.lattice.symmetry import all_alike
from fleetcount.series import moments, statistics
from fleetcount.series.definition import Series
from fleetcount.series.objects import CountedObject, find_object
from fleetcount.series.region import Wall, contains, moved, region, settled, shape, shorthand
from fleetcount.series.statistics import Statistic

MOST_STATISTICS = 2
_FARTHEST = 10**6
_DIRECTED = ("steps", "span", "height", "end")


def define(
    lattice: Lattice,
    object_name: str,
    start: str | None = None,
    *,
    end: str | None = None,
    by: Sequence[str] = (),
    moment: Sequence[str] = (),
    region_name: str | None = None,
    walls: Iterable[Wall] = (),
) -> Series:
    """The series of an object on a lattice.

    Args:
        start: a site's name, a cell `0,3`, or both `0,3:a`. Where all sites are alike and nothing names a place or a
            direction, every start means the same series, that of the first site.
        end: a cell, or cell and site, in the same coordinates.
        by, moment: names of statistics and moments.
        region_name: a shorthand for walls; `walls` are added to it.

    Raises:
        SeriesError: something unknown, or that makes no sense together; it says why.
    """
    rule = find_object(object_name)
    refined = _statistics(by, lattice)
    moved_by, site = _place(lattice, start, "--start")
    bounds = region(lattice, [*(shorthand(lattice, region_name) if region_name else ()), *walls])
    around = moved(bounds, moved_by)
    if rule.closed and shape(lattice, around) != "other":
        around = settled(lattice, around)
    for name in moment:
        reason = moments.refusal(moments.find(name), lattice, rule)
        if reason:
            raise SeriesError(reason, where=f"--moment {name}")
    for one in refined:
        reason = statistics.refusal(one, lattice, rule, around)
        if reason:
            raise SeriesError(reason, where=f"--by {one.text()}")
    names = tuple(name for name in moments.MEANINGS if name in moment)
    target = _end(lattice, rule, end, moved_by)
    first = _start(lattice, rule, start, site, around, bool(target) or _is_directed(rule, refined, names))
    series = Series(lattice, rule.name, first, target, refined, names, around)
    _check_places(series)
    return series


def _statistics(by: Sequence[str], lattice: Lattice) -> tuple[Statistic, ...]:
    found = sorted({statistics.parse(text, lattice) for text in by})
    if len(found) > MOST_STATISTICS:
        raise SeriesError(
            f"{len(found)} statistics", where="--by", mend=f"at most {MOST_STATISTICS} at a time"
        )
    return tuple(found)


def _is_directed(rule: CountedObject, refined: Sequence[Statistic], names: Sequence[str]) -> bool:
    """Whether something names a direction, so that alike sites may still give different numbers."""
    return (
        rule.above_start
        or any(s.name in _DIRECTED for s in refined)
        or bool({"height2", "along2"} & set(names))
    )


def _start(
    lattice: Lattice,
    rule: CountedObject,
    text: str | None,
    site: int | None,
    walls: Sequence[Wall],
    directed: bool,
) -> int | None:
    if rule.closed and shape(lattice, walls) != "other":
        if text is not None:
            raise SeriesError(f"a {rule.name} has no start here", where="--start", mend="leave it out")
        return None
    if site is not None:
        return 0 if all_alike(lattice) and not walls and not directed else site
    if all_alike(lattice) or len(lattice.sites) == 1:
        return 0
    if walls or directed:
        names = ", ".join(s.name for s in lattice.sites)
        raise SeriesError(
            "the sites are not all alike", where=f"lattice {lattice.name}", mend=f"--start one of {names}"
        )
    return None


def _end(lattice: Lattice, rule: CountedObject, text: str | None, moved_by: Cell) -> tuple[int, Cell] | None:
    if text is None:
        return None
    if not rule.plain or rule.closed:
        raise SeriesError(
            f"a {rule.name} with a given end cannot be counted", where="--end", mend="count walks"
        )
    cell, site = _place(lattice, text, "--end")
    if site is None:
        if len(lattice.sites) > 1:
            names = ", ".join(s.name for s in lattice.sites)
            raise SeriesError(
                "which site of that cell?", where=f"--end {text}", mend=f"write {text}:SITE, one of {names}"
            )
        site = 0
    return site, tuple(a - b for a, b in zip(cell, moved_by, strict=True))


def _place(lattice: Lattice, text: str | None, where: str) -> tuple[Cell, int | None]:
    """The cell and the number of the site of `0,3:a`, `0,3` or `a`."""
    here = (0,) * lattice.periods
    if text is None:
        return here, None
    names = [site.name for site in lattice.sites]
    if text in names:
        return here, names.index(text)
    cell_text, _, name = text.partition(":")
    try:
        cell = tuple(int(x) for x in cell_text.split(","))
    except ValueError:
        raise SeriesError(
            f"no site named {text!r}",
            where=f"{where}, lattice {lattice.name}",
            mend=f"its sites: {', '.join(names)}",
        ) from None
    if len(cell) != lattice.periods or max(map(abs, cell)) > _FARTHEST:
        raise SeriesError(
            f"{cell_text!r} is no cell", where=where, mend=f"give {lattice.periods} whole numbers like 0,3"
        )
    if name and name not in names:
        raise SeriesError(f"no site named {name!r}", where=where, mend=f"its sites: {', '.join(names)}")
    return cell, names.index(name) if name else None


def _check_places(series: Series) -> None:
    lattice, here = series.lattice, (0,) * series.lattice.periods
    if series.start is not None and not contains(lattice, series.walls, series.start, here):
        raise SeriesError(
            "the region does not hold the start", where=series.title(), mend="give another --start"
        )
    if series.end is not None and not contains(lattice, series.walls, *series.end):
        raise SeriesError("the region does not hold the end", where=series.title(), mend="give another --end")
    if series.end is not None and series.end == (series.start, here):
        raise SeriesError("the end is the start", where="--end", mend="count polygons for closed walks")
