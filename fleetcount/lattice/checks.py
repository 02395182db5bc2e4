"""What a definition must satisfy beyond its form: the metric, the graph, the limits.

The bound for slices in 64 bits. Kernels work with coordinates in units of 1/D and squared lengths in
units of 1/(N D^2), D and N being the common denominators of positions and metric. With a_i the
greatest |coordinate| of an arc along axis i, let

    S = sum over i, j of  a_i |N G_ij| a_j .

No scalar product of two arcs, and no partial sum on the way to it, exceeds S in size, so none between two
vectors of n steps exceeds n^2 S. With S <= 2^24 one squared end-to-end distance of a walk of up to 1024
steps stays below 2^44, and 2^18 of them (2^26 at 64 steps) add up below 2^62: a slice always has room. A
sum over all pairs of sites is at most n^4 S / 2, below 2^47 at 64 steps. Where a slice is chosen its
length follows from S and n by the same law.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from fractions import Fraction

from fleetcount.errors import LatticeError
from fleetcount.lattice.model import Lattice

GREATEST_DIMENSION = 5
GREATEST_SITES = 1024
"""Sites in a cell."""
GREATEST_ARMS = 64
"""Arcs out of a site, and arcs into it."""
GREATEST_CELL = 64
"""Size of an entry of `cell`; it keeps the numbers of cells within 64 bits on patches that fit in memory."""
GREATEST_UP = 1024
GREATEST_STEP = 2**24
"""The bound on S above."""


def check(lattice: Lattice) -> tuple[str, ...]:
    """Check a lattice in canonical form.

    Returns:
        Warnings, one line each.

    Raises:
        LatticeError: naming the file, the entry and the mend.
    """
    _check_metric(lattice)
    _check_span(lattice)
    _check_arms(lattice)
    _check_connected(lattice)
    _check_size(lattice)
    return _warnings(lattice)


def step_bound(lattice: Lattice) -> int:
    """The bound S of this module: no scalar product of two scaled arcs is greater."""
    steps = [lattice.step(arc) for arc in lattice.arcs]
    a = [max(abs(step[i]) for step in steps) for i in range(lattice.dimension)]
    axes = range(lattice.dimension)
    return sum(a[i] * abs(lattice.gram[i][j]) * a[j] for i in axes for j in axes)


def _error(lattice: Lattice, entry: str, what: str, mend: str) -> LatticeError:
    return LatticeError(what, where=f"{lattice.source}, {entry}", mend=mend)


def _check_metric(lattice: Lattice) -> None:
    """Positive definite by Sylvester's criterion: every leading minor is positive."""
    for size in range(1, lattice.dimension + 1):
        if _determinant([row[:size] for row in lattice.metric[:size]]) <= 0:
            what = f"not positive definite: the leading minor of {size} rows is not positive"
            raise _error(
                lattice, "metric", what, "give the scalar products of linearly independent cell vectors"
            )


def _check_span(lattice: Lattice) -> None:
    first = lattice.sites[0].at
    rows = [[b - a for a, b in zip(first, site.at, strict=True)][lattice.periods :] for site in lattice.sites]
    if _rank(rows) < lattice.dimension - lattice.periods:
        what = f"the sites do not fill {lattice.dimension} dimensions"
        raise _error(lattice, "dimension", what, "drop the axes along which nothing happens, or move a site")


def _check_arms(lattice: Lattice) -> None:
    out = [0] * len(lattice.sites)
    into = [0] * len(lattice.sites)
    for arc in lattice.arcs:
        out[arc.source] += 1
        into[arc.target] += 1
    for site, leaving, coming in zip(lattice.sites, out, into, strict=True):
        if leaving == 0:
            what = f"site {site.name!r} has no way out"
            raise _error(lattice, "arcs", what, "add an edge, or an arc from it, or remove the site")
        if max(leaving, coming) > GREATEST_ARMS:
            what = f"site {site.name!r} has {max(leaving, coming)} arms"
            raise _error(lattice, "edges", what, f"at most {GREATEST_ARMS} are possible")


