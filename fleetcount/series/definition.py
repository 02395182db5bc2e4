"""The definition of a series, and its digest, which is its identity.

Neither length nor method is part of it: a longer count, or one by another method, is a further reading of the same
series. Everything is kept relative to the cell of the start, so that the same question asked elsewhere is the same
series. How a definition is made out of words stands in `defining`.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from typing import Any

from fleetcount.errors import InternalError, SeriesError
from fleetcount.lattice.model import Arc, Cell, Lattice, Site
from fleetcount.lattice.symmetry import all_alike
from fleetcount.series import canonical, moments, statistics
from fleetcount.series.forms import Form
from fleetcount.series.objects import OBJECTS, CountedObject
from fleetcount.series.region import Wall
from fleetcount.series.statistics import Statistic

FORMAT = 1


@dataclass(frozen=True)
class Series:
    """What is to be counted. Built by `defining.define`, which checks it.

    Attributes:
        start: number of the start site, in cell 0; None: the sum over the sites of one cell, or a closed object that
            is counted up to translations.
        end: site and cell where a walk has to end; None: anywhere that the object allows.
        statistics: what the count is refined by, at most two, sorted.
        moments: names of exact sums beside the count.
        walls: the region, sorted; empty: everywhere.
    """

    lattice: Lattice
    object: str
    start: int | None
    end: tuple[int, Cell] | None = None
    statistics: tuple[Statistic, ...] = ()
    moments: tuple[str, ...] = ()
    walls: tuple[Wall, ...] = ()

    @property
    def rule(self) -> CountedObject:
        return OBJECTS[self.object]

    @property
    def plain(self) -> bool:
        """Nothing but lengths is asked for, of an object that only avoids itself and may end anywhere."""
        return self.rule.plain and not (self.end or self.statistics or self.moments)

    @property
    def divisor(self) -> int:
        """What a term is to be divided by to get the mean over start sites."""
        if self.rule.closed or self.start is not None:
            return 1
        return len(self.lattice.sites)

    @property
    def width(self) -> int:
        """Sums in a row of a tally: the count, then one a moment."""
        return 1 + len(self.moments)

    @cached_property
    def denominator(self) -> int:
        """What every moment of the tallies and tables is to be divided by."""
        return moments.denominator(self.lattice, self.moments) if self.moments else 1

    @property
    def uses_up(self) -> bool:
        """Whether heights are measured."""
        return (
            self.rule.above_start
            or self.rule.ends == "on top"
            or any(s.name == "height" for s in self.statistics)
            or bool({"height2", "along2"} & set(self.moments))
        )

    @property
    def directed(self) -> bool:
        """Whether something names a direction, so that sites that are alike may still give different numbers."""
        return (
            len(self.lattice.sites) > 1
            and not self.rule.closed
            and (self.uses_up or any(s.name in ("steps", "span", "end") for s in self.statistics))
        )

    @property
    def columns(self) -> tuple[str, ...]:
        """Headings of a table: length, statistics, count, moments."""
        named = [column for s in self.statistics for column in s.columns(self.lattice)]
        return ("n", *named, "count", *self.moments)

    def canonical(self) -> dict[str, Any]:
        """The canonical form, of which the digest is taken."""
        form: dict[str, Any] = {
            "format": FORMAT,
            "lattice": self.lattice.canonical(),
            "start": self.start,
            "object": [self.object, self.rule.version],
            "statistics": [s.canonical() for s in self.statistics],
            "moments": [[name, moments.VERSIONS[name]] for name in self.moments],
            "walls": [w.canonical() for w in self.walls],
        }
        if self.end is not None:
            form["end"] = [self.end[0], list(self.end[1])]
        if self.uses_up:
            form["up"] = list(self.lattice.up)
        return form

    @cached_property
    def text(self) -> str:
        """Canonical text."""
        return canonical.text(self.canonical())

    @cached_property
    def digest(self) -> str:
        """SHA-256 of the canonical text: the identity of the series."""
        return canonical.digest(self.text)

    def written(self) -> dict[str, Any]:
        """The definition in the user's words: names, for screens and for the ledger."""
        names = [site.name for site in self.lattice.sites]
        written: dict[str, Any] = {"lattice": self.lattice.name, "object": self.object, "sites": names}
        written["start"] = None if self.start is None else names[self.start]
        if self.end is not None:
            written["end"] = f"{','.join(map(str, self.end[1]))}:{names[self.end[0]]}"
        if self.statistics:
            written["by"] = [s.text() for s in self.statistics]
        if self.moments:
            written["moments"] = list(self.moments)
        if self.walls:
            written["region"] = [w.text() for w in self.walls]
        return written

    def title(self) -> str:
        """One line for people: `square walk`, `dice walk from hub by contacts`."""
        written = self.written()
        words = [written["lattice"], written["object"]]
        if self.start is not None and (self.walls or self.directed or not all_alike(self.lattice)):
            words.append(f"from {written['start']}")
        words += [f"to {written['end']}"] if self.end else []
        words += [f"where {' and '.join(written['region'])}"] if self.walls else []
        words += [f"by {' and '.join(written['by'])}"] if self.statistics else []
        words += [f"with {' and '.join(self.moments)}"] if self.moments else []
        return " ".join(words)


