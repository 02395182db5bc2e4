"""Which published tables speak about a series.

A table is matched by what is asked, never by a name: the canonical form of the lattice, object, start, end, walls and
statistic. So a user's own file that describes the square lattice is the square lattice here too. Questions that a
symmetry of the lattice carries into each other, like the half-spaces y >= 0 and x >= 0, have the same answer and are
the same question.
"""

from __future__ import annotations

import operator
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cache
from typing import Any

from fleetcount.errors import InternalError
from fleetcount.lattice import catalogue
from fleetcount.lattice.symmetry import all_alike, stabilizer
from fleetcount.series import canonical, forms
from fleetcount.series.defining import define
from fleetcount.series.definition import Series
from fleetcount.series.region import wall
from fleetcount.series.statistics import Statistic
from fleetcount.series.tally import Place, Tally
from fleetcount.trust.published import PublishedTable, document, tables_of

Mark = tuple[str, str, tuple[int, ...]]
"""What names a place or a direction: its kind, a number that symmetries leave alone, and the form they turn."""


@dataclass(frozen=True)
class PublishedTerms:
    """A table that speaks about a series, in the normalisation of the series per start site or per cell.

    Attributes:
        terms: published value by length, or by length and statistic; lengths that the table leaves out are left out.
        cite: sequence number and source in a few words.
        units: what a published value is to be multiplied by to be a sum of the series' tallies.
        column: of the sums in a row of a tally.
        statistic: that the table is refined by, or None.
        values: its values in a place of a tally.
        only: the one value of the statistic that the table speaks about, or None.
        total: the table holds sums of the statistic over all configurations.
    """

    table: PublishedTable
    terms: Mapping[Place, int]
    cite: str
    units: int
    column: int
    what: str
    statistic: Statistic | None
    values: slice
    only: Place | None
    total: bool

    def counted(self, sums: Tally) -> dict[Place, int]:
        """The sums that the table speaks about."""
        found: dict[Place, int] = {}
        for place, row in sums.rows.items():
            value = place[self.values] if self.statistic else ()
            if self.only is not None and value != self.only:
                continue
            times = value[0] if self.total else 1
            here = place[:1] if self.total or self.only is not None else (*place[:1], *value)
            found[here] = found.get(here, 0) + times * row[self.column]
        return {place: total for place, total in found.items() if total}

    def at(self, place: Place) -> str:
        """The value of the statistic, for people."""
        value = place[1:] if self.only is None else self.only
        if self.statistic is None or not value:
            return ""
        return f" and {self.statistic.text()} {','.join(map(str, value))}"


def for_series(series: Series) -> list[PublishedTerms]:
    """The tables that speak about a series, in the order of the matching file."""
    asked = {question(series, statistic): statistic for statistic in (None, *series.statistics)}
    found = []
    for text, match in _questions(series.object):
        moment = match.get("moment")
        if text in asked and (moment is None or moment in series.moments):
            found.append(_terms(series, asked[text], match))
    return found


def question(series: Series, statistic: Statistic | None) -> str:
    """What is asked, as a text; the same for all questions that symmetries fixing the start carry into each other."""
    lattice = series.lattice
    marks = list(_marks(series, statistic))
    anywhere = not marks and all_alike(lattice)
    named: Sequence[Mark] = marks
    if marks and series.start is not None:
        named = min(
            sorted(_turned(mark, g.matrix) for mark in marks) for g in stabilizer(lattice, series.start)
        )
    return canonical.text(
        {
            "lattice": lattice.canonical(),
            "object": [series.object, series.rule.version],
            "start": 0 if anywhere else series.start,
            "statistic": statistic.name if statistic else None,
            "named": [list(map(str, mark)) for mark in named],
        }
    )


