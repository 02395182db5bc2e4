"""What a count is refined by. A tally's place is the length, then the values of each statistic."""

from __future__ import annotations

import difflib
import re
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from fleetcount.errors import SeriesError
from fleetcount.lattice.model import Lattice
from fleetcount.series.forms import Form, parse_vector, same_direction

if TYPE_CHECKING:
    from fleetcount.series.objects import CountedObject
    from fleetcount.series.region import Wall

MEANINGS = {
    "contacts": "pairs of visited sites that the lattice joins (in either sense) and the object does not",
    "visits": "visited sites other than the start in the surface of wall 1; visits:K wall K "
    "(by their forms, the greatest first: wall 1 of a slab is the lower one), visits:any all walls; "
    "for polygons all sites count",
    "turns": "interior positions whose two step vectors are not positive multiples of each other; cyclic for polygons",
    "steps": "steps:1,0 - steps along a direction given in cell coordinates, in either sense",
    "span": "span:1,0 - greatest less least value along a direction, in units of its least spacing",
    "height": "height of the end above the start, in layers",
    "area": "absolute area that a polygon encloses, in units of the cell's area over a printed denominator",
    "revisits": "sites that a trail passes more than once",
    "end": "the end itself, in cell coordinates relative to the start's cell, then the number of its site",
}
VERSIONS = dict.fromkeys(MEANINGS, 1)


@dataclass(frozen=True, order=True)
class Statistic:
    """A statistic with its argument: a wall's number (0: any), or a direction.

    `name` as typed without the argument.
    """

    name: str
    wall: int = -1
    direction: Form = ()

    def canonical(self) -> list[Any]:
        """As it enters the digest of a series."""
        return [self.name, VERSIONS[self.name], self.wall, list(self.direction)]

    def text(self) -> str:
        """As it is typed, and the heading of its column."""
        if self.name == "visits":
            return {1: "visits", 0: "visits:any"}.get(self.wall, f"visits:{self.wall}")
        return f"{self.name}:{','.join(map(str, self.direction))}" if self.direction else self.name

    def columns(self, lattice: Lattice) -> tuple[str, ...]:
        """Headings of its columns in a table: one, but for the end."""
        if self.name != "end":
            return (self.text(),)
        return (*(f"x{i + 1}" for i in range(lattice.periods)), "site")


def parse(text: str, lattice: Lattice) -> Statistic:
    """The statistic of such a text."""
    name, _, argument = text.partition(":")
    if name not in MEANINGS:
        near = difflib.get_close_matches(name, MEANINGS, n=2, cutoff=0.5)
        mend = f"did you mean {' or '.join(near)}?" if near else f"known statistics: {', '.join(MEANINGS)}"
        raise SeriesError(f"unknown statistic {text!r}", where="--by", mend=mend)
    if name in ("steps", "span"):
        return Statistic(name, direction=_sense(parse_vector(argument, lattice, f"--by {text}")))
    if name == "visits":
        if argument not in ("", "any") and not re.fullmatch("[1-9][0-9]?", argument, re.ASCII):
            raise SeriesError(
                f"{argument!r} is no wall", where=f"--by {text}", mend="write visits:2 or visits:any"
            )
        return Statistic(name, wall=0 if argument == "any" else int(argument or 1))
    if argument:
        raise SeriesError(f"{name} takes no argument", where=f"--by {text}")
    return Statistic(name)


def _sense(direction: Form) -> Form:
    """Of a direction and its opposite the one that begins with a positive number; both mean the same here."""
    first = next(x for x in direction if x)
    return direction if first > 0 else tuple(-x for x in direction)


def refusal(one: Statistic, lattice: Lattice, rule: CountedObject, walls: Sequence[Wall]) -> str | None:
    """Why a statistic makes no sense for an object on a lattice in a region, or None."""
    if one.name == "visits" and not walls:
        return "visits need a wall: give a --region"
    if one.name == "visits" and one.wall > len(walls):
        return f"there are only {len(walls)} walls"
    if one.name == "revisits" and rule.avoids != "edges":
        return f"a {rule.name} passes no site twice"
    if one.name in ("height", "end") and rule.closed:
        return f"a {rule.name} has no end"
    if one.name == "area":
        return _area_refusal(lattice, rule)
    if one.name == "turns" and _always_turns(lattice):
        return "every step turns on this lattice"
    return None


def _area_refusal(lattice: Lattice, rule: CountedObject) -> str | None:
    if rule.name != "polygon":
        return "only polygons enclose an area"
    if lattice.dimension != 2:
        return "area needs two dimensions"
    if lattice.metric_is == "drawing":
        return "the lattice is given as a drawing, in which areas mean nothing"
    return "edges of this lattice cross each other" if _edges_cross(lattice) else None


def _always_turns(lattice: Lattice) -> bool:
    """Whether no step can be followed by one in its own direction."""
    return not any(
        same_direction(lattice.step(a), lattice.step(b)) for a in lattice.arcs for b in lattice.arms[a.target]
    )


def _edges_cross(lattice: Lattice) -> bool:
    """Whether two edges of a lattice in two dimensions cross or overlap away from their ends."""
    reach = 2 + max((abs(c) for arc in lattice.arcs for c in arc.cell), default=0)
    cells = range(-reach, reach + 1)
    shifts = [
        (i, j if lattice.periods == 2 else 0)
        for i in cells
        for j in (cells if lattice.periods == 2 else (0,))
    ]
    segments = [(lattice.positions[a.source], lattice.step(a)) for a in lattice.arcs]
    return any(
        _cross((p, u), (tuple(x + lattice.scale * s for x, s in zip(q, shift, strict=True)), v))
        for i, (p, u) in enumerate(segments)
        for q, v in segments[i:]
        for shift in shifts
    )


def _cross(one: tuple[Sequence[int], Sequence[int]], other: tuple[Sequence[int], Sequence[int]]) -> bool:
    (p, u), (q, v) = one, other
    area = u[0] * v[1] - u[1] * v[0]
    w = (q[0] - p[0], q[1] - p[1])
    if area == 0:
        return _overlap(p, u, q, v, w)
    s, t = (w[0] * v[1] - w[1] * v[0]) * area, (w[0] * u[1] - w[1] * u[0]) * area
    inside_s, inside_t = 0 < s < area * area, 0 < t < area * area
    ends_s, ends_t = 0 <= s <= area * area, 0 <= t <= area * area
    return (inside_s and ends_t) or (inside_t and ends_s)


def _overlap(
    p: Sequence[int], u: Sequence[int], q: Sequence[int], v: Sequence[int], w: Sequence[int]
) -> bool:
    """Whether two parallel segments share more than an end, unless they are the same edge in one or the other sense."""
    if w[0] * u[1] - w[1] * u[0]:
        return False
    length = u[0] * u[0] + u[1] * u[1]
    ends = sorted((w[0] * u[0] + w[1] * u[1], (w[0] + v[0]) * u[0] + (w[1] + v[1]) * u[1]))
    if ends == [0, length]:
        return False
    return ends[0] < length and ends[1] > 0
