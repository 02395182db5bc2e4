"""Published values: read from the data files, and compared with what was counted.

The files under `data/` hold exact published numbers with their sources; the README beside them describes
the format. Which of them speak about a series is found by `matching`.
"""

from __future__ import annotations

import tomllib
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from functools import cache
from importlib.resources import files
from typing import TYPE_CHECKING, Any, NamedTuple

from fleetcount.series.tally import Place

if TYPE_CHECKING:
    from fleetcount.series.table import CoefficientTable
    from fleetcount.trust.matching import PublishedTerms

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
        published: somebody else printed the numbers; else they were enumerated for the file.
    """

    id: str
    lattice: str
    object: str
    quantity: str
    definition: str
    values: Mapping[Place, int]
    source: str
    sequence: str
    published: bool

    def terms(self) -> dict[int, int]:
        """Full values by index; the statistic of a two-index table is summed out."""
        sums: dict[int, int] = {}
        for place, value in self.values.items():
            sums[place[0]] = sums.get(place[0], 0) + value
        return sums


class Reached(NamedTuple):
    """The greatest length to which every term of a table agrees; its id, its citation, whether it is published."""

    n: int
    table: str
    cite: str
    published: bool


@dataclass(frozen=True)
class Agreement:
    """How the numbers of a series stand to the published ones.

    Attributes:
        reached: for each table with which the first terms agree, how far.
        disagreement: one line on the first length at which they differ, or None.
    """

    reached: tuple[Reached, ...]
    disagreement: str | None = None

    def line(self) -> str:
        """One line for people."""
        if self.disagreement is not None:
            return self.disagreement
        kinds = (("published values", True), ("tables enumerated for this program", False))
        parts = ((words, self._parts(published)) for words, published in kinds)
        return "agrees with " + "; and with ".join(f"{words} {told}" for words, told in parts if told)

    def _parts(self, published: bool) -> str:
        chosen = sorted((r for r in self.reached if r.published == published), key=lambda r: -r.n)
        return ", ".join(f"to n={r.n} ({r.cite})" for r in chosen)


@cache
def tables() -> tuple[PublishedTable, ...]:
    """All published tables, in the order of the files."""
    return tuple(table for name in TABLE_FILES for table in tables_of(f"{name}.toml").values())


def compare(table: CoefficientTable) -> Agreement | None:
    """Compare the final terms of a table with all published ones; None where there are none.

    Counts, joint counts and moments are compared. Where a table is refined, tables that are not so are held
    against its sums.
    """
    from fleetcount.trust.matching import for_series

    reached: list[Reached] = []
    differing: list[tuple[int, str]] = []
    for published in for_series(table.series):
        agrees_to, wrong = _compared(table, published)
        if agrees_to is not None:
            of = published.table
            reached.append(Reached(agrees_to, of.id, published.cite, of.published))
        if wrong is not None:
            differing.append(wrong)
    if not reached and not differing:
        return None
    return Agreement(tuple(reached), min(differing, key=lambda one: one[0])[1] if differing else None)


def _compared(
    table: CoefficientTable, published: PublishedTerms
) -> tuple[int | None, tuple[int, str] | None]:
    """The last length before the first disagreement, and that length with a line on it."""
    if table.final is None:
        return None, None
    counted, terms, agrees_to = published.counted(table.sums), published.terms, None
    lengths = {place[0] for place in terms}
    for n in sorted(n for n in lengths if table.least <= n <= table.final):
        for place in sorted(_places_of(n, terms) | _places_of(n, counted)):
            count, value = counted.get(place, 0), published.units * terms.get(place, 0)
            if count != value:
                what = f"{published.what} of length {n}{published.at(place)}"
                line = (
                    f"{table.series.title()}: the {what} is {count}, published is {value} ({published.cite})"
                )
                return agrees_to, (n, line)
        agrees_to = n
    return agrees_to, None


def _places_of(n: int, values: Mapping[Place, int]) -> set[Place]:
    return {place for place in values if place[0] == n}


@cache
def tables_of(file: str) -> dict[str, PublishedTable]:
    """The tables of a data file, by id."""
    return {entry["id"]: _table(entry) for entry in document(file)["table"]}


def _table(entry: Mapping[str, Any]) -> PublishedTable:
    words = {key: entry[key] for key in ("id", "lattice", "object", "quantity", "definition", "source")}
    times = entry.get("multiplier", 1)
    return PublishedTable(
        **words,
        values={place: times * int(value) for place, value in _values(entry)},
        sequence=entry.get("sequence", ""),
        published=entry["retrieved"] != "own enumeration",
    )


def _values(entry: Mapping[str, Any]) -> Iterator[tuple[Place, int | str]]:
    if "rows" in entry:
        for row in entry["rows"]:
            yield from (((row["n"], row["first"] + j), value) for j, value in enumerate(row["values"]))
    else:
        first, step = entry["first"], entry["step"]
        yield from (((first + i * step,), value) for i, value in enumerate(entry["values"]))


@cache
def document(file: str) -> dict[str, Any]:
    """A data file, parsed."""
    text = files("fleetcount.trust").joinpath("data", file).read_text(encoding="utf-8")
    return tomllib.loads(text)
