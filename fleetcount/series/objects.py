"""The objects that are counted, and what each asks of a lattice."""

from __future__ import annotations

import difflib
from dataclasses import dataclass

from fleetcount.errors import SeriesError
from fleetcount.lattice.model import Lattice


@dataclass(frozen=True)
class CountedObject:
    """A rule of avoidance and of ending, by name.

    Attributes:
        name: as typed.
        version: of the definition; part of a series' identity.
        closed: comes back to where it began and has no root of its own: counted per cell, not per start site.
        meaning: one line for people.
    """

    name: str
    version: int
    closed: bool
    meaning: str

    def least_length(self, lattice: Lattice) -> int:
        """The least length that can occur."""
        if not self.closed:
            return 0
        return 2 if lattice.one_way else 3


OBJECTS = {
    known.name: known
    for known in (
        CountedObject("walk", 1, False, "self-avoiding walks from the start site, directed"),
        CountedObject("polygon", 1, True, "self-avoiding polygons, up to lattice translation, per cell"),
    )
}


def find_object(name: str) -> CountedObject:
    """The object of that name, or an error with near matches."""
    if name in OBJECTS:
        return OBJECTS[name]
    near = difflib.get_close_matches(name, OBJECTS, n=2, cutoff=0.5)
    mend = f"did you mean {' or '.join(near)}?" if near else f"known objects: {', '.join(OBJECTS)}"
    raise SeriesError(f"unknown object {name!r}", mend=mend)
