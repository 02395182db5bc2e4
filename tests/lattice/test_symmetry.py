"""The symmetry group: its order is the one the literature gives, and its elements do what they promise."""

from __future__ import annotations

import pickle
import random
from fractions import Fraction

import pytest
from hypothesis import given, settings

from fleetcount.lattice import catalogue, definition, symmetry
from fleetcount.lattice.model import Arc, Lattice
from fleetcount.lattice.symmetry import Symmetry
from tests.strategies import small_lattices

# Order of the group modulo the translations of the primitive cell, that is of the point group of the space
# group. International Tables for Crystallography, volume A (2016): plane groups p4mm 8, p6mm 12; space groups
# Pm-3m, Im-3m, Fm-3m, Fd-3m 48. Hypercubes: 2^d d!, H. S. M. Coxeter, Regular Polytopes (1973). Those of the
# tubes and of the one-way lattices are worked out by hand.
ORDERS = {
    "square": 8,
    "king": 8,
    "4.8.8": 8,
    "triangular": 12,
    "honeycomb": 12,
    "kagome": 12,
    "3.12.12": 12,
    "dice": 12,
    "cubic": 48,
    "bcc": 48,
    "fcc": 48,
    "diamond": 48,
    "hypercubic4": 384,
    "hypercubic5": 3840,
    # Along the rails and across them: a reflection each.
    "ladder": 2 * 2,
    # The triangle, and a reflection along the axis.
    "prism": 6 * 2,
    # A site is fixed by exchanging its two ways out; the four sites of the cell are alike.
    "manhattan": 2 * 4,
    # A site is fixed by the reflections in its horizontal and its vertical; the two sites are alike.
    "l-lattice": 4 * 2,
}


def after(second: Symmetry, first: Symmetry) -> Symmetry:
    """`first`, then `second`, from what they do to sites."""
    sites, periods = len(first.images), len(first.shifts[0])
    both = [second.apply(*first.apply(site, (0,) * periods)) for site in range(sites)]
    columns = list(zip(*first.matrix, strict=True))
    matrix = tuple(
        tuple(sum(a * b for a, b in zip(row, column, strict=True)) for column in columns)
        for row in second.matrix
    )
    return Symmetry(matrix, tuple(site for site, _ in both), tuple(cell for _, cell in both))


def at_home(element: Symmetry) -> Symmetry:
    """Modulo translations: site 0 of cell 0 goes into cell 0."""
    return element.after(tuple(-c for c in element.shifts[0]))


def image(element: Symmetry, arc: Arc, cell: tuple[int, ...]) -> Arc:
    """The image of the arc that starts in `cell`, its source moved to cell 0."""
    source, here = element.apply(arc.source, cell)
    target, there = element.apply(arc.target, tuple(a + b for a, b in zip(cell, arc.cell, strict=True)))
    return Arc(source, target, tuple(b - a for a, b in zip(here, there, strict=True)))


@pytest.mark.parametrize("name", catalogue.names())
def test_orders(name: str) -> None:
    """The group has the order of the point group in the literature, counted both ways."""
    lattice = catalogue.find(name)
    assert symmetry.order(lattice) == len(symmetry.group(lattice)) == ORDERS[name]


@pytest.mark.parametrize("name", catalogue.names())
def test_sites_alike(name: str) -> None:
    """All sites are alike, but for the dice lattice: a hub and two rims."""
    lattice = catalogue.find(name)
    if name == "dice":
        assert [lattice.sites[orbit[0]].name for orbit in symmetry.site_orbits(lattice)] == ["hub", "rim1"]
        assert symmetry.site_orbits(lattice) == ((0,), (1, 2))
        assert not symmetry.all_alike(lattice)
    else:
        assert symmetry.site_orbits(lattice) == (tuple(range(len(lattice.sites))),)
        assert symmetry.all_alike(lattice)


