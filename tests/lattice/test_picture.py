"""Pictures: what a person sees of a lattice, and what a browser is given to draw."""

from __future__ import annotations

import xml.etree.ElementTree as ElementTree

import pytest
from hypothesis import given, settings

from fleetcount.errors import InputError
from fleetcount.lattice import catalogue, patch
from fleetcount.lattice.model import Lattice
from fleetcount.lattice.picture import sketch
from fleetcount.lattice.svg import patch_svg
from tests.strategies import small_lattices

SVG = "{http://www.w3.org/2000/svg}"


def test_honeycomb() -> None:
    """The honeycomb is drawn with its hexagons, the start marked."""
    assert sketch(catalogue.find("honeycomb"), 0, 13, 9) == [
        "o   o   o   o",
        "|   |   |   |",
        "o   o   o   o",
        " \\ / \\ / \\ /",
        "  o   @   o",
        "  |   |   |",
        "  o   o   o",
        " / \\ / \\ / \\",
        "o   o   o   o",
    ]


def test_king() -> None:
    """Diagonals that cross are drawn as crosses."""
    assert sketch(catalogue.find("king"), 0, 5, 5) == ["o-o-o", "|X|X|", "o-@-o", "|X|X|", "o-o-o"]


def test_l_lattice() -> None:
    """One-way arcs carry arrow heads: from the start both ways out are horizontal."""
    assert sketch(catalogue.find("l-lattice"), 0, 17, 5) == [
        "o-<-o->-o-<-o->-o",
        "v   ^   v   ^   v",
        "o->-o-<-@->-o-<-o",
        "^   v   ^   v   ^",
        "o-<-o->-o-<-o->-o",
    ]


def test_two_kinds_of_sites() -> None:
    """Hubs and rims of the dice lattice have different marks."""
    drawn = "".join(sketch(catalogue.find("dice"), 0, 41))
    assert drawn.count("@") == 1 and "o" in drawn and "*" in drawn


@pytest.mark.parametrize("name", catalogue.names())
@pytest.mark.parametrize("columns", [20, 40, 61, 78])
def test_sketches_fit(name: str, columns: int) -> None:
    """A sketch keeps to the width it was given; there is none in three dimensions and more."""
    lattice = catalogue.find(name)
    lines = sketch(lattice, 0, columns)
    assert bool(lines) == (lattice.dimension <= 2)
    assert all(len(line) <= columns for line in lines)
    assert sum(line.count("@") for line in lines) == bool(lines)


@settings(max_examples=20, deadline=None)
@given(small_lattices())
def test_any_lattice_can_be_drawn(lattice: Lattice) -> None:
    """Random lattices, however crooked, give a sketch within the width and an SVG of all sites."""
    for start in range(len(lattice.sites)):
        assert all(len(line) <= 61 for line in sketch(lattice, start))
        drawn = ElementTree.fromstring(patch_svg(lattice, 2, start))
        assert len(list(drawn.iter(f"{SVG}circle"))) == patch.build(lattice, start, 2).sites + 1


def test_svg_of_the_square() -> None:
    """Each site and each edge inside is drawn once, and the start once more."""
    drawn = ElementTree.fromstring(patch_svg(catalogue.find("square"), 2))
    assert len(list(drawn.iter(f"{SVG}circle"))) == 13 + 1
    assert len(list(drawn.iter(f"{SVG}line"))) == 16
    assert not list(drawn.iter(f"{SVG}polygon"))
    ends = [
        [float(line.get(key, "")) for key in ("x1", "y1", "x2", "y2")] for line in drawn.iter(f"{SVG}line")
    ]
    lengths = {round(abs(x - u) + abs(y - v), 1) for x, y, u, v in ends}
    assert lengths == {44.0}


def test_svg_arrows() -> None:
    """Each arc of a one-way lattice has an arrow head."""
    drawn = ElementTree.fromstring(patch_svg(catalogue.find("manhattan"), 3))
    lines, heads = list(drawn.iter(f"{SVG}line")), list(drawn.iter(f"{SVG}polygon"))
    assert len(lines) == len(heads) > 0


def test_svg_refusals() -> None:
    """Four dimensions, and patches of too many sites, are refused with one clear line."""
    with pytest.raises(InputError, match="no picture in 4 dimensions"):
        patch_svg(catalogue.find("hypercubic4"), 2)
    with pytest.raises(InputError, match="draw fewer steps"):
        patch_svg(catalogue.find("square"), 1000)