def _check_connected(lattice: Lattice) -> None:
    """The periodic graph is connected if its quotient is, and if the translations around the cycles of the
    quotient generate all periods."""
    offsets = _offsets(lattice)
    missing = [site.name for s, site in enumerate(lattice.sites) if s not in offsets]
    if missing:
        names = ", ".join(missing[:5]) + (", ..." if len(missing) > 5 else "")
        what = f"falls apart: site {lattice.sites[0].name} is not joined to {names}"
        raise _error(lattice, "edges", what, "add the edges that join them, or define one part alone")
    rows = []
    for arc in lattice.arcs:
        terms = zip(offsets[arc.source], arc.cell, offsets[arc.target], strict=True)
        rows.append([a + c - b for a, c, b in terms])
    diagonal = _reduce(rows, lattice.periods)
    if 0 in diagonal:
        what = f"falls apart: nothing runs along {_plural(diagonal.count(0), 'direction')} of the periods"
        raise _error(lattice, "edges", what, "add the missing edges, or lower `periods`")
    pieces = math.prod(diagonal)
    if pieces != 1:
        what = f"falls apart into {pieces} pieces that never meet"
        raise _error(lattice, "edges", what, "define one piece alone, with a smaller cell, or join them")


def _offsets(lattice: Lattice) -> dict[int, tuple[int, ...]]:
    """The cell in which a path from site 0 of cell 0 meets each site, directions forgotten."""
    neighbours: list[list[tuple[int, tuple[int, ...]]]] = [[] for _ in lattice.sites]
    for arc in lattice.arcs:
        neighbours[arc.source].append((arc.target, arc.cell))
        neighbours[arc.target].append((arc.source, tuple(-c for c in arc.cell)))
    offsets = {0: (0,) * lattice.periods}
    queue = [0]
    for site in queue:
        for other, cell in neighbours[site]:
            if other not in offsets:
                offsets[other] = tuple(a + c for a, c in zip(offsets[site], cell, strict=True))
                queue.append(other)
    return offsets


def _check_size(lattice: Lattice) -> None:
    bound = step_bound(lattice)
    if bound > GREATEST_STEP:
        what = f"too large for sums in 64 bits: squared steps of {bound} units, above {GREATEST_STEP}"
        mend = "use simpler fractions for metric and positions, or shorter edges"
        raise _error(lattice, "metric", what, mend)


def _warnings(lattice: Lattice) -> tuple[str, ...]:
    from fleetcount.lattice.symmetry import translations

    inner = next(translations(lattice), None)
    if inner is None:
        return ()
    here, there = lattice.sites[0], lattice.sites[inner.images[0]]
    shift = ", ".join(str(b - a) for a, b in zip(here.at, there.at, strict=True))
    return (f"the cell is not primitive: the shift ({shift}) keeps the lattice",)


def _plural(number: int, noun: str) -> str:
    return f"{number} {noun}" + ("" if number == 1 else "s")


def _determinant(rows: Sequence[Sequence[Fraction]]) -> Fraction:
    matrix = [list(row) for row in rows]
    result = Fraction(1)
    for i in range(len(matrix)):
        pivot = next((r for r in range(i, len(matrix)) if matrix[r][i]), None)
        if pivot is None:
            return Fraction(0)
        if pivot != i:
            matrix[i], matrix[pivot] = matrix[pivot], matrix[i]
            result = -result
        result *= matrix[i][i]
        for r in range(i + 1, len(matrix)):
            factor = matrix[r][i] / matrix[i][i]
            matrix[r] = [x - factor * y for x, y in zip(matrix[r], matrix[i], strict=True)]
    return result


def _rank(rows: Sequence[Sequence[Fraction]]) -> int:
    matrix = [list(row) for row in rows]
    rank = 0
    for column in range(len(matrix[0])):
        pivot = next((r for r in range(rank, len(matrix)) if matrix[r][column]), None)
        if pivot is None:
            continue
        matrix[rank], matrix[pivot] = matrix[pivot], matrix[rank]
        for r in range(rank + 1, len(matrix)):
            factor = matrix[r][column] / matrix[rank][column]
            matrix[r] = [x - factor * y for x, y in zip(matrix[r], matrix[rank], strict=True)]
        rank += 1
    return rank


def _reduce(rows: Sequence[Sequence[int]], width: int) -> list[int]:
    """Diagonal of the Hermite form of the integer rows; 0 where a column has no pivot of its own.

    Rows enter one by one, so that entries stay small.
    """
    basis: list[list[int] | None] = [None] * width
    for row in rows:
        new = list(row)
        for i in range(width):
            old = basis[i]
            if new[i] == 0:
                continue
            if old is None:
                basis[i] = new
                break
            while new[i]:
                quotient = old[i] // new[i]
                old, new = new, [x - quotient * y for x, y in zip(old, new, strict=True)]
            basis[i] = old
    return [0 if row is None else abs(row[i]) for i, row in enumerate(basis)]
