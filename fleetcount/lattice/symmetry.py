"""The symmetry group of a lattice, from its definition alone.

A symmetry is x -> M x + t on coordinates, M an integer matrix that keeps the metric and the lattice of
the periods, that carries sites to sites and arcs to arcs. M permutes the finite set of arc vectors, which
span the space because the graph is connected: so M is found by backtracking over the images of a few
linearly independent arc vectors, however skewed the cell is. All arithmetic is in integers, positions
in units of their common denominator.
"""

from __future__ import annotations

import operator
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import lru_cache

from fleetcount.lattice.model import Arc, Cell, Lattice

Matrix = tuple[tuple[int, ...], ...]
Vector = tuple[int, ...]


@dataclass(frozen=True, order=True)
class Symmetry:
    """A symmetry of a lattice.

    Attributes:
        matrix: its linear part on coordinates, `dimension` x `dimension`, integer, determinant 1 or -1.
        images: for each site of the cell the site it is carried to.
        shifts: for each site of cell 0 the cell it is carried to, in periods.
    """

    matrix: Matrix
    images: tuple[int, ...]
    shifts: tuple[Cell, ...]

    def apply(self, site: int, cell: Sequence[int]) -> tuple[int, Cell]:
        """Where a site of a cell goes."""
        turned = self.turn(cell)
        return self.images[site], tuple(map(operator.add, turned, self.shifts[site]))

    def turn(self, cell: Sequence[int]) -> Cell:
        """The linear part on a translation by periods."""
        periods = len(self.shifts[0])
        return tuple(sum(map(operator.mul, row, cell)) for row in self.matrix[:periods])

    def after(self, shift: Sequence[int]) -> Symmetry:
        """This symmetry followed by a translation by periods."""
        moved = tuple(tuple(map(operator.add, s, shift)) for s in self.shifts)
        return Symmetry(self.matrix, self.images, moved)


@lru_cache(maxsize=32)
def group(lattice: Lattice) -> tuple[Symmetry, ...]:
    """All symmetries modulo translations by periods, the identity first, the others by matrix and images.

    Each stands for its class by the one that carries site 0 of cell 0 into cell 0.
    """
    found = [g for image in range(len(lattice.sites)) for g in _carrying(lattice, 0, image)]
    return tuple(sorted(found, key=lambda g: (not _is_identity(g), g)))


def order(lattice: Lattice) -> int:
    """Number of symmetries modulo translations by periods, without listing them."""
    return len(stabilizer(lattice, 0)) * len(site_orbits(lattice)[0])


@lru_cache(maxsize=256)
def stabilizer(lattice: Lattice, site: int) -> tuple[Symmetry, ...]:
    """The symmetries that fix `site` of cell 0, the identity first, the others by matrix."""
    return tuple(sorted(_carrying(lattice, site, site), key=lambda g: (not _is_identity(g), g)))


@lru_cache(maxsize=32)
def site_orbits(lattice: Lattice) -> tuple[tuple[int, ...], ...]:
    """Classes of sites of the cell that symmetries carry into each other; each sorted, by least site."""
    leader = list(range(len(lattice.sites)))

    def find(site: int) -> int:
        while leader[site] != site:
            site = leader[site]
        return site

    for site in range(1, len(leader)):
        if find(site) != site:
            continue
        for first in sorted({find(s) for s in range(site)}):
            carrying = next(_carrying(lattice, first, site), None)
            if carrying is not None:
                for source, image in enumerate(carrying.images):
                    a, b = sorted((find(source), find(image)))
                    leader[b] = a
                break
    orbits: dict[int, list[int]] = {}
    for site in range(len(leader)):
        orbits.setdefault(find(site), []).append(site)
    return tuple(tuple(orbit) for orbit in orbits.values())


def all_alike(lattice: Lattice) -> bool:
    """Whether symmetries carry every site to every other."""
    return len(site_orbits(lattice)) == 1


def arm_map(lattice: Lattice, symmetry: Symmetry, site: int) -> tuple[int, ...]:
    """For each arm of `site` the number of its image among the arms of the image of `site`."""
    numbers = {arc: number for number, arc in enumerate(lattice.arms[symmetry.images[site]])}
    return tuple(numbers[_image(symmetry, arc)] for arc in lattice.arms[site])


