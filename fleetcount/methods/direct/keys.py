"""Keys of direct units: start site, then the arms of the steps taken so far.

`0:` is every object from site 0, `0:0.3.1` those that begin with the arms 0, 3, 1. An arm is numbered by its place
in `Lattice.arms`, that is by the canonical definition, never by a patch, so a key means the same at every reach.
`0/least:1.3` is a polygon whose least site, in the order of positions, is its root.
"""

from __future__ import annotations

import re
from typing import NamedTuple

from fleetcount.errors import InputError

_FORM = re.compile(r"(\d{1,6})(/least)?:((?:\d{1,3}(?:\.\d{1,3})*)?)", re.ASCII)


class Prefix(NamedTuple):
    """A start site, whether all other sites must be greater than it, and the arms taken."""

    start: int
    least: bool
    arms: tuple[int, ...]

    def key(self) -> str:
        mark = "/least" if self.least else ""
        return f"{self.start}{mark}:{'.'.join(map(str, self.arms))}"

    def child(self, arm: int) -> Prefix:
        return self._replace(arms=(*self.arms, arm))


def parse(key: str) -> Prefix:
    """The prefix of a key; a prefix has one key only, so zeros in front are refused."""
    match = _FORM.fullmatch(key)
    if match is not None:
        start, least, arms = match.groups()
        prefix = Prefix(int(start), least is not None, tuple(map(int, arms.split("."))) if arms else ())
        if prefix.key() == key:
            return prefix
    raise InputError("not the key of a direct unit", where=repr(key[:80]), mend="a key looks like 0:0.3.1")
