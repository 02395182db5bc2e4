"""The pure core of the coordinator: what goes out, how much of it, and who is blamed when processes die."""

from __future__ import annotations

from collections.abc import Sequence

import hypothesis.strategies as st
import pytest
from hypothesis import given
from hypothesis.stateful import RuleBasedStateMachine, initialize, invariant, precondition, rule

from fleetcount.errors import InternalError
from fleetcount.fleet.core import (
    DEATHS_TO_FAIL,
    DEATHS_TO_SUSPECT,
    LEAST_SECONDS,
    MOST_SECONDS,
    MOST_UNITS,
    USUAL_SECONDS,
    Bundle,
    Core,
    Pace,
    budget_for,
)
from fleetcount.ledger.states import State
from fleetcount.ledger.store import UnitRow

RATE = 1000.0


def row(key: str, expected: float = 1.0) -> UnitRow:
    return UnitRow("r", key, None, 1, 1, expected, State.WAITING, "unchecked", 0, None, None)


def core(budget: float = 10.0) -> Core:
    return Core(budget, Pace(RATE))


def dealt(core: Core, waiting: Sequence[UnitRow], slots: int, remaining: float = 1e9) -> list[Bundle]:
    """Deal to all free cores and send."""
    tokens = [f"t{len(core.out)}{i}" for i in range(core.room(slots))]
    bundles = core.deal(waiting, tokens, remaining, slots)
    for bundle in bundles:
        core.sent(bundle)
    return bundles


def test_a_bundle_fills_its_budget() -> None:
    """Units go out, the largest first, until their expected work fills the seconds of the bundle."""
    waiting = [row(f"u{i}", expected) for i, expected in enumerate((6000.0, 5000.0, 3000.0, 2000.0, 1.0))]
    first, second = dealt(core(10.0), waiting, slots=2)
    assert first.keys == ["u0", "u1"] and first.seconds == 10.0
    assert second.keys == ["u2", "u3", "u4"]


def test_a_bundle_has_a_greatest_length() -> None:
    """However small the units are, a bundle stays short enough to be told to a machine in one message."""
    (bundle,) = dealt(core(), [row(f"u{i}", 0.0) for i in range(MOST_UNITS + 50)], slots=1)
    assert len(bundle.units) == MOST_UNITS


def test_the_window_is_one_bundle_a_core() -> None:
    """Nothing is sent that would have to wait on a worker; what comes back makes room for one more."""
    one, waiting = core(), [row(f"u{i}", 1e9) for i in range(9)]
    assert len(dealt(one, waiting, slots=3)) == 3
    assert one.room(3) == 0 and dealt(one, waiting[3:], slots=3) == []
    one.back(next(iter(one.out)), 10, 1.0)
    assert one.room(3) == 1 and one.room(2) == 0 and one.room(0) == 0


def test_bundles_grow_shorter_towards_the_end() -> None:
    """Half of what is left for each core, never more than the budget and never less than a second."""
    one = core(100.0)
    assert one.seconds(RATE * 1000 * 4, slots=4) == 100.0
    assert one.seconds(RATE * 60 * 4, slots=4) == pytest.approx(30.0)
    assert one.seconds(RATE, slots=4) == LEAST_SECONDS
    assert one.seconds(0.0, slots=0) == LEAST_SECONDS


def test_the_budget_keeps_the_ledger_small() -> None:
    """A short count has bundles of some seconds, a long one longer ones, never beyond a quarter of an hour."""
    assert budget_for(60.0, 1e9) == USUAL_SECONDS
    assert USUAL_SECONDS < budget_for(1e6, 1e9) < budget_for(1e6, 1e8) <= MOST_SECONDS
    assert budget_for(1e300, 1e9) == MOST_SECONDS


def test_the_pace_is_learnt() -> None:
    """The rate follows what bundles really did, the last ones most; a bundle without work says nothing."""
    pace = Pace(1.0)
    pace.learn(0, 0.0)
    assert pace.rate == 1.0
    for _ in range(50):
        pace.learn(5000, 1.0)
    assert pace.rate == pytest.approx(5000.0)
    for _ in range(50):
        pace.learn(100, 1.0)
    assert pace.rate < 200.0


def test_an_unknown_token_changes_nothing() -> None:
    """What comes back under a token that is not out is none of ours."""
    one = core()
    dealt(one, [row("u")], slots=1)
    assert one.back("strange", 5, 1.0) is None and one.lost("strange") == ([], [])
    assert len(one.out) == 1 and one.pace.rate == RATE


def test_no_unit_is_out_twice() -> None:
    """Sending a unit that is out already is a broken promise, noticed at once."""
    one = core()
    one.sent(Bundle("a", (row("u"), row("v")), 1.0))
    with pytest.raises(InternalError, match="out twice"):
        one.sent(Bundle("b", (row("v"),), 1.0))


def test_a_unit_that_processes_died_over_goes_alone() -> None:
    """After two deaths a unit is out by itself, briefly, and no other suspect with it."""
    one, waiting = core(), [row(f"u{i}", 100.0) for i in range(6)]
    for _ in range(DEATHS_TO_SUSPECT):
        one.sent(Bundle("x", tuple(waiting[:3]), 1.0))
        assert one.lost("x") == (["u0", "u1", "u2"], [])
    alone, together = dealt(one, waiting, slots=2)
    assert alone.keys == ["u0"] and alone.seconds == LEAST_SECONDS
    assert together.keys == ["u3", "u4", "u5"]
    one.back(together.token, 300, 0.3)
    assert dealt(one, waiting[1:3], slots=2) == [], "a second suspect beside the first"
    one.back(alone.token, 100, 0.1)
    assert [bundle.keys for bundle in dealt(one, waiting[1:3], slots=2)] == [["u1"]]