def translations(lattice: Lattice) -> Iterator[Symmetry]:
    """The translations finer than the cell: none if the cell is primitive."""
    unit = tuple(tuple(int(i == j) for j in range(lattice.dimension)) for i in range(lattice.dimension))
    for image in range(1, len(lattice.sites)):
        yield from _with_matrices(lattice, (unit,), 0, image)


def _is_identity(symmetry: Symmetry) -> bool:
    unit = all(x == (i == j) for i, row in enumerate(symmetry.matrix) for j, x in enumerate(row))
    return unit and symmetry.images[0] == 0


def _carrying(lattice: Lattice, site: int, image: int) -> Iterator[Symmetry]:
    """The symmetries that carry `site` of cell 0 to `image` of cell 0."""
    if _colours(lattice)[site] == _colours(lattice)[image]:
        yield from _with_matrices(lattice, _matrices(lattice), site, image)


def _with_matrices(lattice: Lattice, matrices: Sequence[Matrix], site: int, image: int) -> Iterator[Symmetry]:
    """Those of them that have one of these linear parts."""
    colours = _colours(lattice)
    placed = {place: number for number, place in enumerate(lattice.positions)}
    arcs = frozenset(lattice.arcs)
    for matrix in matrices:
        symmetry = _symmetry(lattice, placed, colours, matrix, site, image)
        if symmetry is not None and all(_image(symmetry, arc) in arcs for arc in lattice.arcs):
            yield symmetry


@lru_cache(maxsize=32)
def _colours(lattice: Lattice) -> tuple[int, ...]:
    """Numbers of the sites that differ wherever no symmetry can carry one site to the other.

    Refined until stable: a colour is split by the lengths of the arcs and the colours at their ends. In
    a large cell this leaves few pairs of sites to be tried.
    """
    gram = lattice.gram
    norms = [sum(map(operator.mul, step, _times(gram, step))) for step in map(lattice.step, lattice.arcs)]
    colours = [0] * len(lattice.sites)
    count = 0
    while len(set(colours)) > count:
        count = len(set(colours))
        seen: list[list[tuple[int, int, int]]] = [[] for _ in colours]
        for arc, norm in zip(lattice.arcs, norms, strict=True):
            seen[arc.source].append((0, norm, colours[arc.target]))
            seen[arc.target].append((1, norm, colours[arc.source]))
        marks = [(colour, tuple(sorted(around))) for colour, around in zip(colours, seen, strict=True)]
        number = {mark: k for k, mark in enumerate(sorted(set(marks)))}
        colours = [number[mark] for mark in marks]
    return tuple(colours)


def _times(matrix: Sequence[Sequence[int]], vector: Sequence[int]) -> Vector:
    return tuple(sum(map(operator.mul, row, vector)) for row in matrix)


