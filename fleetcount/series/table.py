"""The coefficient table: the merged result, in the forms people and machines read."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable
from dataclasses import dataclass, replace
from typing import Any

from fleetcount.errors import InputError
from fleetcount.series import canonical, layout, polynomials
from fleetcount.series.area import area_unit
from fleetcount.series.definition import Series
from fleetcount.series.tally import Place, Tally

FORMAT = 1

Cell = tuple[Place, tuple[int, ...]]
"""Length and statistics, then the count and one number a moment."""


@dataclass(frozen=True)
class CoefficientTable:
    """Exact terms of a series.

    Attributes:
        final: greatest length up to which every term is final; None when no term is.
        sums: the final terms, and nothing else, by place.
        so_far: partial sums of the lengths beyond `final`, where they were asked for.
        complete: the reading with the greatest reach is finished.
        chain: head of the ledger's chain of checksums for this series.
        divisor: what each printed number is to be divided by.
    """

    series: Series
    final: int | None
    sums: Tally
    divisor: int
    complete: bool
    chain: str
    so_far: Tally | None = None

    @property
    def columns(self) -> tuple[str, ...]:
        """Headings of `rows()`: length, statistics, count, moments."""
        return self.series.columns

    @property
    def least(self) -> int:
        """The least length that the object can have."""
        return self.series.rule.least_length(self.series.lattice)

    @property
    def denominator(self) -> int:
        """What each moment is to be divided by, besides the divisor."""
        return self.series.denominator

    @property
    def area_denominator(self) -> int | None:
        """What areas are to be divided by to have them in areas of the cell; None where there are none."""
        named = any(one.name == "area" for one in self.series.statistics)
        return area_unit(self.series.lattice).denominator if named else None

    def counts(self) -> dict[int, int]:
        """Final counts by length, statistics summed out, from the least possible length on, zeros included."""
        known = self.sums.counts()
        return {n: known.get(n, 0) for n in self._lengths()}

    def moment(self, name: str) -> dict[int, int]:
        """A moment by length, statistics summed out, to be divided by `denominator`."""
        if name not in self.series.moments:
            mend = f"it has {', '.join(self.series.moments) or 'none'}"
            raise InputError(f"no moment {name!r} in this table", where=self.series.title(), mend=mend)
        column = 1 + self.series.moments.index(name)
        sums = dict.fromkeys(self._lengths(), 0)
        for place, values in self.sums.sorted_rows():
            sums[place[0]] += values[column]
        return sums

    def __getitem__(self, n: int) -> int:
        """The final count of length n (of one cell, or of one start site, see `divisor`)."""
        if self.final is None or not 0 <= n <= self.final:
            raise InputError(f"no final term of length {n}", mend=f"final so far: {self._reach()}")
        return self.counts().get(n, 0)

    def cut(self, to: int) -> CoefficientTable:
        """The table up to a length; asking beyond its reach is an error that says how far it goes."""
        if to < 0:
            raise InputError(f"length {to} is negative", where=self.series.title(), mend="lengths begin at 0")
        if self.final is None or to > self.final:
            raise InputError(
                f"the term of length {to} is not final",
                where=self.series.title(),
                mend=f"final so far: {self._reach()}",
            )
        kept = Tally(self.sums.width, {p: row for p, row in self.sums.rows.items() if p[0] <= to})
        return replace(self, final=to, sums=kept, so_far=None)

    def per_site(self) -> CoefficientTable:
        """The same numbers with the divisor that makes them the number per site instead of per cell.

        Raises:
            InputError: a closed object in a region.
        """
        series = self.series
        if series.rule.closed and series.walls:
            raise InputError(
                "in a region nothing is counted per cell", where="--per-site", mend="leave it out"
            )
        return replace(self, divisor=len(series.lattice.sites)) if series.rule.closed else self

    def _reach(self) -> str:
        return "nothing" if self.final is None else f"lengths {self.least} to {self.final}"

    def _lengths(self) -> range:
        return range(self.least, -1 if self.final is None else self.final + 1)

    def cells(self) -> list[Cell]:
        """The final terms in order; joint tables leave out cells of zeros, others have one for every length."""
        if self.series.statistics:
            return list(self.sums.sorted_rows())
        zeros = (0,) * self.series.width
        return [((n,), self.sums.rows.get((n,), zeros)) for n in self._lengths()]

    def partial_cells(self) -> list[Cell]:
        """The sums so far of lengths that are not final."""
        found = [] if self.so_far is None else self.so_far.sorted_rows()
        return [(place, values) for place, values in found if self.final is None or place[0] > self.final]

    def rows(self) -> list[list[Any]]:
        """One row a cell: `[n, statistic..., "count", "moment"...]`, sums as decimal strings."""
        return _listed(self.cells())

    def partial_rows(self) -> list[list[Any]]:
        """The same of what is not final, with the sums so far."""
        return _listed(self.partial_cells())

    def document(self) -> dict[str, Any]:
        """The table as a JSON document; exact integers are decimal strings."""
        document: dict[str, Any] = {
            "format": FORMAT,
            "series": {
                **self.series.written(),
                "definition": self.series.canonical(),
                "digest": self.series.digest,
            },
            "final": self.final,
            "columns": list(self.columns),
            "rows": self.rows(),
            "divisor": str(self.divisor),
            "complete": self.complete,
            "chain": self.chain,
        }
        if self.series.moments:
            document["denominator"] = str(self.denominator)
        if self.area_denominator is not None:
            document["area_denominator"] = str(self.area_denominator)
        if self.so_far is not None:
            document["so_far"] = self.partial_rows()
        return document

    def json(self) -> str:
        """The document as canonical JSON."""
        return canonical.text(self.document())

    def csv(self) -> str:
        """Comma-separated values with a heading."""
        out = io.StringIO()
        writer = csv.writer(out, lineterminator="\n")
        writer.writerow(self.columns)
        writer.writerows(self.rows())
        return out.getvalue()

    def plain(self) -> str:
        """The columns separated by blanks, without a heading: what computer algebra systems and plotters read."""
        return "".join(f"{' '.join(map(str, row))}\n" for row in self.rows())

    def text(self, width: int = layout.WIDTH) -> str:
        """A table for people, in lines of at most `width` characters where its numbers allow it."""
        return layout.text(self, width)

    def polynomials(self, quantity: str = "count") -> dict[int, str]:
        """For each length the generating polynomial of a count or moment: `28 + 8*c`."""
        return polynomials.polynomials(self, quantity)

    def polynomial_text(self) -> str:
        """All generating polynomials, one a line after its length, with comment lines that name the variables."""
        return polynomials.text(self)

    def __str__(self) -> str:
        return self.text()


def _listed(cells: Iterable[Cell]) -> list[list[Any]]:
    return [[*place, *map(str, values)] for place, values in cells]
