"""What a rule of avoidance and of ending is made of."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from fleetcount.lattice.model import Lattice


@dataclass(frozen=True)
class CountedObject:
    """A rule of avoidance and of ending, by name.

    Attributes:
        name: as typed.
        version: of the definition; part of a series' identity.
        meaning: one line for people.
        closed: comes back to where it began and has no root of its own: counted per cell, not per start site.
        avoids: what must not occur twice: a site, an edge (in either sense; an arc on one-way lattices), or
            "neighbours", where sites that are not consecutive must not be adjacent either.
        ends: where it may end: anywhere, "trapped" where no way leads on, "on top" where no site was higher.
        above_start: every site but the first is higher than the start.
    """

    name: str
    version: int
    meaning: str
    closed: bool = False
    avoids: Literal["sites", "edges", "neighbours"] = "sites"
    ends: Literal["anywhere", "trapped", "on top"] = "anywhere"
    above_start: bool = False

    def least_length(self, lattice: Lattice) -> int:
        """The least length that can occur."""
        if not self.closed:
            return 0
        return 2 if lattice.one_way else 3

    @property
    def plain(self) -> bool:
        """Avoids sites and nothing else, and may end anywhere."""
        return self.avoids == "sites" and self.ends == "anywhere" and not self.above_start