def check_group(lattice: Lattice) -> None:
    """The laws of a group, and of the definition: metric, sites and arcs are kept."""
    elements = symmetry.group(lattice)
    found = set(elements)
    assert len(found) == len(elements)
    identity = elements[0]
    assert all(
        identity.apply(s, (3,) * lattice.periods) == (s, (3,) * lattice.periods) for s in identity.images
    )
    assert list(elements[1:]) == sorted(elements[1:])
    for first in elements:
        products = {at_home(after(second, first)) for second in elements[:60]}
        assert len(products) == len(elements[:60]) and products <= found
    for element in elements:
        assert sorted(element.images) == list(range(len(lattice.sites)))
        arcs = {image(element, arc, (2,) * lattice.periods) for arc in lattice.arcs}
        assert arcs == set(lattice.arcs)
        m, g = element.matrix, lattice.gram
        axes = range(lattice.dimension)
        for i in axes:
            for j in axes:
                assert sum(m[k][i] * g[k][n] * m[n][j] for k in axes for n in axes) == g[i][j]


@pytest.mark.parametrize("name", [n for n in catalogue.names() if not n.startswith("hypercubic")])
def test_group_laws(name: str) -> None:
    """Products stay in the group, no element stands twice, each keeps metric, sites and arcs."""
    check_group(catalogue.find(name))


@settings(max_examples=100, deadline=None)
@given(small_lattices())
def test_group_laws_on_random_lattices(lattice: Lattice) -> None:
    """The same on any lattice; the group is made of the cosets of the stabilizer of a site."""
    check_group(lattice)
    assert symmetry.order(lattice) == len(symmetry.group(lattice))
    reached = {g.images[0] for g in symmetry.group(lattice)}
    assert symmetry.site_orbits(lattice)[0] == tuple(sorted(reached))


@pytest.mark.parametrize("name", catalogue.names())
def test_stabilizer(name: str) -> None:
    """The stabilizer fixes the site of cell 0 and no other element of the group does, up to translations."""
    lattice = catalogue.find(name)
    home = (0,) * lattice.periods
    for site in range(len(lattice.sites)):
        fixing = symmetry.stabilizer(lattice, site)
        assert all(g.apply(site, home) == (site, home) for g in fixing)
        assert len(fixing) == sum(g.images[site] == site for g in symmetry.group(lattice))
        assert {at_home(g) for g in fixing} <= set(symmetry.group(lattice))
        assert symmetry.arm_map(lattice, fixing[0], site) == tuple(range(len(lattice.arms[site])))


@settings(max_examples=100, deadline=None)
@given(small_lattices())
def test_arm_map(lattice: Lattice) -> None:
    """Each arm is carried to the arm whose end is the image of its end."""
    for element in symmetry.group(lattice):
        for site, arms in enumerate(lattice.arms):
            there = lattice.arms[element.images[site]]
            numbers = symmetry.arm_map(lattice, element, site)
            assert [there[k] for k in numbers] == [
                image(element, arm, (0,) * lattice.periods) for arm in arms
            ]
            assert sorted(numbers) == list(range(len(there)))


@pytest.mark.parametrize("name", catalogue.names())
def test_crooked_cells(name: str) -> None:
    """The same lattice, described by a skewed cell about another origin, has a group of the same order."""
    lattice = catalogue.find(name)
    for seed in range(3):
        other = crooked(lattice, random.Random(f"{name} {seed}"))
        assert other.canonical() != lattice.canonical()
        assert symmetry.order(other) == ORDERS[name]
        assert sorted(map(len, symmetry.site_orbits(other))) == sorted(
            map(len, symmetry.site_orbits(lattice))
        )


def crooked(lattice: Lattice, chance: random.Random) -> Lattice:
    """The lattice in the basis b_i = a_i + multiples of the periods before it, moved by a random vector."""
    size, periods = lattice.dimension, lattice.periods
    # New coordinates y = T x with T unitriangular on the periods: b_j = sum over i of (T^-1)_ij a_i.
    turn = [[Fraction(int(i == j)) for j in range(size)] for i in range(size)]
    back = [row[:] for row in turn]
    for i in range(periods):
        for j in range(periods):
            if i != j:
                k = chance.choice((-1, 0, 1, 1))
                turn[i] = [a + k * b for a, b in zip(turn[i], turn[j], strict=True)]
                for row in back:
                    row[j] -= k * row[i]
    moved = [Fraction(chance.randrange(6), 6) for _ in range(size)]
    axes = range(size)
    metric = [
        [
            sum((back[k][i] * lattice.metric[k][n] * back[n][j] for k in axes for n in axes), Fraction(0))
            for j in axes
        ]
        for i in axes
    ]
    places, cells = [], []
    for site in lattice.sites:
        at = [sum((t * x for t, x in zip(turn[i], site.at, strict=True)), moved[i]) for i in axes]
        cells.append([x.__floor__() for x in at[:periods]])
        places.append([x - c for x, c in zip(at, cells[-1], strict=False)] + at[periods:])
    lines = ['name = "crooked"', f"dimension = {size}", f"periods = {periods}"]
    lines.append(f"metric = {[[str(x) for x in row] for row in metric]}")
    for number, place in enumerate(places):
        lines += ["[[sites]]", f'name = "s{number}"', f"at = {[str(x) for x in place]}"]
    for arc in lattice.arcs:
        turned = [sum(int(turn[i][j]) * arc.cell[j] for j in range(periods)) for i in range(periods)]
        cell = [t + a - b for t, a, b in zip(turned, cells[arc.target], cells[arc.source], strict=True)]
        if not lattice.one_way and (arc.source, arc.cell) > (arc.target, tuple(-c for c in arc.cell)):
            continue
        key = "arcs" if lattice.one_way else "edges"
        lines += [f"[[{key}]]", f'from = "s{arc.source}"', f'to = "s{arc.target}"', f"cell = {cell}"]
    return definition.parse("\n".join(lines), "crooked.toml")


