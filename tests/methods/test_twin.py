"""The compiled kernels against their plain twin, with symmetry and without, and against cycles listed one by one."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from fleetcount.lattice import catalogue
from fleetcount.lattice.model import Lattice
from fleetcount.lattice.symmetry import site_orbits
from fleetcount.methods.direct import twin
from fleetcount.methods.direct.ground import Ground, ground
from fleetcount.methods.direct.keys import Prefix
from fleetcount.methods.direct.method import DirectMethod, Endless
from fleetcount.methods.direct.search import Search
from fleetcount.methods.direct.symmetry_states import without_symmetry
from fleetcount.series.defining import define
from fleetcount.series.definition import Series
from fleetcount.series.tally import Tally
from tests.methods import plain
from tests.methods.splitting import METHOD, table, whole
from tests.strategies import small_lattices

many = settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.too_slow])
objects = st.sampled_from(("walk", "polygon"))


def rootings(series: Series) -> tuple[bool, ...]:
    return (False, True) if series.rule.closed else (False,)


@many
@given(small_lattices(), objects, st.integers(0, 7))
def test_kernel_equals_twin(lattice: Lattice, kind: str, top: int) -> None:
    """From every start, rooted either way, the kernel's sums are those of the plain definition."""
    series = define(lattice, kind)
    for start in range(len(lattice.sites)):
        series = series if series.rule.closed else replace(series, start=start)
        for least in rootings(series):
            prefix = Prefix(start, least, ())
            counted = METHOD.count(series, range(top + 1), prefix.key(), Endless())
            assert not counted.children
            assert counted.explored == twin.whole(series, prefix, top)


@many
@given(small_lattices(), st.integers(0, 7))
def test_walks_of_all_starts(lattice: Lattice, top: int) -> None:
    """The weighted roots add up to the walks from every start site of the cell, by the twin."""
    series = define(lattice, "walk")
    starts = range(len(lattice.sites)) if series.start is None else [series.start]
    expected = Tally()
    for start in starts:
        expected.add(twin.whole(series, Prefix(start, False, ()), top))
    assert METHOD.assemble(series, whole(series, top)) == expected


@pytest.mark.parametrize("least", (False, True))
@many
@given(small_lattices(), st.integers(2, 6))
def test_polygons_are_cycles_per_cell(least: bool, lattice: Lattice, top: int) -> None:
    """Rooted either way, the table holds the number of different cycles up to translations by the cell's periods."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(DirectMethod, "_rooted_at_least", lambda *_: least)
        assert table(define(lattice, "polygon"), top) == plain.polygons(lattice, top)


def without_factors(base: Ground) -> Ground:
    """The same ground, where every arm stands for itself alone."""
    states = without_symmetry(base.series.lattice)
    images, onward = np.ones_like(base.images[:1]), np.zeros_like(base.onward[:1])
    return replace(base, states=states, images=images, onward=onward)


def sums(base: Ground) -> dict[int, int]:
    search = Search(base, ())
    while not search.slice():
        pass
    return {n: count for n, count in search.sums.items() if count}


@many
@given(small_lattices(), objects, st.integers(4, 9))
def test_symmetry_equals_none(lattice: Lattice, kind: str, top: int) -> None:
    """Counting one of each class of images and multiplying gives what counting all of them gives."""
    series = define(lattice, kind)
    for orbit in site_orbits(lattice):
        base = ground(series, Prefix(orbit[0], False, ()), top)
        assert sums(base) == sums(without_factors(base))


@pytest.mark.parametrize(
    ("name", "kind", "top"),
    (
        ("square", "walk", 13),
        ("cubic", "walk", 9),
        ("honeycomb", "walk", 18),
        ("manhattan", "walk", 18),
        ("l-lattice", "walk", 22),
        ("hypercubic4", "walk", 7),
        ("square", "polygon", 16),
        ("cubic", "polygon", 10),
        ("kagome", "polygon", 13),
        ("manhattan", "polygon", 22),
    ),
)
def test_symmetry_equals_none_further(name: str, kind: str, top: int) -> None:
    """The same on lattices with much symmetry, further than a twin could go."""
    base = ground(define(catalogue.find(name), kind), Prefix(0, False, ()), top)
    assert base.states.orders[base.states.first] > 1
    assert sums(base) == sums(without_factors(base))


def test_full_symmetry_is_used() -> None:
    """One walk of two bent steps stands for 8 on the square lattice, one of three for 48 on the cubic lattice."""
    for name, steps, order in (("square", 2, 8), ("cubic", 3, 48)):
        series = define(catalogue.find(name), "walk")
        factors = {"0:": 1}
        for _ in range(steps):
            factors = {
                child.key: factor * child.factor
                for key, factor in factors.items()
                for child in METHOD.divide(series, range(9), key).children
            }
        assert max(factors.values()) == order


@pytest.mark.parametrize(
    ("name", "top"),
    (
        ("square", 16),
        ("cubic", 10),
        ("kagome", 14),
        ("dice", 14),
        ("honeycomb", 22),
        ("ladder", 24),
        ("prism", 13),
    ),
)
def test_both_rootings_agree(name: str, top: int, monkeypatch: pytest.MonkeyPatch) -> None:
    """Polygons from a fixed root with the full group, and from their least site, are equally many."""
    tables = []
    for least in (False, True):
        monkeypatch.setattr(DirectMethod, "_rooted_at_least", lambda *_, least=least: least)
        tables.append(table(define(catalogue.find(name), "polygon"), top))
    assert tables[0] == tables[1]
    assert any(tables[0].values())


@pytest.mark.parametrize(("name", "top"), (("manhattan", 20), ("l-lattice", 20)))
def test_both_rootings_agree_one_way(name: str, top: int, monkeypatch: pytest.MonkeyPatch) -> None:
    """The same where the senses of a polygon are different polygons."""
    test_both_rootings_agree(name, top, monkeypatch)
