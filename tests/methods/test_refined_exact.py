"""Exactness of refined sums: slices so short that 64 bits hold whatever a moment adds, and Python's integers beyond."""

from __future__ import annotations

from collections.abc import Iterator
from random import Random
from typing import Any

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from fleetcount.errors import InputError
from fleetcount.lattice import catalogue
from fleetcount.methods.direct import keys, refined_reach
from fleetcount.methods.direct.kernels import NODES
from fleetcount.methods.direct.keys import Prefix
from fleetcount.methods.direct.method import Endless
from fleetcount.methods.direct.refined_ground import RefinedGround, refined_ground
from fleetcount.methods.direct.refined_search import RefinedSearch, bound
from fleetcount.methods.direct.slices import LEAST_SLICE, SLICE_NODES
from fleetcount.series.defining import define
from fleetcount.series.definition import Series
from fleetcount.series.forms import dot
from tests.methods import lattices
from tests.methods.refined import by_kernel, interpreted, one_width, refined_series
from tests.methods.splitting import METHOD, in_pieces, slices_of
from tests.strategies import small_lattices

ROOT = Prefix(0, False, ())


@pytest.fixture(scope="module", autouse=True)
def as_python() -> Iterator[None]:
    with one_width(), interpreted():
        yield


def square(squared_step: int, **more: Any) -> Series:
    """Walks on a square lattice whose steps have that squared length, with the moment that grows fastest."""
    metric = f'[["{squared_step}", "0"], ["0", "{squared_step}"]]'
    lattice = lattices.lattice({"a": ("0", "0")}, [("a", "a", (1, 0)), ("a", "a", (0, 1))], metric=metric)
    return define(lattice, "walk", moment=["gyration2", "end2"], **more)


def test_longer_steps_make_shorter_slices() -> None:
    """The greater the squared distances, the fewer nodes a slice may visit; what is too great is refused."""
    found = [bound(refined_ground(square(step), ROOT, 60)) for step in (1, 2**8, 2**16, 2**20)]
    assert found[0] == SLICE_NODES
    assert found == sorted(found, reverse=True) and found[-1] < found[0]
    with pytest.raises(InputError, match="too large for 64-bit slices") as error:
        bound(refined_ground(square(2**23), ROOT, 110))
    assert "\n" not in str(error.value)


@pytest.mark.parametrize(("step", "top"), ((1, 60), (2**8, 80), (2**16, 60), (2**20, 60), (2**23, 40)))
def test_the_bound_is_one(step: int, top: int) -> None:
    """So many nodes, each adding the greatest value by the greatest weight, and what the last one leads to, stay
    below 2**63: gyration2 of a straight walk of n steps is n (n + 1)^2 (n + 2) / 12 (by induction, from memory)."""
    ground = refined_ground(square(step), ROOT, top)
    most = bound(ground)
    straight = top * (top + 1) ** 2 * (top + 2) // 12 * step
    assert LEAST_SLICE <= most <= SLICE_NODES
    assert (most + ground.arms + ground.arms**2) * straight * 8 < 2**63


def watched(monkeypatch: pytest.MonkeyPatch) -> list[tuple[int, int, RefinedGround]]:
    """What each slice of all searches did: nodes, the greatest sum, and on what ground."""
    seen: list[tuple[int, int, RefinedGround]] = []
    call = RefinedSearch._call

    def look(self: RefinedSearch, limit: int) -> bool:
        done = call(self, limit)
        seen.append((self._reg(NODES), int(abs(self._own.sums).max()), self.ground))
        return done

    monkeypatch.setattr(RefinedSearch, "_call", look)
    return seen


@settings(max_examples=40, deadline=None, suppress_health_check=[HealthCheck.too_slow])
@given(refined_series(small_lattices()), st.integers(2, 5))
def test_no_node_adds_more_than_the_bound(series: Series, top: int) -> None:
    """In every slice no sum exceeds what the proof allows for its nodes."""
    with pytest.MonkeyPatch.context() as patch, slices_of(3):
        seen = watched(patch)
        by_kernel(series, top)
    for nodes, greatest, ground in seen:
        each = (ground.top + 2) ** 2 * max(ground.farthest, int(abs(ground.tables.square).max()), 1)
        assert greatest <= max(nodes, 1) * (ground.arms + 1) * max(ground.states.orders) * each
        assert nodes <= 3 + ground.arms + ground.arms**2


def test_long_steps_are_exact() -> None:
    """Long steps multiply the moments of short ones exactly, in pieces or none."""
    top, step = 7, 2**23
    short, long = by_kernel(square(1), top), by_kernel(square(step), top)
    assert {place: (c, g * step, e * step) for place, (c, e, g) in short.sorted_rows()} == {
        place: (c, g, e) for place, (c, e, g) in long.sorted_rows()
    }
    with slices_of(100):
        sums = in_pieces(square(step), top, Random(5), pieces=20)
    assert METHOD.assemble(square(step), sums) == long


def test_sums_are_python_integers() -> None:
    """Nothing of numpy leaves a search: places and sums of tallies, prefixes and factors are Python integers."""
    series = square(3, by=["contacts", "end"])
    counted = METHOD.count(series, range(6), "0:", Endless())
    assert {type(x) for row in counted.explored.rows.items() for part in row for x in part} == {int}
    assert type(counted.nodes) is int
    with slices_of(5):
        searching = RefinedSearch(refined_ground(series, ROOT, 6), (0,))
        searching.slice()
        found = list(searching.rest())
    assert found
    assert {type(x) for arms, factor in found for x in (*arms, factor)} == {int}
    assert {type(x) for row in searching.tally().rows.items() for part in row for x in part} == {int}


@pytest.mark.parametrize(
    ("name", "kind", "top", "words", "reason"),
    (
        ("square", "walk", 20, {"by": ["span:1023,1022", "span:1021,-1"]}, "GB of memory"),
        ("square", "walk", 10**9, {"by": ["contacts"]}, "GB or more of memory"),
        ("ladder", "walk", 8000, {"moment": ["gyration2"]}, "too large for 64-bit slices"),
        ("ladder", "walk", -1, {"moment": ["gyration2"]}, "negative"),
    ),
)
def test_absurd_lengths(name: str, kind: str, top: int, words: dict[str, Any], reason: str) -> None:
    """Sums that do not fit, into memory or into 64 bits, are refused before anything is counted, in one line."""
    series = define(catalogue.find(name), kind, **words)
    with pytest.raises(InputError, match=reason) as error:
        METHOD.check_reach(series, top)
    assert "\n" not in str(error.value)


@settings(max_examples=40, deadline=None, suppress_health_check=[HealthCheck.too_slow])
@given(refined_series(small_lattices()), st.integers(1, 8))
def test_what_passes_the_check_can_be_counted(series: Series, top: int) -> None:
    """The values that a check expects of a statistic are no fewer than a ground has, nor are the distances."""
    if series.plain:
        return
    METHOD.check_reach(series, top)
    for unit in METHOD.roots(series, range(top + 1)):
        root = keys.parse(unit.key)
        ground = refined_ground(series, root, top)
        longest = max(
            dot(series.lattice, step, step) for step in map(series.lattice.step, series.lattice.arcs)
        )
        assert ground.farthest <= top**2 * longest
        for one, measure in zip(series.statistics, ground.measures, strict=True):
            expected = refined_reach._values(series, one, top, ground.patch.sites)
            assert measure.size <= expected
