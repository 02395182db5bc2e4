"""Published values: read from the data files, and compared with what was counted.

The files under `data/` hold exact published numbers with their sources; the README beside them describes
the format. A table is matched to a series by the canonical form of the lattice, never by its name, so that a
user's own file that describes the square lattice is the square lattice here too.
"""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from importlib.resources import files
from typing import Any

from fleetcount.errors import InternalError
from fleetcount.lattice import catalogue
from fleetcount.series.definition import Series

TABLE_FILES = ("walks", "polygons", "trails", "metrics", "contacts", "confined", "endpoints")
"""The data files that hold tables; constants and records are of another shape."""


@dataclass(frozen=True)
class PublishedTable:
    """One published table, as it stands in its file.

    Attributes:
        id: its name, unique among all tables.
        lattice, object, quantity: what it is about, in the words of the file.
        definition: what exactly is counted or summed, and how it is normalised.
        values: full values by index, or by index and statistic; a published fraction is multiplied out.
        source: where the numbers come from.
        sequence: number in the On-Line Encyclopedia of Integer Sequences, or "".
    """

    id: str
    lattice: str
    object: str
    quantity: str
    definition: str
    values: Mapping[tuple[int, ...], int]
    source: str
    sequence: str

    def terms(self) -> dict[int, int]:
        """Full values by index; the statistic of a two-index table is summed out."""
        sums: dict[int, int] = {}
        for place, value in self.values.items():
            sums[place[0]] = sums.get(place[0], 0) + value
        return sums


@dataclass(frozen=True)
class PublishedTerms:
    """A table that speaks about a series, in the normalisation of the series per start site or per cell.

    Attributes:
        terms: published value by length; lengths that the table leaves out are left out.
        cite: sequence number and source in a few words.
    """

    table: PublishedTable
    terms: Mapping[int, int]
    cite: str


@dataclass(frozen=True)
class Agreement:
    """How the counts of a series stand to the published ones.

    Attributes:
        reached: for each table, the greatest length to which every published term agrees, and its citation.
        disagreement: one line on the first length at which they differ, or None.
    """

    reached: tuple[tuple[int, str], ...]
    disagreement: str | None = None

    def line(self) -> str:
        """One line for people."""
        if self.disagreement is not None:
            return self.disagreement
        parts = (f"to n={n} ({cite})" for n, cite in sorted(self.reached, key=lambda part: -part[0]))
        return "agrees with published values " + ", ".join(parts)


@cache
def tables() -> tuple[PublishedTable, ...]:
    """All published tables, in the order of the files."""
    return tuple(table for name in TABLE_FILES for table in _tables_of(f"{name}.toml").values())


def for_series(series: Series) -> list[PublishedTerms]:
    """The published plain counts of that object on that lattice, per start site or per cell.

    On all lattices that are matched the sites are alike, so the start of a walk makes no difference.
    """
    form = series.canonical()
    matching = _document("matching.toml")
    found = []
    for match in matching["match"]:
        if match["object"] != series.object or any(form[key] for key in ("statistics", "moments", "walls")):
            continue
        table = _tables_of(match["file"])[match["table"]]
        lattice = match.get("lattice") or matching["lattices"][table.lattice]
        if catalogue.find(lattice).canonical() == form["lattice"]:
            cite = f"{table.sequence}: {match['cite']}" if table.sequence else match["cite"]
            found.append(PublishedTerms(table, _normalised(table, match), cite))
    return found


def compare(series: Series, counts: Mapping[int, int], final: int) -> Agreement | None:
    """Compare the final counts of a series, by length, with all published ones; None where there are none.

    Args:
        counts: as the coefficient table has them, before division by the series' divisor.
        final: greatest length up to which they are final; later ones are left out.
    """
    reached: list[tuple[int, str]] = []
    differing: list[tuple[int, str]] = []
    for published in for_series(series):
        common = sorted(n for n in published.terms if n in counts and n <= final)
        wrong = [n for n in common if counts[n] != series.divisor * published.terms[n]]
        agreeing = [n for n in common if not wrong or n < wrong[0]]
        if agreeing:
            reached.append((agreeing[-1], published.cite))
        if wrong:
            differing.append((wrong[0], _disagreement(series, published, counts[wrong[0]], wrong[0])))
    if not reached and not differing:
        return None
    return Agreement(tuple(reached), min(differing)[1] if differing else None)


def _disagreement(series: Series, published: PublishedTerms, count: int, n: int) -> str:
    return (
        f"{series.title()}: the count of length {n} is {count}, "
        f"published is {series.divisor * published.terms[n]} ({published.cite})"
    )


def _normalised(table: PublishedTable, match: Mapping[str, Any]) -> dict[int, int]:
    terms = {n: match.get("times", 1) * value for n, value in table.terms().items()}
    if not match.get("rooted", False):
        return terms
    if any(value % (2 * n) for n, value in terms.items()):
        raise InternalError(
            "closed walks are no multiple of twice their length", where=f"published table {table.id}"
        )
    return {n: value // (2 * n) for n, value in terms.items()}


@cache
def _tables_of(file: str) -> dict[str, PublishedTable]:
    return {entry["id"]: _table(entry) for entry in _document(file)["table"]}


def _table(entry: Mapping[str, Any]) -> PublishedTable:
    times = entry.get("multiplier", 1)
    values: dict[tuple[int, ...], int] = {}
    if "rows" in entry:
        for row in entry["rows"]:
            values.update({(row["n"], row["first"] + j): times * int(v) for j, v in enumerate(row["values"])})
    else:
        first, step = entry["first"], entry["step"]
        values.update({(first + i * step,): times * int(v) for i, v in enumerate(entry["values"])})
    words = {key: entry[key] for key in ("id", "lattice", "object", "quantity", "definition", "source")}
    return PublishedTable(**words, values=values, sequence=entry.get("sequence", ""))


@cache
def _document(file: str) -> dict[str, Any]:
    text = files("fleetcount.trust").joinpath("data", file).read_text(encoding="utf-8")
    return tomllib.loads(text)
