"""Exact sums over configurations: squared distances of ends, of pairs of sites, of sites from the start."""

from __future__ import annotations

import difflib
import math
from collections.abc import Sequence
from fractions import Fraction

from fleetcount.errors import SeriesError
from fleetcount.lattice.model import Lattice
from fleetcount.series.forms import dot, rational_gcd, spacing
from fleetcount.series.objects.rule import CountedObject

MEANINGS = {
    "end2": "squared distance of the end from the start, |r_n - r_0|^2",
    "height2": "the part of end2 across the surface, along the direction in which the height grows",
    "along2": "the part of end2 along the surface",
    "gyration2": "sum over pairs i<j of |r_i - r_j|^2: divide by (n+1)^2 (polygons: n^2) and the count for R_g^2",
    "monomer2": "sum over i of |r_i - r_0|^2: divide by (n+1) and the count for the mean over monomers",
}
VERSIONS = dict.fromkeys(MEANINGS, 1)


def find(name: str) -> str:
    """The moment of that name, or an error with near matches."""
    if name in MEANINGS:
        return name
    near = difflib.get_close_matches(name, MEANINGS, n=2, cutoff=0.5)
    mend = f"did you mean {' or '.join(near)}?" if near else f"known moments: {', '.join(MEANINGS)}"
    raise SeriesError(f"unknown moment {name!r}", where="--moment", mend=mend)


def refusal(name: str, lattice: Lattice, rule: CountedObject) -> str | None:
    """Why a moment makes no sense for an object on a lattice, or None."""
    if lattice.metric_is == "drawing":
        return f"the lattice {lattice.name} is given as a drawing, in which distances mean nothing"
    if rule.closed and name != "gyration2":
        return f"a {rule.name} has no {'end' if name != 'monomer2' else 'start'} for {name}"
    return None


def denominator(lattice: Lattice, moments: Sequence[str]) -> int:
    """The least number that makes all these moments whole, for every configuration; printed with the table."""
    unit = Fraction(lattice.scale**2 * lattice.metric_scale)
    products = [Fraction(dot(lattice, lattice.step(a), lattice.step(a))) for a in lattice.arcs]
    products += [
        2 * Fraction(dot(lattice, lattice.step(a), lattice.step(b)))
        for a in lattice.arcs
        for b in lattice.arcs
    ]
    wanted = [rational_gcd(products) / unit] if set(moments) - {"height2"} else []
    if {"height2", "along2"} & set(moments):
        wanted.append(height_unit(lattice))
    return math.lcm(*(x.denominator for x in wanted)) if wanted else 1


def height_unit(lattice: Lattice) -> Fraction:
    """The squared distance of two layers: height2 of a site is its height squared, times this."""
    inverse = _solve(lattice.metric, [Fraction(x) for x in lattice.up])
    squared_norm = sum((x * y for x, y in zip(lattice.up, inverse, strict=True)), Fraction(0))
    return spacing(lattice.up, lattice) ** 2 / squared_norm


def _solve(matrix: Sequence[Sequence[Fraction]], right: Sequence[Fraction]) -> list[Fraction]:
    """The solution of a regular system, by elimination in exact rationals."""
    rows = [[*row, r] for row, r in zip(matrix, right, strict=True)]
    for i in range(len(rows)):
        pivot = next(k for k in range(i, len(rows)) if rows[k][i])
        rows[i], rows[pivot] = rows[pivot], rows[i]
        rows[i] = [x / rows[i][i] for x in rows[i]]
        for k in range(len(rows)):
            if k != i:
                rows[k] = [x - rows[k][i] * y for x, y in zip(rows[k], rows[i], strict=True)]
    return [row[-1] for row in rows]
