"""Closed objects: rooted anyhow, in any region, they are cycles listed one by one."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from fractions import Fraction

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from fleetcount.errors import SeriesError
from fleetcount.lattice import catalogue
from fleetcount.lattice.model import Lattice
from fleetcount.methods.direct.method import DirectMethod
from fleetcount.series.defining import define
from fleetcount.series.region import wall
from tests.methods import plain
from tests.methods.refined import by_kernel, interpreted, one_width
from tests.methods.splitting import METHOD, table
from tests.strategies import small_lattices

many = settings(max_examples=50, deadline=None, suppress_health_check=[HealthCheck.too_slow])


@pytest.fixture(scope="module", autouse=True)
def as_python() -> Iterator[None]:
    with one_width(), interpreted():
        yield


@many
@given(small_lattices(), st.integers(2, 6))
def test_closed_trails_are_cycles_per_cell(lattice: Lattice, top: int) -> None:
    """Closed walks from the roots, divided by the ways to run through each, are the cyclic sequences of edges."""
    assert table(define(lattice, "closed-trail"), top) == plain.closed_trails(lattice, top)


@pytest.mark.parametrize(("name", "top"), (("square", 8), ("kagome", 6), ("manhattan", 8), ("triangular", 5)))
def test_closed_trails_of_the_catalogue(name: str, top: int) -> None:
    """The same where loops meet in a site."""
    lattice = catalogue.find(name)
    assert table(define(lattice, "closed-trail"), top) == plain.closed_trails(lattice, top)


@pytest.mark.parametrize("by", ("steps:1,0", "span:1,0"))
@pytest.mark.parametrize(("name", "top"), (("kagome", 8), ("l-lattice", 12), ("dice", 6)))
def test_alike_sites_do_not_stand_for_each_other_where_a_direction_is_named(
    name: str, top: int, by: str
) -> None:
    """Rooted at fixed sites or at the least one, polygons by what happens along a direction are the same."""
    series, tables = define(catalogue.find(name), "polygon", by=[by]), []
    for least in (False, True):
        with pytest.MonkeyPatch.context() as patch:
            patch.setattr(DirectMethod, "_rooted_at_least", lambda *_, least=least: least)
            tables.append(by_kernel(series, top))
    assert tables[0] == tables[1]


@pytest.mark.parametrize("top", range(4, 9))
def test_a_step_there_and_back_is_no_polygon(top: int) -> None:
    """What comes back by the edge it left by is counted nowhere, not even where values of statistics are kept."""
    series = define(catalogue.find("square"), "polygon", by=["area", "contacts"])
    expected = {(4, 1, 0): 1, (6, 2, 1): 2, (8, 3, 2): 6, (8, 4, 0): 1}
    found = {place: row[0] for place, row in by_kernel(series, top).sorted_rows()}
    assert found == {place: count for place, count in expected.items() if place[0] <= top}


Inside = Callable[[plain.Place], bool]


@pytest.mark.parametrize(
    ("name", "top", "text", "forms", "inside"),
    (
        ("square", 10, "half", [(0, 1)], lambda p: p[1] >= 0),
        ("square", 8, "slab:2", [(0, 1)], lambda p: 0 <= p[1] <= 2),
        ("square", 8, "tube:1", [(1, 0)], lambda p: 0 <= p[0] <= 1),
        ("triangular", 6, "half", [(0, 1)], lambda p: p[1] >= 0),
        ("triangular", 6, "slab:1", [(0, 1)], lambda p: 0 <= p[1] <= 1),
        ("honeycomb", 12, "half", [(0, 1)], lambda p: p[1] >= 0),
        ("honeycomb", 10, "slab:4", [(0, 1)], lambda p: 0 <= p[1] <= Fraction(4, 3)),
        ("kagome", 8, "half", [(0, 1)], lambda p: p[1] >= 0),
        ("dice", 8, "half", [(0, 1)], lambda p: p[1] >= 0),
        ("manhattan", 8, "half", [(0, 1)], lambda p: p[1] >= 0),
        ("cubic", 6, "tube:1,1", [(1, 0, 0), (0, 1, 0)], lambda p: 0 <= p[0] <= 1 and 0 <= p[1] <= 1),
    ),
)
def test_polygons_between_walls(
    name: str, top: int, text: str, forms: list[plain.Form], inside: Inside
) -> None:
    """In a half-space a polygon has a site on the surface and counts once along it; in a slab or tube it counts once
    for each place across."""
    lattice = catalogue.find(name)
    series = define(lattice, "polygon", region_name=text, by=["visits"])
    first = series.walls[0]
    expected: dict[tuple[int, int], int] = {}
    for cycle in plain.cycles(lattice, top):
        for place in plain.placed(lattice, cycle, inside, forms):
            values = [_value(lattice, forms[0], point) + place[0] for point in cycle]
            least = first.bound if first.form == forms[0] else -first.bound
            visits = values.count(least)
            if text != "half" or visits:
                expected[len(cycle), visits] = expected.get((len(cycle), visits), 0) + 1
    found = {place: row[0] for place, row in by_kernel(series, top).sorted_rows()}
    assert found == expected
    assert found


def _value(lattice: Lattice, form: plain.Form, point: plain.Point) -> Fraction:
    return sum((f * x for f, x in zip(form, plain.at(lattice, point), strict=True)), Fraction(0))


def test_walls_with_nothing_between() -> None:
    """A strip without a site is refused before anything is counted, not counted as zero."""
    square = catalogue.find("square")
    series = define(square, "polygon", walls=[wall(square, (0, 1), 3), wall(square, (0, -1), -2)])
    with pytest.raises(SeriesError, match="no site of the lattice lies between the walls"):
        METHOD.check_reach(series, 8)


def test_closed_trails_in_a_half_space_are_refused() -> None:
    """They have no root of their own there, and the line says what to give instead."""
    series = define(catalogue.find("square"), "closed-trail", region_name="half")
    assert "give a slab, or a corner and a start" in str(METHOD.refuses(series))
