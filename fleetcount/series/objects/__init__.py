"""The objects that are counted: one small module each, with its rule of avoidance and of ending.

A new object is one such module with a `RULE`, added to the list below. Where it avoids or ends in a way that is not
there yet, `rule.py` names it, the twin says it plainly, and the kernels of the methods that can count it learn it.
"""

from __future__ import annotations

import difflib

from fleetcount.errors import SeriesError
from fleetcount.series.objects import (
    bridge,
    closed_trail,
    neighbour_avoiding,
    polygon,
    trail,
    trapped,
    walk,
)
from fleetcount.series.objects.rule import CountedObject

OBJECTS: dict[str, CountedObject] = {
    module.RULE.name: module.RULE
    for module in (walk, polygon, trail, closed_trail, neighbour_avoiding, bridge, trapped)
}

__all__ = ["OBJECTS", "CountedObject", "find_object"]


def find_object(name: str) -> CountedObject:
    """The object of that name, or an error with near matches."""
    if name in OBJECTS:
        return OBJECTS[name]
    near = difflib.get_close_matches(name, OBJECTS, n=2, cutoff=0.5)
    mend = f"did you mean {' or '.join(near)}?" if near else f"known objects: {', '.join(OBJECTS)}"
    raise SeriesError(f"unknown object {name!r}", mend=mend)
