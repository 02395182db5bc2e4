"""Where an object may go: walls, each an integer form and the least value that is allowed.

A region is written in the user's coordinates and kept relative to the cell of the start, so that the same region
around the same start is the same series wherever it was written.
"""

from __future__ import annotations

import math
import operator
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING, Any, Literal

from fleetcount.errors import SeriesError
from fleetcount.lattice.model import Cell, Lattice
from fleetcount.series.forms import Form, check_vector, spacing, value

if TYPE_CHECKING:
    import numpy as np

    Array = np.ndarray[Any, np.dtype[Any]]

SHORTHANDS = "half, quarter, orthant, wedge, slab:W, box:A,B,..., tube:A,..."
_FARTHEST = 10**6
_GREATEST_BOUND = 10**10
"""Beyond what forms are at any start that can be given, and far within 64 bits."""


@dataclass(frozen=True, order=True)
class Wall:
    """The sites at which `form` is at least `bound`. Its surface is those where it equals `bound`.

    `form` is primitive; `bound` is the least value, not below what was asked for, that the form takes on the lattice.
    """

    form: Form
    bound: Fraction

    def canonical(self) -> list[Any]:
        """As it enters the digest of a series."""
        return [list(self.form), str(self.bound)]

    def text(self) -> str:
        """As people read it, relative to the start's cell: `y >= 0` as `0,1 >= 0`."""
        return f"{','.join(map(str, self.form))} >= {self.bound}"

    def excess(self, lattice: Lattice, site: int, cell: Sequence[int]) -> Fraction:
        """How far a site is above the surface; negative outside."""
        return value(self.form, lattice, site, cell) - self.bound


