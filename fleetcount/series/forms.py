"""Integer forms and directions on cell coordinates: what walls, heights and steps are measured with."""

from __future__ import annotations

import math
from collections.abc import Sequence
from fractions import Fraction
from itertools import combinations

from fleetcount.errors import SeriesError
from fleetcount.lattice.model import Lattice

Form = tuple[int, ...]
"""`dimension` integers; its value at a place is the sum of their products with the cell coordinates."""

GREATEST = 1024
"""No entry of a form or a direction is larger: what is built from it stays far within 64 bits."""


def parse_vector(text: str, lattice: Lattice, where: str) -> Form:
    """`1,0,-1` as `dimension` integers, not all zero and none too large."""
    try:
        return check_vector([int(x) for x in text.split(",")], lattice, where)
    except ValueError:
        raise SeriesError(
            f"{text!r} is no list of whole numbers", where=where, mend="write for example 1,0"
        ) from None


def check_vector(entries: Sequence[int], lattice: Lattice, where: str) -> Form:
    """The entries as a tuple, checked."""
    vector = tuple(entries)
    if len(vector) != lattice.dimension:
        raise SeriesError(
            f"{len(vector)} numbers, but the lattice {lattice.name} has {lattice.dimension} coordinates",
            where=where,
        )
    if not any(vector) or max(map(abs, vector)) > GREATEST:
        raise SeriesError(
            "all zero, or too large", where=where, mend=f"use whole numbers up to {GREATEST}, not all 0"
        )
    return vector


def value(form: Form, lattice: Lattice, site: int, cell: Sequence[int] = ()) -> Fraction:
    """The value of a form at a site of a cell (default: cell 0)."""
    at = sum((f * x for f, x in zip(form, lattice.sites[site].at, strict=True)), Fraction(0))
    return at + sum(f * c for f, c in zip(form, cell, strict=False))


def spacing(form: Form, lattice: Lattice) -> Fraction:
    """The least distance between values of a form: all differences between sites are multiples of it."""
    first = value(form, lattice, 0)
    steps = [Fraction(f) for f in form[: lattice.periods]]
    steps += [value(form, lattice, site) - first for site in range(len(lattice.sites))]
    return rational_gcd(steps)


def rational_gcd(numbers: Sequence[Fraction]) -> Fraction:
    """The greatest rational of which all are integer multiples; 0 if all are 0."""
    scale = math.lcm(*(x.denominator for x in numbers)) if numbers else 1
    return Fraction(math.gcd(*(int(x * scale) for x in numbers)), scale)


def direction_form(direction: Form, lattice: Lattice) -> Form:
    """The primitive form whose value grows along a direction: the metric applied to it."""
    image = [sum(g * x for g, x in zip(row, direction, strict=True)) for row in lattice.gram]
    divisor = math.gcd(*image)
    return tuple(x // divisor for x in image)


def cross(a: Sequence[int], b: Sequence[int]) -> int:
    """The two-dimensional cross product of two vectors in cell coordinates: their area in units of the cell's."""
    return a[0] * b[1] - a[1] * b[0]


def dot(lattice: Lattice, a: Sequence[int], b: Sequence[int]) -> int:
    """The inner product of two vectors in units of 1 over (scale squared times metric_scale), if they are in units of
    1/scale."""
    return sum(x * g * y for x, row in zip(a, lattice.gram, strict=True) for g, y in zip(row, b, strict=True))


def same_direction(a: Sequence[int], b: Sequence[int]) -> bool:
    """Whether two vectors are positive multiples of each other."""
    return parallel(a, b) and sum(x * y for x, y in zip(a, b, strict=True)) > 0


def parallel(a: Sequence[int], b: Sequence[int]) -> bool:
    """Whether two vectors are multiples of each other."""
    return all(a[i] * b[j] == a[j] * b[i] for i, j in combinations(range(len(a)), 2))