def test_translations_finer_than_the_cell() -> None:
    """A doubled cell of the square lattice has all symmetries that keep the doubled cell, shifts included."""
    text = 'name = "two"\ndimension = 2\nmetric = [[4, 0], [0, 1]]\n'
    text += '[[sites]]\nname = "a"\nat = [0, 0]\n[[sites]]\nname = "b"\nat = ["1/2", 0]\n'
    for edge in (("a", "b", [0, 0]), ("b", "a", [1, 0]), ("a", "a", [0, 1]), ("b", "b", [0, 1])):
        text += '[[edges]]\nfrom = "{}"\nto = "{}"\ncell = {}\n'.format(*edge)
    lattice = definition.parse(text, "two.toml")
    assert len(list(symmetry.translations(lattice))) == 1
    # Two reflections keep the doubled cell, a quarter turn does not; and there is the shift.
    assert len(symmetry.group(lattice)) == 4 * 2
    assert symmetry.all_alike(lattice)


def test_arcs_count_not_only_places() -> None:
    """One-way streets all to the right and up leave only the exchange of the axes."""
    text = 'name = "right-up"\ndimension = 2\nmetric = [[1, 0], [0, 1]]\n[[sites]]\nname = "a"\nat = [0, 0]\n'
    for cell in ([1, 0], [0, 1]):
        text += f'[[arcs]]\nfrom = "a"\nto = "a"\ncell = {cell}\n'
    matrices = [g.matrix for g in symmetry.group(definition.parse(text, "right-up.toml"))]
    assert matrices == [((1, 0), (0, 1)), ((0, 1), (1, 0))]


def test_a_large_disordered_cell() -> None:
    """In a cell of 400 sites with one edge left out, only the symmetries of the gap remain, found quickly."""
    size = 20
    text = 'name = "gap"\ndimension = 2\nmetric = [[1, 0], [0, 1]]\n'
    for x in range(size):
        for y in range(size):
            text += f'[[sites]]\nname = "s{x}.{y}"\nat = ["{x}/{size}", "{y}/{size}"]\n'
            for u, v in ((x + 1, y), (x, y + 1)):
                if (x, y, u) != (0, 0, 1):
                    text += f'[[edges]]\nfrom = "s{x}.{y}"\nto = "s{u % size}.{v % size}"\n'
                    text += f"cell = [{u // size}, {v // size}]\n"
    lattice = definition.parse(text, "gap.toml")
    assert lattice.warnings == ()
    # The reflections in the line of the gap and in its middle, and both.
    assert symmetry.order(lattice) == 4
    # Orbits of the four on a torus of 20 x 20: the reflection in the line fixes two rows of it, that in the
    # middle of the gap fixes no site.
    assert len(symmetry.site_orbits(lattice)) == (400 + 40 + 0 + 0) // 4


def test_the_hash_is_that_of_every_process() -> None:
    """A lattice that went through pickle finds itself among those computed anew."""
    lattice = catalogue.find("kagome")
    copy = pickle.loads(pickle.dumps(lattice))
    assert copy == lattice and hash(copy) == hash(lattice)
    assert hash(lattice) == hash((lattice.dimension, lattice.periods, lattice.metric, lattice.arcs))
