"""Regions: shorthands against sites listed one by one, walls in lowest terms, and translations."""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from itertools import product

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from fleetcount.errors import SeriesError
from fleetcount.lattice import catalogue
from fleetcount.lattice.model import Lattice
from fleetcount.series.region import Wall, contains, contains_all, moved, region, shape, shorthand, wall
from tests.strategies import small_lattices

Place = tuple[Fraction, ...]
HALF = Fraction(1, 2)


def places(lattice: Lattice, far: int) -> dict[tuple[int, tuple[int, ...]], Place]:
    """Cell coordinates of all sites of the cells within a cube."""
    found = {}
    for cell in product(range(-far, far + 1), repeat=lattice.periods):
        for number, site in enumerate(lattice.sites):
            away = (*cell, *([0] * (lattice.dimension - lattice.periods)))
            found[number, cell] = tuple(x + c for x, c in zip(site.at, away, strict=True))
    return found


@pytest.mark.parametrize(
    ("name", "text", "inside"),
    (
        ("square", "half", lambda x, y: y >= 0),
        ("square", "quarter", lambda x, y: x >= 0 and y >= 0),
        ("square", "orthant", lambda x, y: x >= 0 and y >= 0),
        ("square", "wedge", lambda x, y: 0 <= y <= x),
        ("square", "slab:3", lambda x, y: 0 <= y <= 3),
        ("square", "slab:0", lambda x, y: y == 0),
        ("square", "box:2,1", lambda x, y: 0 <= x <= 2 and 0 <= y <= 1),
        ("square", "tube:2", lambda x, y: 0 <= x <= 2),
        ("cubic", "half", lambda x, y, z: z >= 0),
        ("cubic", "quarter", lambda x, y, z: y >= 0 and z >= 0),
        ("cubic", "orthant", lambda x, y, z: min(x, y, z) >= 0),
        ("cubic", "wedge", lambda x, y, z: 0 <= z <= x),
        ("cubic", "slab:1", lambda x, y, z: 0 <= z <= 1),
        ("cubic", "tube:1,0", lambda x, y, z: 0 <= x <= 1 and y == 0),
        ("cubic", "box:1,0,2", lambda x, y, z: 0 <= x <= 1 and y == 0 and 0 <= z <= 2),
        # two layers to a cell, a third of it apart: heights 0, 1/3, 1, 4/3 are multiples of a third
        ("honeycomb", "half", lambda x, y: y >= 0),
        ("honeycomb", "slab:3", lambda x, y: 0 <= y <= 1),
        ("honeycomb", "slab:1", lambda x, y: 0 <= y <= Fraction(1, 3)),
        ("honeycomb", "wedge", lambda x, y: 0 <= y <= x),
        ("kagome", "slab:1", lambda x, y: 0 <= y <= HALF),
        ("kagome", "box:1,1", lambda x, y: 0 <= x <= 1 and 0 <= y <= 1),
        ("diamond", "half", lambda x, y, z: x + y >= 0),
        ("dice", "quarter", lambda x, y: x >= 0 and y >= 0),
    ),
)
def test_shorthands(name: str, text: str, inside: Callable[..., bool]) -> None:
    """A shorthand holds exactly the sites whose cell coordinates it is said to hold, walls included."""
    lattice = catalogue.find(name)
    walls = shorthand(lattice, text)
    far = 4 if lattice.dimension == 2 else 2
    found = {place for place in places(lattice, far) if contains(lattice, walls, *place)}
    assert found == {place for place, at in places(lattice, far).items() if inside(*at)}
    assert found


@pytest.mark.parametrize("name", ("triangular", "fcc", "bcc", "prism"))
def test_a_slab_has_one_layer_more_than_its_width(name: str) -> None:
    """`slab:W` holds W + 1 layers, each a value that the height takes."""
    lattice = catalogue.find(name)
    for width in range(3):
        walls = shorthand(lattice, f"slab:{width}")
        heights = {
            sum(u * x for u, x in zip(lattice.up, at, strict=True))
            for place, at in places(lattice, 5 if lattice.periods < 3 else 3).items()
            if contains(lattice, walls, *place)
        }
        assert min(heights) == 0
        assert len(heights) <= width + 1
        if name != "prism":  # which is a few layers high itself
            assert len(heights) == width + 1


forms = st.integers(1, 3).flatmap(lambda d: st.lists(st.integers(-3, 3), min_size=d, max_size=d).filter(any))
quick = settings(max_examples=100, deadline=None, suppress_health_check=[HealthCheck.too_slow])


@st.composite
def walled(draw: st.DrawFn) -> tuple[Lattice, list[tuple[tuple[int, ...], int]]]:
    """A lattice with up to three inequalities."""
    lattice = draw(small_lattices())
    form = st.tuples(*[st.integers(-3, 3)] * lattice.dimension).filter(any)
    return lattice, draw(st.lists(st.tuples(form, st.integers(-4, 2)), min_size=1, max_size=3))


