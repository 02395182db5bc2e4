"""What a count is expected to cost: floats that order the work and never enter a tally."""

from __future__ import annotations

import itertools
import math

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from fleetcount.errors import InputError
from fleetcount.lattice import catalogue
from fleetcount.lattice.model import Lattice
from fleetcount.methods.direct import calibration, keys
from fleetcount.methods.direct import method as direct
from fleetcount.methods.direct.calibration import Calibration, Calibrator
from fleetcount.methods.direct.kernels import VISITED
from fleetcount.methods.direct.method import DirectMethod, Endless
from fleetcount.methods.direct.pieces import state_after
from fleetcount.methods.direct.symmetry_states import states_of
from fleetcount.methods.face import Child, Word
from fleetcount.series.defining import define
from fleetcount.series.definition import Series
from tests.methods.splitting import METHOD, After, slices_of
from tests.strategies import small_lattices


@st.composite
def calibrations(draw: st.DrawFn) -> Calibration:
    trial = Calibrator(draw(st.integers(0, 6)))
    for nodes in draw(st.lists(st.integers(0, 10**9), min_size=1, max_size=12)):
        trial.add({0: nodes}, draw(st.floats(0, 1)))
    return trial.result()


@given(calibrations())
def test_a_longer_reach_never_needs_fewer_nodes(known: Calibration) -> None:
    """Expected nodes grow with the reach, are those that were measured where they were, and never overflow."""
    reaches = [*range(60), 10**3, 10**4, 10**6, 10**9, 10**12, 10**400]
    totals = [known.total(reach) for reach in reaches]
    assert all(a <= b * (1 + 1e-9) for a, b in itertools.pairwise(totals))
    assert all(math.isfinite(total) and total >= 1 for total in totals)
    assert known.total(known.reach) == known.nodes[-1]
    assert math.isfinite(sum(totals) / known.rate)


@settings(max_examples=30, deadline=None, suppress_health_check=[HealthCheck.too_slow])
@given(small_lattices(), st.sampled_from(("walk", "polygon")), st.integers(4, 9))
def test_children_share_what_is_expected_of_their_parent(lattice: Lattice, kind: str, top: int) -> None:
    """The nodes expected of a unit's children add up to its own, factors and symmetries notwithstanding."""
    series, lengths = define(lattice, kind), range(top + 1)
    for root in METHOD.roots(series, lengths):
        children = METHOD.divide(series, lengths, root.key).children
        assert all(child.expected >= 1 and math.isfinite(child.expected) for child in children)
        orders = [_order(series, child.key) for child in children]
        if not children or min(child.expected for child in children) == 1:
            continue
        whole = root.expected * _order(series, root.key)
        parts = [c.expected * o * c.factor for c, o in zip(children, orders, strict=True)]
        assert sum(parts) == pytest.approx(whole)


def _order(series: Series, key: str) -> int:
    """Symmetries that keep a prefix."""
    prefix = keys.parse(key)
    states = states_of(series, prefix.start, prefix.least)
    return states.orders[state_after(series, states, prefix)[0]]


@pytest.mark.parametrize(
    ("name", "kind", "top"),
    (
        ("square", "walk", 17),
        ("cubic", "walk", 11),
        ("triangular", "walk", 10),
        ("dice", "walk", 13),
        ("square", "polygon", 18),
        ("cubic", "polygon", 12),
        ("honeycomb", "polygon", 26),
    ),
)
def test_expected_work_is_of_the_right_size(
    name: str, kind: str, top: int, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Together, units planned and units handed back need the nodes that were expected, within a factor of two."""
    monkeypatch.setattr(calibration, "ALL_SECONDS", 1.0)
    direct._calibration.cache_clear()
    series, lengths = define(catalogue.find(name), kind), range(top + 1)
    units: list[Child] = list(METHOD.roots(series, lengths))
    for _ in range(4):
        units = [c for unit in units for c in METHOD.divide(series, lengths, unit.key).children]
    assert 0.5 < _expected_over_found(series, top, units) < 2
    root = max(METHOD.roots(series, lengths), key=lambda unit: unit.expected)
    back: list[Child] = []
    for slices in (2, 5, 9, 14):
        with slices_of(1000):
            back += METHOD.count(series, lengths, root.key, After(slices, Word.STOP_NOW)).children
    assert 0.5 < _expected_over_found(series, top, back) < 2
    direct._calibration.cache_clear()


def _expected_over_found(series: Series, top: int, units: list[Child]) -> float:
    found = sum(METHOD.count(series, range(top + 1), unit.key, Endless()).nodes for unit in units)
    return sum(unit.expected for unit in units) / found


@pytest.mark.parametrize(
    ("name", "top"), (("square", 18), ("cubic", 12), ("triangular", 11), ("diamond", 14))
)
def test_the_rooting_that_visits_fewer_nodes_is_chosen(
    name: str, top: int, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Polygons are rooted at a fixed site or at their least one, whichever is less work at that reach."""
    monkeypatch.setattr(calibration, "ALL_SECONDS", 1.0)
    direct._calibration.cache_clear()
    series = define(catalogue.find(name), "polygon")
    nodes = {}
    for least in (False, True):
        starts = range(len(series.lattice.sites)) if least else [0]
        nodes[least] = sum(
            METHOD.count(series, range(top + 1), keys.Prefix(start, least, ()).key(), Endless()).nodes
            for start in starts
        )
    assert DirectMethod()._rooted_at_least(series, top) == (nodes[True] <= nodes[False])
    direct._calibration.cache_clear()


def test_a_forecast_is_plausible() -> None:
    """Nodes and seconds are positive, shares are cumulative, the spread is at least one."""
    forecast = METHOD.forecast(define(catalogue.find("square"), "walk"), range(31))
    assert len(forecast.shares) == 31
    assert forecast.shares[-1] == forecast.nodes > 0
    assert list(forecast.shares) == sorted(forecast.shares)
    assert forecast.seconds > 0 and forecast.spread >= 1


@pytest.mark.parametrize(
    ("name", "kind", "top", "reason"),
    (
        ("square", "walk", -1, "negative"),
        ("square", "polygon", -5, "negative"),
        ("cubic", "walk", 10_000, "GB of memory"),
        ("hypercubic5", "walk", 80, "GB of memory"),
        ("square", "walk", 10**9, "GB"),
        ("square", "walk", 10**30, "GB"),
        ("ladder", "walk", 20_000, "ask for at most 8192"),
    ),
)
def test_absurd_lengths(name: str, kind: str, top: int, reason: str) -> None:
    """A length that is negative, or needs more memory than there is, is refused in a line that says how much."""
    series = define(catalogue.find(name), kind)
    with pytest.raises(InputError, match=reason) as error:
        METHOD.check_reach(series, top)
    assert "\n" not in str(error.value)


def test_the_greatest_length_by_memory_is_within_the_marks() -> None:
    """Lengths that pass the check are within what the kernels' marks can tell apart."""
    METHOD.check_reach(define(catalogue.find("square"), "walk"), 60)
    METHOD.check_reach(define(catalogue.find("ladder"), "polygon"), VISITED // 2)
