"""Objects, statistics, moments and regions: the refined loop against the plain definitions."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from random import Random

import numpy as np
import pytest
from hypothesis import HealthCheck, event, given, settings
from hypothesis import strategies as st

from fleetcount.methods.direct import keys, refined_ground
from fleetcount.methods.direct.method import Endless
from fleetcount.methods.direct.refined_ground import RefinedGround
from fleetcount.methods.direct.refined_search import RefinedSearch
from fleetcount.methods.direct.symmetry_states import without_symmetry
from fleetcount.methods.face import Word
from fleetcount.series.definition import Series
from fleetcount.series.tally import Tally
from tests.methods.refined import by_kernel, by_twin, interpreted, one_width, refined_series
from tests.methods.splitting import METHOD, After, in_pieces, keys_of, slices_of
from tests.strategies import small_lattices

many = settings(max_examples=80, deadline=None, suppress_health_check=[HealthCheck.too_slow])
anything = refined_series(small_lattices())
seeds = st.integers(0, 2**32 - 1)


@pytest.fixture(scope="module", autouse=True)
def as_python() -> Iterator[None]:
    with one_width(), interpreted():
        yield


@many
@given(anything, st.integers(0, 5))
def test_kernel_equals_twin(series: Series, top: int) -> None:
    """Whatever is asked for together, the loop's sums are those of the plain definitions."""
    event(series.object)
    assert by_kernel(series, top) == by_twin(series, top)


@many
@given(anything, st.integers(1, 5), st.sampled_from((1, 5, 40)), seeds)
def test_any_splitting_equals_none(series: Series, top: int, nodes: int, seed: int) -> None:
    """Units divided, stopped at any slice and handed back in any order add up to the count in one piece."""
    event(series.object)
    with slices_of(nodes):
        sums = in_pieces(series, top, Random(seed))
    assert METHOD.assemble(series, sums) == by_kernel(series, top)


def without_factors(base: RefinedGround) -> RefinedGround:
    """The same ground, where every arm stands for itself alone."""
    images, onward = np.ones_like(base.tables.images[:1]), np.zeros_like(base.tables.onward[:1])
    tables = base.tables._replace(images=images, onward=onward)
    return replace(base, states=without_symmetry(base.series.lattice), tables=tables)


def sums_of(base: RefinedGround, prefixes: list[tuple[int, ...]]) -> Tally:
    """The sum over prefixes of one arm, each weighted by the images that the ground gives it."""
    sums = Tally(base.series.width)
    for arms in prefixes:
        images = int(base.tables.images[base.states.first, base.root.start, arms[0]])
        if images:
            search = RefinedSearch(base, arms)
            while not search.slice():
                pass
            sums.add(search.tally(), images)
    return sums if base.series.rule.closed else METHOD.assemble(base.series, sums)


@many
@given(anything, st.integers(2, 5))
def test_symmetry_equals_none(series: Series, top: int) -> None:
    """Counting one of each class of images and multiplying gives what counting all of them gives."""
    for unit in METHOD.roots(series, range(top + 1)):
        root = keys.parse(unit.key)
        if root.least or series.plain:
            continue
        base = refined_ground.refined_ground(series, root, top)
        event(f"order {max(base.states.orders)}")
        ways = [(arm,) for arm in range(base.arms) if base.patch.next[1, arm]]
        assert sums_of(base, ways) == sums_of(without_factors(base), ways)


@many
@given(anything, st.integers(2, 5), seeds)
def test_recount_of_exactly_the_explored_part(series: Series, top: int, seed: int) -> None:
    """Counting a unit without the children that it left gives the same rows again, and leaves nothing."""
    random, lengths = Random(seed), range(top + 1)
    unit = random.choice(METHOD.roots(series, lengths)).key
    for _ in range(random.randrange(3)):
        children = METHOD.divide(series, lengths, unit).children
        unit = random.choice(children).key if children else unit
    word = random.choice((Word.TIME_UP, Word.STOP_NOW))
    with slices_of(random.choice((1, 7, 50))):
        first = METHOD.count(series, lengths, unit, After(random.randrange(4), word))
    again = METHOD.count(series, lengths, unit, Endless(), without=keys_of(first.children))
    assert again.explored == first.explored
    assert not again.children