def built(lattice: Lattice, asked: list[tuple[tuple[int, ...], int]]) -> tuple[Wall, ...] | None:
    try:
        return region(lattice, [wall(lattice, form, least) for form, least in asked])
    except (
        SeriesError
    ) as error:  # a lattice that is thin in some coordinate may lie beyond the wall as a whole
        assert "\n" not in str(error)
        return None


@quick
@given(walled())
def test_walls_hold_what_the_inequalities_hold(
    asked: tuple[Lattice, list[tuple[tuple[int, ...], int]]],
) -> None:
    """Reduced and sorted, of parallel walls the strictest: the sites are those of the inequalities as written."""
    lattice, inequalities = asked
    walls = built(lattice, inequalities)
    sites = places(lattice, 2)

    def inside(at: Place) -> bool:
        return all(sum(f * x for f, x in zip(form, at, strict=True)) >= least for form, least in inequalities)

    if walls is None:
        assert not any(map(inside, sites.values()))
        return
    assert [w.form for w in walls] == sorted((w.form for w in walls), reverse=True) and len(
        {w.form for w in walls}
    ) == len(walls)
    kinds = np.array([site for site, _ in sites])
    cells = np.array([cell for _, cell in sites]).reshape(len(sites), lattice.periods)
    together = contains_all(lattice, walls)(kinds, cells)
    for (place, at), found in zip(sites.items(), together, strict=True):
        assert contains(lattice, walls, *place) == bool(found) == inside(at)


@quick
@given(walled(), st.data())
def test_a_region_seen_from_another_cell(
    asked: tuple[Lattice, list[tuple[tuple[int, ...], int]]], data: st.DataObject
) -> None:
    """Moved walls hold a site exactly where the walls held the site that stood there."""
    lattice, inequalities = asked
    walls = built(lattice, inequalities)
    cell = tuple(data.draw(st.integers(-2, 2)) for _ in range(lattice.periods))
    for site, there in places(lattice, 1) if walls else ():
        seen = tuple(a + b for a, b in zip(there, cell, strict=True))
        assert walls is not None
        assert contains(lattice, moved(walls, cell), site, there) == contains(lattice, walls, site, seen)


@pytest.mark.parametrize(
    ("name", "text", "kind"),
    (
        ("square", "half", "half-space"),
        ("square", "slab:2", "strip"),
        ("square", "tube:2", "strip"),
        ("square", "quarter", "other"),
        ("square", "wedge", "other"),
        ("square", "box:2,2", "other"),
        ("cubic", "tube:1,1", "strip"),
        ("cubic", "slab:1", "strip"),
        ("cubic", "quarter", "other"),
    ),
)
def test_shapes(name: str, text: str, kind: str) -> None:
    """Which translations keep a region decides up to what closed objects are counted."""
    lattice = catalogue.find(name)
    assert shape(lattice, shorthand(lattice, text)) == kind
    assert shape(lattice, ()) == "all"


@pytest.mark.parametrize(
    ("name", "text", "reason"),
    (
        ("square", "", "unknown region"),
        ("square", "hlaf", "unknown region"),
        ("square", "half:1", "half takes no number"),
        ("square", "slab", "unknown region"),
        ("square", "slab:-1", "bad numbers"),
        ("square", "slab:x", "bad numbers"),
        ("square", "slab:1,2", "unknown region"),
        ("square", "slab:9999999999", "bad numbers"),
        ("square", "box:1", "in 2 dimensions"),
        ("square", "tube:1,1", "in 2 dimensions"),
        ("square", "tube:", "unknown region"),
        ("square", "box:1,1.5", "bad numbers"),
    ),
)
def test_regions_that_are_none(name: str, text: str, reason: str) -> None:
    """An unknown name, or numbers that make no sense, are refused in one line that lists what there is."""
    with pytest.raises(SeriesError, match=reason) as error:
        shorthand(catalogue.find(name), text)
    assert "\n" not in str(error.value)


@pytest.mark.parametrize("text", ("quarter", "orthant", "wedge"))
def test_regions_of_two_dimensions(text: str) -> None:
    """Corners need two dimensions."""
    from tests.methods.lattices import two_way_chain

    with pytest.raises(SeriesError, match="needs two dimensions"):
        shorthand(two_way_chain(), text)


@pytest.mark.parametrize(
    ("form", "least", "reason"),
    (
        ((0, 0), 0, "all zero, or too large"),
        ((0, 10**6), 0, "all zero, or too large"),
        ((1, 0, 0), 0, "3 numbers, but the lattice square has 2 coordinates"),
        ((0, 1), -(10**30), "too far away"),
        ((0, 1), 10**11, "too far away"),
    ),
)
def test_walls_that_are_none(form: tuple[int, ...], least: int, reason: str) -> None:
    """A form without a direction, with too many numbers or beyond what machine integers hold is refused."""
    with pytest.raises(SeriesError, match=reason) as error:
        wall(catalogue.find("square"), form, least)
    assert "\n" not in str(error.value)
