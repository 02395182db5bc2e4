"""Keys of direct units: start site, then the arms of the steps taken so far.

`0:` is every object from site 0, `0:0.3.1` those that begin with the arms 0, 3, 1. An arm is numbered by its place
in `Lattice.arms`, that is by the canonical definition, never by a patch, so a key means the same at every reach.
`0/least:1.3` is a polygon whose least site, in the order of positions, is its root; `0@0,2/least:1.3` one in a region,
whose root lies in the cell 0,2.
"""

from __future__ import annotations

import re
from typing import NamedTuple

from fleetcount.errors import InputError
from fleetcount.lattice.model import Cell

_FORM = re.compile(r"(\d{1,6})(@-?\d{1,9}(?:,-?\d{1,9})*)?(/least)?:((?:\d{1,3}(?:\.\d{1,3})*)?)", re.ASCII)


class Prefix(NamedTuple):
    """A start site, whether all other sites must be greater than it, the arms taken, and the cell of the start where it
    matters, in a region that closed objects are counted in up to translations."""

    start: int
    least: bool
    arms: tuple[int, ...]
    cell: Cell = ()

    def key(self) -> str:
        mark = "/least" if self.least else ""
        place = f"@{','.join(map(str, self.cell))}" if self.cell else ""
        return f"{self.start}{place}{mark}:{'.'.join(map(str, self.arms))}"

    def root(self) -> Prefix:
        """The root that the prefix is below."""
        return self._replace(arms=())

    def child(self, arm: int) -> Prefix:
        return self._replace(arms=(*self.arms, arm))


def parse(key: str) -> Prefix:
    """The prefix of a key; a prefix has one key only, so zeros in front are refused."""
    match = _FORM.fullmatch(key)
    if match is not None:
        start, place, least, arms = match.groups()
        taken = tuple(map(int, arms.split("."))) if arms else ()
        cell = tuple(map(int, place[1:].split(","))) if place else ()
        prefix = Prefix(int(start), least is not None, taken, cell)
        if prefix.key() == key:
            return prefix
    raise InputError("not the key of a direct unit", where=repr(key[:80]), mend="a key looks like 0:0.3.1")