def _marks(series: Series, statistic: Statistic | None) -> Iterator[Mark]:
    """Walls with the height of the start above them, the end as seen from the start, directions."""
    lattice, name = series.lattice, statistic.name if statistic else ""
    for number, one in enumerate(series.walls, 1):
        above = one.excess(lattice, series.start, ()) if series.start is not None else one.bound
        counted = name == "visits" and statistic is not None and statistic.wall in (0, number)
        yield "counted wall" if counted else "wall", str(Fraction(above)), one.form
    if series.end is not None and series.start is not None:
        yield "end", "", _lowered(series, *series.end)
    if series.rule.above_start or series.rule.ends == "on top" or name == "height":
        yield "up", "", lattice.up
    if statistic is not None and statistic.direction:
        yield "either way", "", forms.direction_form(statistic.direction, lattice)


def _lowered(series: Series, site: int, cell: Sequence[int]) -> tuple[int, ...]:
    """The metric applied to the vector from the start to a site: a form, which symmetries turn as they do others."""
    lattice, start = series.lattice, series.lattice.positions[series.start or 0]
    wide = (*cell, *([0] * (lattice.dimension - lattice.periods)))
    away = [b + lattice.scale * c - a for a, b, c in zip(start, lattice.positions[site], wide, strict=True)]
    return tuple(sum(map(operator.mul, row, away)) for row in lattice.gram)


def _turned(mark: Mark, matrix: Sequence[Sequence[int]]) -> Mark:
    kind, number, form = mark
    turned = tuple(sum(map(operator.mul, form, column)) for column in zip(*matrix, strict=True))
    if kind == "either way":
        turned = max(turned, tuple(-x for x in turned))
    return kind, number, turned


@cache
def _questions(object_name: str) -> tuple[tuple[str, Mapping[str, Any]], ...]:
    """The matches that concern an object, each with its question."""
    found = []
    for match in document("matching.toml")["match"]:
        if match["object"] == object_name:
            series = _meant(match)
            found.append((question(series, next(iter(series.statistics), None)), match))
    return tuple(found)


def _meant(match: Mapping[str, Any]) -> Series:
    """The series that a match means."""
    table = tables_of(match["file"])[match["table"]]
    lattice = catalogue.find(match.get("lattice") or document("matching.toml")["lattices"][table.lattice])
    return define(
        lattice,
        match["object"],
        match.get("start"),
        end=match.get("end"),
        by=[match["by"]] if "by" in match else [],
        moment=[match["moment"]] if "moment" in match else [],
        region_name=match.get("region"),
        walls=[wall(lattice, tuple(form), least) for form, least in match.get("walls", [])],
    )


def _terms(series: Series, statistic: Statistic | None, match: Mapping[str, Any]) -> PublishedTerms:
    table = tables_of(match["file"])[match["table"]]
    moment, name = match.get("moment"), statistic.text() if statistic else ""
    return PublishedTerms(
        table,
        _normalised(table, match),
        f"{table.sequence}: {match['cite']}" if table.sequence else match["cite"],
        units=series.divisor * (series.denominator if moment else 1),
        column=1 + series.moments.index(moment) if moment else 0,
        what=moment or (f"total of {name}" if match.get("total") else "count"),
        statistic=statistic,
        values=_values(series, statistic),
        only=tuple(match["only"]) if "only" in match else None,
        total=match.get("total", False),
    )


def _values(series: Series, statistic: Statistic | None) -> slice:
    """Where the values of a statistic stand in a place."""
    first = 1
    for one in series.statistics:
        width = len(one.columns(series.lattice))
        if one == statistic:
            return slice(first, first + width)
        first += width
    return slice(0, 0)


def _normalised(table: PublishedTable, match: Mapping[str, Any]) -> dict[Place, int]:
    terms = {place: match.get("times", 1) * value for place, value in table.values.items()}
    if not match.get("rooted", False):
        return terms
    if any(value % (2 * n) for (n, *_), value in terms.items()):
        raise InternalError(
            "closed walks are no multiple of twice their length", where=f"published table {table.id}"
        )
    return {place: value // (2 * place[0]) for place, value in terms.items()}
