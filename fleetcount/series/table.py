"""The coefficient table: the merged result, in the forms people and machines read."""

from __future__ import annotations

import csv
import io
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from fleetcount.errors import InputError
from fleetcount.series import canonical
from fleetcount.series.definition import Series
from fleetcount.series.tally import Tally

FORMAT = 1


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

    columns: tuple[str, ...] = ("n", "count")

    @property
    def least(self) -> int:
        """The least length that the object can have."""
        return self.series.rule.least_length(self.series.lattice)

    def counts(self) -> dict[int, int]:
        """Final counts by length, from the least possible length on, zeros included."""
        known = self.sums.counts()
        return {n: known.get(n, 0) for n in self._lengths()}

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
        return CoefficientTable(self.series, to, kept, self.divisor, self.complete, self.chain)

    def per_site(self) -> CoefficientTable:
        """The same numbers with the divisor that makes them the number per site instead of per cell."""
        sites = len(self.series.lattice.sites) if self.series.rule.closed else self.divisor
        return CoefficientTable(
            self.series, self.final, self.sums, sites, self.complete, self.chain, self.so_far
        )

    def _reach(self) -> str:
        return "nothing" if self.final is None else f"lengths {self.least} to {self.final}"

    def _lengths(self) -> range:
        return range(self.least, -1 if self.final is None else self.final + 1)

    def rows(self) -> list[list[Any]]:
        """One row a length: `[n, "count"]`."""
        return [[n, str(count)] for n, count in self.counts().items()]

    def partial_rows(self) -> list[list[Any]]:
        """One row for each length that is not final, with the sum so far."""
        if self.so_far is None:
            return []
        return [
            [n, str(count)]
            for n, count in self.so_far.counts().items()
            if self.final is None or n > self.final
        ]

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
        """Two columns, length and term, without a heading: what computer algebra systems and plotters read."""
        return "".join(f"{n} {count}\n" for n, count in self.rows())

    def text(self) -> str:
        """A table for people."""
        lines = [self.series.title()]
        if self.divisor != 1:
            lines[0] += f" (sums over the {self.divisor} sites of a cell; divide by {self.divisor})"
        rows = self.rows()
        marked = [(n, f"{count} so far") for n, count in self.partial_rows()]
        if not rows and not marked:
            return f"{lines[0]}\n  no final term yet\n"
        lines += _aligned([("n", "count"), *rows, *marked])
        return "\n".join(lines) + "\n"

    def __str__(self) -> str:
        return self.text()


def _aligned(rows: Sequence[Sequence[object]]) -> list[str]:
    left = max(len(str(row[0])) for row in rows)
    right = max(len(str(row[1]).removesuffix(" so far")) for row in rows)
    lines = []
    for n, count in rows:
        number = str(count).removesuffix(" so far")
        mark = " so far" if number != str(count) else ""
        lines.append(f"  {n!s:>{left}}  {number:>{right}}{mark}")
    return lines
