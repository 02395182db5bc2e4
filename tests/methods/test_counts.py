"""What is counted: per start, per cell, in either sense."""

from __future__ import annotations

import pytest

from fleetcount.errors import TrustError
from fleetcount.lattice import catalogue
from fleetcount.methods.direct import twin
from fleetcount.methods.direct.keys import Prefix
from fleetcount.methods.direct.method import DirectMethod, Endless
from fleetcount.series.defining import define
from fleetcount.series.tally import Tally
from tests.methods import lattices, plain
from tests.methods.splitting import METHOD, table


@pytest.fixture(params=(False, True), ids=("fixed root", "least root"))
def rooting(request: pytest.FixtureRequest, monkeypatch: pytest.MonkeyPatch) -> None:
    least = bool(request.param)
    monkeypatch.setattr(DirectMethod, "_rooted_at_least", lambda _, series, top: series.rule.closed and least)


@pytest.mark.usefixtures("rooting")
def test_polygons_of_two_opposite_arcs() -> None:
    """Two arcs that run both ways are a polygon of length 2 on a one-way lattice, one for each pair in the cell."""
    assert table(define(lattices.two_way_chain(), "polygon"), 8) == {2: 1}
    assert table(define(lattices.two_way_square(), "polygon"), 3) == {2: 2}
    assert table(define(lattices.mixed_square(), "polygon"), 7) == {2: 1}
    assert table(define(catalogue.find("square"), "polygon"), 3) == {}


@pytest.mark.usefixtures("rooting")
def test_both_senses_count_on_one_way_lattices() -> None:
    """A square lattice of arcs has each polygon of length 4 and more twice, once a sense."""
    undirected = table(define(catalogue.find("square"), "polygon"), 14)
    directed = table(define(lattices.two_way_square(), "polygon"), 14)
    assert directed == {2: 2, **{n: 2 * count for n, count in undirected.items()}}


@pytest.mark.usefixtures("rooting")
def test_a_cell_that_is_not_primitive() -> None:
    """A cell of two sites of the square lattice holds twice as many polygons, and as many walks from a site."""
    square, double = catalogue.find("square"), lattices.double_square()
    assert double.warnings
    once, twice = (table(define(lattice, "polygon"), 12) for lattice in (square, double))
    assert twice == {n: 2 * count for n, count in once.items()}
    assert table(define(double, "walk"), 12) == table(define(square, "walk"), 12)
    assert define(double, "walk").divisor == 1


@pytest.mark.usefixtures("rooting")
@pytest.mark.parametrize(("name", "top"), (("dice", 8), ("kagome", 8), ("honeycomb", 10), ("l-lattice", 8)))
def test_polygons_of_the_catalogue_are_cycles(name: str, top: int) -> None:
    """With several sites a cell, alike or not, the table is per cell: the number of different cycles."""
    lattice = catalogue.find(name)
    assert table(define(lattice, "polygon"), top) == plain.polygons(lattice, top)


def test_sites_not_alike() -> None:
    """Without a start the table is the sum over the sites of a cell, hubs and rims of the dice lattice each."""
    lattice = catalogue.find("dice")
    whole, *named = (define(lattice, "walk", start) for start in (None, "hub", "rim1", "rim2"))
    assert (whole.divisor, *(series.divisor for series in named)) == (3, 1, 1, 1)
    sums, *parts = (table(series, 7) for series in (whole, *named))
    assert sums == {n: sum(part[n] for part in parts) for n in sums}
    assert parts[0][1] == 6
    assert parts[1] == parts[2]
    for series, part in zip(named, parts, strict=True):
        assert series.start is not None
        assert part == twin.whole(series, Prefix(series.start, False, ()), 7).counts()


def test_roots_are_weighted_by_the_sites_they_stand_for() -> None:
    """Where symmetries carry sites to each other one root stands for all of them."""
    roots = METHOD.roots(define(catalogue.find("dice"), "walk"), range(5))
    assert {root.key: root.factor for root in roots} == {"0:": 1, "1:": 2}
    roots = METHOD.roots(define(catalogue.find("honeycomb"), "walk"), range(5))
    assert {root.key: root.factor for root in roots} == {"0:": 1}


@pytest.mark.parametrize(("name", "kind"), (("square", "walk"), ("cubic", "polygon"), ("manhattan", "walk")))
def test_a_key_means_the_same_at_every_reach(name: str, kind: str) -> None:
    """Whatever the reach, a unit's terms are those that the plain definition gives for its prefix."""
    series = define(catalogue.find(name), kind)
    units = [child.key for child in METHOD.divide(series, range(9), "0:").children]
    units += [child.key for key in units for child in METHOD.divide(series, range(9), key).children]
    for key in units:
        arms = tuple(map(int, key.removeprefix("0:").split(".")))
        expected = twin.whole(series, Prefix(0, False, arms), 7).counts()
        for top in (7, 8, 11):
            counts = METHOD.count(series, range(top + 1), key, Endless()).explored.counts()
            assert {n: count for n, count in counts.items() if n <= 7} == expected


def test_closed_walks_that_no_polygons_make() -> None:
    """Sums that leave a remainder are refused: no correct count can give them."""
    series = define(catalogue.find("square"), "polygon")
    with pytest.raises(TrustError, match="no multiple of 8"):
        METHOD.assemble(series, Tally.of_counts({4: 9}))


@pytest.mark.parametrize("kind", ("walk", "polygon"))
def test_the_least_lengths(kind: str) -> None:
    """Reaches of a few steps, which no kernel is needed for, give the first terms."""
    series = define(catalogue.find("square"), kind)
    walks, polygons = {0: 1, 1: 4, 2: 12, 3: 36, 4: 100, 5: 284, 6: 780}, {4: 1, 6: 2}
    known = walks if kind == "walk" else polygons
    for top in range(7):
        assert table(series, top) == {n: count for n, count in known.items() if n <= top}
