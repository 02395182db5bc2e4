"""The tally: a small table of exact integers, added up and scaled without ever being rounded."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field

from fleetcount.errors import TrustError
from fleetcount.series import canonical

Place = tuple[int, ...]
"""Where a row stands: the length, then the value of each statistic."""


@dataclass
class Tally:
    """Exact partial sums by place. `rows[place]` holds the count, then one integer a moment.

    Python integers throughout; a row of zeros is the same as no row.
    """

    width: int = 1
    rows: dict[Place, tuple[int, ...]] = field(default_factory=dict)

    @classmethod
    def of_counts(cls, counts: Mapping[int, int]) -> Tally:
        """A plain tally by length: `{length: count}`."""
        return cls(1, {(n,): (c,) for n, c in counts.items() if c})

    def add(self, other: Tally, factor: int = 1) -> None:
        """Add `factor` times another tally to this one, in place."""
        if other.width != self.width:
            raise TrustError(f"tallies of {self.width} and {other.width} sums a row do not add up")
        rows = self.rows
        for place, values in other.rows.items():
            old = rows.get(place)
            if old is None:
                rows[place] = tuple([factor * v for v in values])
            else:
                rows[place] = tuple([o + factor * v for o, v in zip(old, values, strict=True)])

    def __add__(self, other: Tally) -> Tally:
        total = Tally(self.width, dict(self.rows))
        total.add(other)
        return total

    def __mul__(self, factor: int) -> Tally:
        return Tally(self.width, {p: tuple(factor * v for v in row) for p, row in self.rows.items()})

    def __eq__(self, other: object) -> bool:
        if not isinstance(other, Tally):
            return NotImplemented
        return self.width == other.width and list(self.sorted_rows()) == list(other.sorted_rows())

    __hash__ = None  # type: ignore[assignment]  # a tally is added to in place

    def sorted_rows(self) -> Iterable[tuple[Place, tuple[int, ...]]]:
        """The rows that are not all zero, by place."""
        return ((p, self.rows[p]) for p in sorted(self.rows) if any(self.rows[p]))

    def counts(self) -> dict[int, int]:
        """Counts by length, statistics summed out."""
        sums: dict[int, int] = {}
        for place, values in self.sorted_rows():
            sums[place[0]] = sums.get(place[0], 0) + values[0]
        return sums

    def canonical(self) -> list[list[str]]:
        """Rows as canonical JSON takes them: place and sums, each number as decimal text."""
        return [[*map(str, place), *map(str, values)] for place, values in self.sorted_rows()]

    @classmethod
    def from_canonical(cls, rows: Iterable[Iterable[str]], width: int = 1) -> Tally:
        """The tally of `canonical()` rows whose last `width` entries are sums."""
        table: dict[Place, tuple[int, ...]] = {}
        for row in rows:
            numbers = tuple(map(int, row))
            table[numbers[:-width]] = numbers[-width:]
        return cls(width, table)

    def text(self) -> str:
        """Canonical text."""
        return canonical.text(self.canonical())

    def digest(self) -> str:
        """SHA-256 of the canonical text."""
        return canonical.digest(self.text())