def test_only_a_unit_that_dies_alone_fails() -> None:
    """Deaths in company are never held against a unit; enough of them alone are."""
    one, guilty = core(), row("guilty")
    for _ in range(3 * DEATHS_TO_FAIL):
        one.sent(Bundle("x", (guilty, row("other")), 1.0))
        assert one.lost("x") == (["guilty", "other"], [])
    one.sent(Bundle("x", (guilty,), 1.0))
    assert one.lost("x") == ([], ["guilty"])


class Dealing(RuleBasedStateMachine):
    """A coordinator and its machines in any order of events; some units kill whoever counts them."""

    @initialize(
        expected=st.lists(st.floats(0, 1e5), min_size=1, max_size=30),
        killers=st.sets(st.integers(0, 29), max_size=3),
        slots=st.integers(1, 5),
    )
    def begin(self, expected: list[float], killers: set[int], slots: int) -> None:
        self.core = core(5.0)
        rows = [row(f"u{i:02}", nodes) for i, nodes in enumerate(expected)]
        self.every = {unit.key: unit for unit in rows}
        self.killers = {rows[i].key for i in killers if i < len(rows)}
        self.waiting, self.done, self.failed = set(self.every), set[str](), set[str]()
        self.slots, self.numbers = slots, 0

    def _queue(self) -> list[UnitRow]:
        return sorted((self.every[key] for key in self.waiting), key=lambda unit: (-unit.expected, unit.key))

    @rule(slots=st.integers(0, 5))
    def machines_come_and_go(self, slots: int) -> None:
        self.slots = slots

    @precondition(lambda self: self.waiting)
    @rule()
    def deal(self) -> None:
        room = self.core.room(self.slots)
        tokens = [str(self.numbers + i) for i in range(room)]
        self.numbers += room
        remaining = sum(self.every[key].expected for key in self.waiting)
        was_out = any(self.core.suspect(key) for out in self.core.out.values() for key in out.keys)
        bundles = self.core.deal(self._queue(), tokens, remaining, self.slots)
        alone = [bundle for bundle in bundles if any(map(self.core.suspect, bundle.keys))]
        assert all(len(bundle.units) == 1 for bundle in alone) and len(alone) <= (0 if was_out else 1)
        for bundle in bundles:
            assert bundle.units and set(bundle.keys) <= self.waiting
            self.waiting -= set(bundle.keys)
            self.core.sent(bundle)
        self.core.validate()

    @precondition(lambda self: self.core.out)
    @rule(data=st.data(), touched=st.integers(0, 30))
    def back(self, data: st.DataObject, touched: int) -> None:
        token = data.draw(st.sampled_from(sorted(self.core.out)))
        if self.killers & set(self.core.out[token].keys):
            return
        bundle = self.core.back(token, 10, 0.1)
        assert bundle is not None
        self.done |= set(bundle.keys[:touched])
        self.waiting |= set(bundle.keys[touched:])

    @precondition(lambda self: self.core.out)
    @rule(data=st.data())
    def lost(self, data: st.DataObject) -> None:
        token = data.draw(st.sampled_from(sorted(self.core.out)))
        keys = self.core.out[token].keys
        again, failed = self.core.lost(token)
        assert sorted(again + failed) == sorted(keys)
        self.waiting |= set(again)
        self.failed |= set(failed)

    @invariant()
    def every_unit_is_in_one_place(self) -> None:
        out = [key for bundle in self.core.out.values() for key in bundle.keys]
        places = [*self.waiting, *out, *self.done, *self.failed]
        assert sorted(places) == sorted(self.every)

    def teardown(self) -> None:
        """From wherever it stands, with one core left, all but the killers get counted and only they fail."""
        if not hasattr(self, "core"):
            return
        for token in list(self.core.out):
            bundle = self.core.back(token, 0, 0.0)
            assert bundle is not None
            self.waiting |= set(bundle.keys)
        before = set(self.failed)
        for _ in range(len(self.every) * (DEATHS_TO_FAIL + 2) + 100):
            if not self.waiting:
                break
            self.slots = 2
            self.deal()
            killed = any(self.killers & set(bundle.keys) for bundle in self.core.out.values())
            for token in list(self.core.out):
                if killed:  # both threads of the process die
                    again, failed = self.core.lost(token)
                    self.waiting |= set(again)
                    self.failed |= set(failed)
                else:
                    bundle = self.core.back(token, 10, 0.1)
                    assert bundle is not None
                    self.done |= set(bundle.keys)
        assert not self.waiting and not self.core.out
        assert self.failed - before <= self.killers


TestDealing = Dealing.TestCase


@given(st.floats(0, 1e18), st.floats(1e3, 1e15))
def test_the_budget_is_always_usable(seconds: float, size: float) -> None:
    """Whatever is forecast, a bundle lasts between some seconds and a quarter of an hour."""
    assert USUAL_SECONDS <= budget_for(seconds, size) <= MOST_SECONDS