def _symmetry(
    lattice: Lattice,
    placed: dict[Vector, int],
    colours: Sequence[int],
    matrix: Matrix,
    site: int,
    image: int,
) -> Symmetry | None:
    """The map with this linear part that carries `site` to `image`, both of cell 0, if it keeps the sites."""
    periods, scale = lattice.periods, lattice.scale
    start, end = lattice.positions[site], lattice.positions[image]
    shift = tuple(map(operator.sub, end, _times(matrix, start)))
    images, shifts = [], []
    for colour, place in zip(colours, lattice.positions, strict=True):
        moved = tuple(map(operator.add, _times(matrix, place), shift))
        cell = tuple(x // scale for x in moved[:periods])
        found = placed.get(tuple(x % scale for x in moved[:periods]) + moved[periods:])
        if found is None or colours[found] != colour:
            return None
        images.append(found)
        shifts.append(cell)
    return Symmetry(matrix, tuple(images), tuple(shifts))


def _image(symmetry: Symmetry, arc: Arc) -> Arc:
    """The image of an arc, its source moved to cell 0."""
    here, there = symmetry.shifts[arc.source], symmetry.shifts[arc.target]
    cell = tuple(map(operator.add, symmetry.turn(arc.cell), map(operator.sub, there, here)))
    return Arc(symmetry.images[arc.source], symmetry.images[arc.target], cell)


@lru_cache(maxsize=32)
def _matrices(lattice: Lattice) -> tuple[Matrix, ...]:
    """The integer matrices that keep metric and periods and carry a basis of arc vectors to arc vectors."""
    gram = lattice.gram
    by_norm: dict[int, list[Vector]] = {}
    for step in sorted({lattice.step(arc) for arc in lattice.arcs}):
        by_norm.setdefault(sum(map(operator.mul, step, _times(gram, step))), []).append(step)
    basis = _basis([(norm, v) for norm, vs in by_norm.items() for v in vs], by_norm, lattice.dimension)
    adjugate, determinant = _adjugate([list(column) for column in zip(*(v for _, v in basis), strict=True)])
    lowered = [_times(gram, v) for _, v in basis]
    products = [[sum(map(operator.mul, low, v)) for _, v in basis] for low in lowered]
    periods = lattice.periods
    found: list[Matrix] = []
    chosen: list[Vector] = []

    def extend() -> None:
        depth = len(chosen)
        if depth == len(basis):
            matrix = _solve(chosen, adjugate, determinant)
            if matrix is not None and not any(any(row[:periods]) for row in matrix[periods:]):
                found.append(matrix)
            return
        conditions = [(_times(gram, v), w) for v, w in zip(chosen, products[depth], strict=False)]
        for candidate in by_norm[basis[depth][0]]:
            if all(sum(map(operator.mul, low, candidate)) == w for low, w in conditions):
                chosen.append(candidate)
                extend()
                chosen.pop()

    extend()
    return tuple(sorted(found))


def _basis(
    steps: list[tuple[int, Vector]], by_norm: dict[int, list[Vector]], dimension: int
) -> list[tuple[int, Vector]]:
    """Linearly independent arc vectors with their norms, those with the fewest rivals first."""
    chosen: list[tuple[int, Vector]] = []
    echelon: list[list[int]] = []
    for norm, step in sorted(steps, key=lambda s: (len(by_norm[s[0]]), s)):
        rest = list(step)
        for row in echelon:
            pivot = next(i for i, x in enumerate(row) if x)
            if rest[pivot]:
                a, b = row[pivot], rest[pivot]
                rest = [a * x - b * y for x, y in zip(rest, row, strict=True)]
        if any(rest):
            echelon.append(rest)
            chosen.append((norm, step))
        if len(chosen) == dimension:
            break
    return chosen


def _adjugate(matrix: list[list[int]]) -> tuple[list[list[int]], int]:
    """Adjugate and determinant of an integer matrix: matrix * adjugate = determinant * unit."""
    size = len(matrix)
    adjugate = [[0] * size for _ in range(size)]
    for i in range(size):
        for j in range(size):
            minor = [row[:j] + row[j + 1 :] for r, row in enumerate(matrix) if r != i]
            adjugate[j][i] = (-1) ** (i + j) * _determinant(minor)
    return adjugate, sum(matrix[0][j] * adjugate[j][0] for j in range(size))


def _determinant(matrix: list[list[int]]) -> int:
    if not matrix:
        return 1
    signs = ((-1) ** j for j in range(len(matrix)))
    minors = ([row[:j] + row[j + 1 :] for row in matrix[1:]] for j in range(len(matrix)))
    return sum(s * x * _determinant(minor) for s, x, minor in zip(signs, matrix[0], minors, strict=True) if x)


def _solve(images: list[Vector], adjugate: list[list[int]], determinant: int) -> Matrix | None:
    """The matrix that carries the basis to `images`, if it is one of integers."""
    columns = list(zip(*adjugate, strict=True))
    matrix = []
    for row in zip(*images, strict=True):
        entries = [sum(map(operator.mul, row, column)) for column in columns]
        if any(x % determinant for x in entries):
            return None
        matrix.append(tuple(x // determinant for x in entries))
    return tuple(matrix)