def from_canonical(form: Mapping[str, Any], written: Mapping[str, Any]) -> Series:
    """The series of a canonical form, as a ledger or a hand-out carries it, with the names of `Series.written`."""
    name = str(written.get("lattice", "unnamed"))
    if form.get("format") != FORMAT:
        raise SeriesError(
            f"the definition of a series is of format {form.get('format')!r}, this program knows {FORMAT}",
            where=name,
            mend="use the version of the program that made it",
        )
    try:
        names = written.get("sites") or [str(i) for i in range(len(form["lattice"]["positions"]))]
        lattice = _lattice(form["lattice"], name, names, form.get("up"))
        object_name, version = form["object"]
        if OBJECTS[object_name].version != version:
            raise SeriesError(f"the object {object_name} is of version {version}, not known here", where=name)
        end = form.get("end")
        series = Series(
            lattice,
            object_name,
            form["start"],
            end=None if end is None else (end[0], tuple(end[1])),
            statistics=tuple(
                Statistic(kind, wall, tuple(direction)) for kind, _, wall, direction in form["statistics"]
            ),
            moments=tuple(moment for moment, _ in form["moments"]),
            walls=tuple(Wall(tuple(wall), Fraction(bound)) for wall, bound in form["walls"]),
        )
        known = {*statistics.MEANINGS, *moments.MEANINGS}
        named = {**{s[0]: s[1] for s in form["statistics"]}, **dict(form["moments"])}
        versions = {**statistics.VERSIONS, **moments.VERSIONS}
        unknown = {name for name, version in named.items() if name not in known or versions[name] != version}
        if unknown:
            raise SeriesError(f"{min(unknown)} of that version is not known here", where=name)
    except (ArithmeticError, IndexError, KeyError, TypeError, ValueError) as error:
        raise SeriesError("not the canonical form of a series", where=name) from error
    if series.canonical() != form:
        raise InternalError("a canonical form does not give itself back", where=name)
    return series


def _lattice(body: Mapping[str, Any], name: str, names: list[Any], up: Form | None) -> Lattice:
    dimension = body["dimension"]
    return Lattice(
        name=name,
        title=name,
        dimension=dimension,
        periods=body["periods"],
        metric=tuple(tuple(Fraction(x) for x in row) for row in body["metric"]),
        metric_is="exact",
        up=tuple(int(i == dimension - 1) for i in range(dimension)) if up is None else tuple(up),
        sites=tuple(
            Site(str(site), tuple(Fraction(x) for x in at))
            for site, at in zip(names, body["positions"], strict=True)
        ),
        arcs=tuple(Arc(s, t, tuple(cell)) for s, t, cell in body["arcs"]),
        one_way=body["one_way"],
    )
