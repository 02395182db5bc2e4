"""What refined counts must be among themselves, whatever the lattice: laws that need no second program."""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction

import pytest
from hypothesis import HealthCheck, assume, given, settings
from hypothesis import strategies as st

from fleetcount.errors import SeriesError
from fleetcount.lattice.model import Lattice
from fleetcount.methods.direct.method import DirectMethod
from fleetcount.series.defining import define
from fleetcount.series.definition import Series
from fleetcount.series.tally import Place, Tally
from tests.methods.refined import by_kernel, one_width
from tests.strategies import small_lattices

many = settings(max_examples=30, deadline=None, suppress_health_check=[HealthCheck.too_slow])
one = settings(max_examples=20, deadline=None, suppress_health_check=[HealthCheck.too_slow])
two_way = small_lattices(one_way=False)
either = small_lattices()


@pytest.fixture(scope="module", autouse=True)
def few_kernels() -> Iterator[None]:
    with one_width():
        yield


def start_of(lattice: Lattice, data: st.DataObject) -> str:
    return data.draw(st.sampled_from([site.name for site in lattice.sites]))


def sensible(lattice: Lattice, kind: str, by: list[str]) -> list[str]:
    """Less the turns where every step turns."""
    try:
        define(lattice, kind, lattice.sites[0].name if kind == "walk" else None, by=by)
    except SeriesError:
        assume(False)
    return by


def rows(tally: Tally) -> dict[Place, tuple[int, ...]]:
    return dict(tally.sorted_rows())


@many
@given(two_way, st.integers(2, 7), st.data())
def test_refined_counts_sum_to_plain_counts(lattice: Lattice, top: int, data: st.DataObject) -> None:
    """Walks by contacts and turns, summed over both, are the walks that the plain kernel counts."""
    start = start_of(lattice, data)
    by = sensible(lattice, "walk", ["contacts", "turns"])
    refined = by_kernel(define(lattice, "walk", start, by=by), top)
    assert refined.counts() == by_kernel(define(lattice, "walk", start), top).counts()


@many
@given(small_lattices(one_way=False, dimension=2), st.integers(2, 9))
def test_refined_polygons_sum_to_plain_polygons(lattice: Lattice, top: int) -> None:
    """Polygons by contacts and turns, rooted either way, are the plain ones, and each cell of the table the same."""
    series = define(
        lattice, "polygon", by=sensible(lattice, "polygon", ["contacts", "turns"]), moment=["gyration2"]
    )
    tables = []
    for least in (False, True):
        with pytest.MonkeyPatch.context() as patch:
            patch.setattr(DirectMethod, "_rooted_at_least", lambda *_, least=least: least)
            tables.append(by_kernel(series, top))
    assert tables[0] == tables[1]
    assert tables[0].counts() == by_kernel(define(lattice, "polygon"), top).counts()


@many
@given(small_lattices(one_way=False, dimension=2), st.integers(0, 6), st.data())
def test_ends_sum_to_counts_and_to_end2(lattice: Lattice, top: int, data: st.DataObject) -> None:
    """The distribution of ends adds up to the counts, weighted by squared distances to end2, by squared heights to
    height2; what is left of end2 is along2; and every cell of it is whole."""
    check_ends(lattice, top, data)


@one
@given(small_lattices(one_way=True, dimension=2), st.integers(0, 6), st.data())
def test_ends_on_one_way_lattices(lattice: Lattice, top: int, data: st.DataObject) -> None:
    """The same where arcs run one way."""
    check_ends(lattice, top, data)


def check_ends(lattice: Lattice, top: int, data: st.DataObject) -> None:
    start = start_of(lattice, data)
    names = ["end2", "height2", "along2", "gyration2", "monomer2"]
    series = define(lattice, "walk", start, by=["end"], moment=names)
    table = by_kernel(series, top)
    assert table.counts() == by_kernel(define(lattice, "walk", start), top).counts()
    assert series.start is not None
    for (_, *cell, site), (count, end2, height2, along2, gyration2, monomer2) in table.sorted_rows():
        assert end2 == count * squared(series, site, tuple(cell)) * series.denominator
        assert height2 + along2 == end2
        assert gyration2 >= monomer2 >= end2 >= 0 and min(height2, along2) >= 0
    assert len(rows(table)) <= sum(table.counts().values())


def squared(series: Series, site: int, cell: tuple[int, ...]) -> Fraction:
    """Squared distance of a site from the start, by the metric."""
    lattice = series.lattice
    away = (*cell, *([0] * (lattice.dimension - lattice.periods)))
    assert series.start is not None
    there, here = lattice.sites[site].at, lattice.sites[series.start].at
    vector = [x + c - y for x, c, y in zip(there, away, here, strict=True)]
    return sum(
        (
            x * g * y
            for x, row in zip(vector, lattice.metric, strict=True)
            for g, y in zip(row, vector, strict=True)
        ),
        Fraction(0),
    )


@one
@given(small_lattices(one_way=False, dimension=2), st.integers(1, 5), st.data())
def test_walks_to_a_given_end(lattice: Lattice, top: int, data: st.DataObject) -> None:
    """Walks to an end are as many as the distribution of ends has there."""
    start = start_of(lattice, data)
    names = ["end2", "height2", "along2", "gyration2", "monomer2"]
    ends = by_kernel(define(lattice, "walk", start, by=["end"], moment=names), top)
    places = sorted({place[1:] for place in rows(ends)} - {(*[0] * lattice.periods, _number(lattice, start))})
    assume(places)
    *cell, site = data.draw(st.sampled_from(places))
    there = f"{','.join(map(str, cell))}:{lattice.sites[site].name}"
    found = by_kernel(define(lattice, "walk", start, end=there), top).counts()
    assert found == {n: row[0] for (n, *end), row in rows(ends).items() if end == [*cell, site]}


def _number(lattice: Lattice, start: str) -> int:
    return [site.name for site in lattice.sites].index(start)


@many
@given(two_way, st.integers(2, 6), st.data())
def test_trails_include_walks_include_neighbour_avoiding_walks(
    lattice: Lattice, top: int, data: st.DataObject
) -> None:
    """Trails that pass no site twice are the walks, contacts and all; walks without contacts avoid neighbours."""
    start = start_of(lattice, data)
    by = sensible(lattice, "walk", ["contacts", "turns"])
    trails = by_kernel(define(lattice, "trail", start, by=["contacts", "revisits"]), top)
    walks = by_kernel(define(lattice, "walk", start, by=by), top)
    avoiding = by_kernel(define(lattice, "neighbour-avoiding", start), top)
    assert _summed(walks, 2) == {
        (n, c): count for (n, c, again), (count,) in rows(trails).items() if not again
    }
    assert avoiding.counts() == {n: count for (n, c), count in _summed(walks, 2).items() if c == 0}
    for n, count in trails.counts().items():
        assert count >= walks.counts().get(n, 0) >= avoiding.counts().get(n, 0)


def _summed(tally: Tally, columns: int) -> dict[Place, int]:
    """Counts by the first columns of the place, the others summed out."""
    sums: dict[Place, int] = {}
    for place, values in tally.sorted_rows():
        sums[place[:columns]] = sums.get(place[:columns], 0) + values[0]
    return sums