def wall(lattice: Lattice, form: Form, least: Fraction | int) -> Wall:
    """The wall `form >= least`, reduced."""
    form = check_vector(form, lattice, "region")
    if abs(Fraction(least)) > _GREATEST_BOUND:
        raise SeriesError(
            f"{least} is too far away", where="region", mend=f"use bounds up to {_GREATEST_BOUND}"
        )
    divisor = math.gcd(*form)
    primitive = tuple(f // divisor for f in form)
    asked = Fraction(least) / divisor
    periods = Fraction(math.gcd(*primitive[: lattice.periods]))
    values = [value(primitive, lattice, site) for site in range(len(lattice.sites))]
    if periods:
        bound = min(v + periods * -((v - asked) // periods) for v in values)
    else:
        inside = [v for v in values if v >= asked]
        if not inside:
            raise SeriesError(f"no site lies in the wall {form} >= {least}", where="region")
        bound = min(inside)
    return Wall(primitive, bound)


def region(lattice: Lattice, walls: Iterable[Wall]) -> tuple[Wall, ...]:
    """The walls in their order, of parallel ones the strictest.

    The order is that of the forms, the greatest first: so wall 1 of a slab is the lower one, and the first walls of a
    box are those at 0.
    """
    strictest: dict[Form, Fraction] = {}
    for one in walls:
        strictest[one.form] = max(one.bound, strictest.get(one.form, one.bound))
    return _ordered(Wall(form, bound) for form, bound in strictest.items())


def moved(walls: Iterable[Wall], cell: Cell) -> tuple[Wall, ...]:
    """The walls as seen from another cell."""
    return _ordered(Wall(w.form, w.bound - sum(map(operator.mul, w.form, cell))) for w in walls)


def _ordered(walls: Iterable[Wall]) -> tuple[Wall, ...]:
    return tuple(sorted(walls, key=lambda w: [-f for f in w.form]))


def settled(lattice: Lattice, walls: Sequence[Wall]) -> tuple[Wall, ...]:
    """The same for all regions that are moved copies of each other: where nothing else says where it lies.

    The bounds are taken to the least values, not below 0, that moving by periods can give them, one after another.
    """
    rows = [[w.form[axis] for w in walls] for axis in range(lattice.periods)]
    bounds = [w.bound for w in walls]
    for column in range(len(walls)):
        step = _step_along(rows, column)
        times = bounds[column] // step[column] if step else 0
        bounds = [b - times * s for b, s in zip(bounds, step, strict=True)] if step else bounds
    return tuple(Wall(w.form, bound) for w, bound in zip(walls, bounds, strict=True))


def _step_along(rows: list[list[int]], column: int) -> list[int] | None:
    """By Euclid's algorithm, in place, one row alone keeps an entry in a column; that row, taken out and positive."""
    while True:
        left = sorted((row for row in rows if row[column]), key=lambda row: abs(row[column]))
        if not left:
            return None
        least = left[0]
        if len(left) == 1:
            rows.remove(least)
            return least if least[column] > 0 else [-x for x in least]
        for row in left[1:]:
            times = row[column] // least[column]
            row[:] = [x - times * y for x, y in zip(row, least, strict=True)]


def shorthand(lattice: Lattice, text: str) -> tuple[Wall, ...]:
    """The walls of a name: half, quarter, orthant, wedge, slab:W, box:A,B,..., tube:A,...

    Coordinates are cell coordinates, from the origin of cell 0. half: height at least 0. quarter: the last two
    coordinates at least 0. orthant: all of them. wedge: last at least 0 and at most the first. slab:W: heights 0 to W,
    in layers. box:A,B,...: each coordinate from 0 to its number. tube:A,...: so the first ones, the others free.
    """
    name, _, argument = text.partition(":")
    d = lattice.dimension
    axes = [tuple(int(i == j) for j in range(d)) for i in range(d)]
    if name in ("half", "quarter", "orthant", "wedge"):
        if argument:
            raise SeriesError(f"{name} takes no number", where=f"region {text}")
        if name != "half" and d < 2:
            raise SeriesError(f"{name} needs two dimensions", where=f"lattice {lattice.name}")
        slope = tuple(a - b for a, b in zip(axes[0], axes[-1], strict=True))
        named = {"half": [lattice.up], "quarter": axes[-2:], "orthant": axes, "wedge": [axes[-1], slope]}
        return region(lattice, [wall(lattice, form, 0) for form in named[name]])
    sizes = _sizes(text, argument)
    if name == "slab" and len(sizes) == 1:
        layer = spacing(lattice.up, lattice)
        up, down = lattice.up, tuple(-f for f in lattice.up)
        return region(lattice, [wall(lattice, up, 0), wall(lattice, down, -sizes[0] * layer)])
    if (name == "box" and len(sizes) == d) or (name == "tube" and 0 < len(sizes) < d):
        both = [(axis, tuple(-f for f in axis), size) for axis, size in zip(axes, sizes, strict=False)]
        return region(
            lattice, [w for a, b, size in both for w in (wall(lattice, a, 0), wall(lattice, b, -size))]
        )
    raise SeriesError(
        f"unknown region {text!r} in {d} dimensions", where="--region", mend=f"known: {SHORTHANDS}"
    )


def _sizes(text: str, argument: str) -> list[int]:
    try:
        sizes = [int(x) for x in argument.split(",")] if argument else []
    except ValueError:
        sizes = [-1]
    if any(not 0 <= size <= _FARTHEST for size in sizes):
        raise SeriesError(f"bad numbers in region {text!r}", where="--region", mend=f"known: {SHORTHANDS}")
    return sizes


def shape(lattice: Lattice, walls: Sequence[Wall]) -> Literal["all", "half-space", "strip", "other"]:
    """What closed objects are counted up to: everything, a half-space with the translations along its wall, a slab
    or tube (each wall has a parallel one across) with those that keep it, or anything else, which none may keep.
    """
    if not walls:
        return "all"
    periodic = [w.form[: lattice.periods] for w in walls]
    if len(walls) == 1 and any(periodic[0]):
        return "half-space"
    forms = {w.form for w in walls}
    across = all(tuple(-f for f in form) in forms for form in forms)
    return "strip" if across and _rank(periodic) < lattice.periods else "other"


def _rank(rows: Iterable[Sequence[int]]) -> int:
    """Rank of an integer matrix."""
    left, rank = [[Fraction(x) for x in row] for row in rows], 0
    while left:
        row = left.pop()
        column = next((i for i, x in enumerate(row) if x), None)
        if column is None:
            continue
        rank += 1
        left = [
            [x - other[column] / row[column] * y for x, y in zip(other, row, strict=True)] for other in left
        ]
    return rank


def contains(lattice: Lattice, walls: Sequence[Wall], site: int, cell: Sequence[int]) -> bool:
    """Whether a site of a cell lies in the region."""
    return all(w.excess(lattice, site, cell) >= 0 for w in walls)


def contains_all(lattice: Lattice, walls: Sequence[Wall]) -> Callable[[Array, Array], Array]:
    """The same for arrays: kinds [k] and cells [k, periods] to truth values [k]."""
    import numpy as np

    def inside(kinds: Array, cells: Array) -> Array:
        found = np.ones(len(kinds), dtype=bool)
        for one in walls:
            found &= excesses(lattice, one, kinds, cells) >= 0
        return found

    return inside


def excesses(lattice: Lattice, one: Wall, kinds: Array, cells: Array) -> Array:
    """How far sites are above a wall's surface, in units of the least spacing of its form: int64 [k]."""
    import numpy as np

    unit = spacing(one.form, lattice)
    at = [(value(one.form, lattice, site) - one.bound) / unit for site in range(len(lattice.sites))]
    offsets = np.array([int(x) for x in at], dtype=np.int64)  # whole: the bound is a value of the form
    steps = np.array([int(Fraction(f) / unit) for f in one.form[: lattice.periods]], dtype=np.int64)
    return offsets[kinds] + cells.astype(np.int64) @ steps
