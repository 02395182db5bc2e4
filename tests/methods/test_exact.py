"""Exactness: no 64-bit sum can overflow, and everything beyond a slice is Python's integers."""

from __future__ import annotations

from dataclasses import replace
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from fleetcount.errors import InputError
from fleetcount.lattice import catalogue
from fleetcount.lattice.checks import GREATEST_ARMS
from fleetcount.lattice.model import Lattice
from fleetcount.lattice.symmetry import stabilizer
from fleetcount.methods.direct import search, slices
from fleetcount.methods.direct.ground import ground
from fleetcount.methods.direct.kernels import NODES, VISITED
from fleetcount.methods.direct.keys import Prefix
from fleetcount.methods.direct.method import Endless
from fleetcount.methods.direct.search import Search
from fleetcount.series.defining import define
from tests.methods.splitting import METHOD, slices_of
from tests.strategies import small_lattices

ROOT = Prefix(0, False, ())


def watched(monkeypatch: pytest.MonkeyPatch) -> list[tuple[int, int, int]]:
    """What each slice of all searches did: nodes, greatest sum, and what the bound allows one node to add."""
    seen: list[tuple[int, int, int]] = []
    call = Search._call

    def look(self: Search, limit: int) -> bool:
        done = call(self, limit)
        per_node = self.ground.arms**3 * max(self.ground.states.orders)
        assert self._own.sums.dtype == np.int64
        seen.append((self._reg(NODES), int(self._own.sums.max()), per_node))
        return done

    monkeypatch.setattr(Search, "_call", look)
    return seen


@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.too_slow])
@given(small_lattices(), st.sampled_from(("walk", "polygon")), st.integers(4, 9))
def test_no_node_adds_more_than_the_bound(lattice: Lattice, kind: str, top: int) -> None:
    """In every slice no sum exceeds nodes times arms cubed times the order of the group, which the proof uses."""
    series = define(lattice, kind)
    with pytest.MonkeyPatch.context() as patch, slices_of(3):
        seen = watched(patch)
        for root in METHOD.roots(series, range(top + 1)):
            METHOD.count(series, range(top + 1), root.key, Endless())
    for nodes, greatest, per_node in seen:
        assert 0 <= greatest <= nodes * per_node
        assert nodes <= slices.SLICE_NODES


@pytest.mark.parametrize("name", ("square", "cubic", "triangular", "hypercubic4", "manhattan"))
def test_a_slice_visits_no_more_than_allowed(name: str, monkeypatch: pytest.MonkeyPatch) -> None:
    """A call of a kernel visits its limit of nodes and at most what is below one node more."""
    seen = watched(monkeypatch)
    lattice = catalogue.find(name)
    arms = max(map(len, lattice.arms))
    with slices_of(4):
        METHOD.count(define(lattice, "walk"), range(10), "0:", Endless())
    assert len(seen) > 5
    assert max(nodes for nodes, _, _ in seen) <= 4 + arms * arms + arms + 1


def test_slices_never_grow_beyond_the_bound(monkeypatch: pytest.MonkeyPatch) -> None:
    """However fast a machine is, or its clock wrong, no slice is longer than the proof allows."""
    base = ground(define(catalogue.find("square"), "walk"), ROOT, 15)
    limits = []

    def run(*arguments: Any) -> bool:
        limits.append(arguments[-1])
        return base.run(*arguments)

    ticks = iter(range(10**9))
    monkeypatch.setattr(slices, "time", SimpleNamespace(thread_time=lambda: next(ticks) * 1e-9))
    for name in ("FIRST_SLICE", "LEAST_SLICE"):
        monkeypatch.setattr(slices, name, 10)
    searching = Search(replace(base, run=run), ())
    assert searching.most == slices.SLICE_NODES
    searching.most = 700
    while not searching.slice():
        pass
    assert limits[:6] == [10, 40, 160, 640, 700, 700]
    assert max(limits) == 700


def test_the_bound_refuses_what_it_must() -> None:
    """Just below 2**63 passes, just above is refused, and the line says how much there may be."""
    arms = 64
    most = (2**63 - 1) // ((slices.SLICE_NODES + arms * arms + arms + 1) * arms**3)
    search.check_bound("own", arms, most)
    with pytest.raises(InputError, match="must stay under") as error:
        search.check_bound("own", arms, most + 1)
    assert "\n" not in str(error.value)


def test_every_lattice_that_can_be_defined_stays_within_the_bound() -> None:
    """The greatest coordination number allowed, with the greatest group in five dimensions, still passes.

    3840 = 2**5 * 5! is the order of the hyperoctahedral group, the greatest finite group of integer 5 x 5 matrices
    (common knowledge of crystallography, from memory).
    """
    assert max(len(stabilizer(catalogue.find(name), 0)) for name in catalogue.names()) == 3840
    search.check_bound("own", GREATEST_ARMS, 3840)
    assert GREATEST_ARMS < VISITED


@pytest.mark.parametrize("kind", ("walk", "polygon"))
def test_sums_are_python_integers(kind: str) -> None:
    """Nothing of numpy leaves a search: tallies hold Python integers, which have no greatest."""
    series = define(catalogue.find("square"), kind)
    counted = METHOD.count(series, range(13), "0:", Endless())
    assert {type(x) for row in counted.explored.rows.items() for part in row for x in part} == {int}
    assert type(counted.nodes) is int
    with slices_of(50):
        searching = Search(ground(series, ROOT, 12), ())
        searching.slice()
        found = list(searching.rest())
    assert {type(x) for arms, factor in found for x in (*arms, factor)} == {int}
    assert {type(x) for item in searching.sums.items() for x in item} == {int}
