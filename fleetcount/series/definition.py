"""The definition of a series, and its digest, which is its identity.

Neither length nor method is part of it: a longer count, or one by another method, is a further reading of the same
series. The canonical form already has places for statistics, moments and walls, which are empty so far.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from typing import Any

from fleetcount.errors import InternalError, SeriesError
from fleetcount.lattice.model import Arc, Lattice, Site
from fleetcount.lattice.symmetry import all_alike
from fleetcount.series import canonical
from fleetcount.series.objects import OBJECTS, CountedObject, find_object

FORMAT = 1


@dataclass(frozen=True)
class Series:
    """What is to be counted. Built by `define`, which checks it.

    Attributes:
        start: number of the start site in the cell (walks); None: the sum over the sites of one cell, or a closed
            object, which has no start.
    """

    lattice: Lattice
    object: str
    start: int | None

    @property
    def rule(self) -> CountedObject:
        return OBJECTS[self.object]

    @property
    def divisor(self) -> int:
        """What a term is to be divided by to get the mean over start sites."""
        if self.rule.closed or self.start is not None:
            return 1
        return len(self.lattice.sites)

    def canonical(self) -> dict[str, Any]:
        """The canonical form, of which the digest is taken."""
        return {
            "format": FORMAT,
            "lattice": self.lattice.canonical(),
            "start": self.start,
            "object": [self.object, self.rule.version],
            "statistics": [],
            "moments": [],
            "walls": [],
        }

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
        start = None if self.start is None else self.lattice.sites[self.start].name
        sites = [site.name for site in self.lattice.sites]
        return {"lattice": self.lattice.name, "object": self.object, "start": start, "sites": sites}

    def title(self) -> str:
        """One line for people: `square walk`, `dice walk from hub`."""
        words = [self.lattice.name, self.object]
        if self.start is not None and not all_alike(self.lattice):
            words += ["from", self.lattice.sites[self.start].name]
        return " ".join(words)


def define(lattice: Lattice, object_name: str, start: str | None = None) -> Series:
    """The series of an object on a lattice.

    Where all sites are alike every start site means the same series, that of the first site.

    Raises:
        SeriesError: unknown object or site, or a start for an object that has none.
    """
    rule = find_object(object_name)
    names = [site.name for site in lattice.sites]
    if start is not None and start not in names:
        raise SeriesError(
            f"no site named {start!r}", where=f"lattice {lattice.name}", mend=f"its sites: {', '.join(names)}"
        )
    if rule.closed:
        if start is not None:
            raise SeriesError(f"a {rule.name} has no start", where="--start", mend="leave it out")
        return Series(lattice, rule.name, None)
    if all_alike(lattice):
        return Series(lattice, rule.name, 0)
    return Series(lattice, rule.name, None if start is None else names.index(start))


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
        body = form["lattice"]
        lattice = Lattice(
            name=name,
            title=name,
            dimension=body["dimension"],
            periods=body["periods"],
            metric=tuple(tuple(Fraction(x) for x in row) for row in body["metric"]),
            metric_is="exact",
            up=tuple(int(i == body["dimension"] - 1) for i in range(body["dimension"])),
            sites=tuple(
                Site(str(site), tuple(Fraction(x) for x in at))
                for site, at in zip(names, body["positions"], strict=True)
            ),
            arcs=tuple(Arc(s, t, tuple(cell)) for s, t, cell in body["arcs"]),
            one_way=body["one_way"],
        )
        object_name, version = form["object"]
        series = Series(lattice, object_name, form["start"])
        if OBJECTS[object_name].version != version:
            raise SeriesError(f"the object {object_name} is of version {version}, not known here", where=name)
    except (ArithmeticError, IndexError, KeyError, TypeError, ValueError) as error:
        raise SeriesError("not the canonical form of a series", where=name) from error
    if series.canonical() != form:
        raise InternalError("a canonical form does not give itself back", where=name)
    return series
