"""A SQLite ledger and the one in memory, driven side by side through any story, are never told apart."""

from __future__ import annotations

import tempfile
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import hypothesis.strategies as st
import pytest
from hypothesis import HealthCheck, settings
from hypothesis.stateful import Bundle, RuleBasedStateMachine, initialize, invariant, precondition, rule

from fleetcount.errors import FleetcountError
from fleetcount.ledger.access import open_store
from fleetcount.ledger.memory import MemoryStore
from fleetcount.ledger.record import OpeningRecord, TallyRecord
from fleetcount.ledger.states import OPEN, State
from fleetcount.ledger.store import Lease, Store
from fleetcount.series.tally import Tally
from tests.ledger.builders import DEFINITION, DIGEST, GONE, answer, opening, tally

TOKENS = ("t0", "t1", "t2")
MACHINES = ("alder", "birch", "cedar")
COUNTS = st.dictionaries(st.integers(0, 9), st.integers(-(10**20), 10**20), max_size=3)


class Ledgers(RuleBasedStateMachine):
    """The two ledgers, the leases that a coordinator has in each, and what it remembers."""

    sent = Bundle("sent")

    @initialize()
    def begin(self) -> None:
        self.folder = tempfile.TemporaryDirectory()
        self.path = str(Path(self.folder.name) / "ledger.sqlite")
        self.model: Store = MemoryStore()
        self.real: Store = open_store(self.path, create=True)
        for store in (self.model, self.real):
            store.open_series(DIGEST, DEFINITION, "{}", 1)
        self.leases = self.take()
        self.readings: list[OpeningRecord] = []
        self.open_new([2, 1, -1], [3.0, 2.0, 1.0])

    def take(self) -> tuple[Lease, Lease]:
        return self.model.take(DIGEST, GONE), self.real.take(DIGEST, GONE)

    def both(
        self, act: Callable[[Store, Lease], object], leases: tuple[Lease, Lease] | None = None
    ) -> object:
        """Do the same to both; what comes back, or is raised, must be the same."""
        results = []
        for store, lease in zip((self.model, self.real), leases or self.leases, strict=True):
            try:
                results.append(act(store, lease))
            except FleetcountError as error:
                results.append((type(error), error.what))
        assert results[0] == results[1]
        return results[0]

    def keys(self, reading: OpeningRecord) -> list[str]:
        return [row.key for row in self.model.units(reading.reading)]

    # The coordinator at work

    def open_new(self, factors: list[int], work: list[float]) -> None:
        new = opening([(f"{i}:", factor) for i, factor in enumerate(factors)])
        self.both(lambda store, lease: store.open_reading(lease, new.text(), work))
        self.readings.append(new)

    @precondition(lambda self: len(self.readings) < 3)
    @rule(data=st.data(), factors=st.lists(st.integers(-5, 5).filter(bool), max_size=4))
    def open_a_reading(self, factors: list[int], data: st.DataObject) -> None:
        self.open_new(
            factors, data.draw(st.lists(st.floats(0, 1e12), min_size=len(factors), max_size=len(factors)))
        )

    @rule(data=st.data(), token=st.sampled_from(TOKENS), limit=st.integers(1, 3))
    def hand_out(self, data: st.DataObject, token: str, limit: int) -> None:
        reading = data.draw(st.sampled_from(self.readings)).reading
        keys = [row.key for row in self.model.waiting(reading, limit)]
        self.both(lambda store, lease: store.hand_out(lease, reading, keys, token))

    @rule(data=st.data(), token=st.sampled_from(TOKENS), machine=st.sampled_from((None, *MACHINES)))
    def hand_back(self, data: st.DataObject, token: str, machine: str | None) -> None:
        """All units are named, but only those that are out under the token may come back."""
        new = data.draw(st.sampled_from(self.readings))
        failed = f"broke on {machine}" if machine else None
        self.both(
            lambda store, lease: store.hand_back(
                lease, new.reading, self.keys(new), token, failed=failed, machine=machine or "", machines=2
            )
        )

    @rule(data=st.data())
    def readmit(self, data: st.DataObject) -> None:
        new = data.draw(st.sampled_from(self.readings))
        self.both(lambda store, lease: store.readmit(lease, new.reading, self.keys(new)))

    @rule(
        target=sent,
        data=st.data(),
        token=st.sampled_from(TOKENS),
        counts=COUNTS,
        factors=st.lists(st.integers(-3, 3).filter(bool), max_size=3),
    )
    def count(
        self, data: st.DataObject, token: str, counts: dict[int, int], factors: list[int]
    ) -> TallyRecord | None:
        """Some unit that waits is handed out; the answer to one that is out comes in, or one that was once."""
        rows = [row for new in self.readings for row in self.model.units(new.reading)]
        waiting = [row for row in rows if row.state is State.WAITING]
        if waiting:
            row = data.draw(st.sampled_from(waiting))
            self.both(lambda store, lease: store.hand_out(lease, row.reading, [row.key], token))
        else:
            row = data.draw(st.sampled_from(rows))
        (new,) = [new for new in self.readings if new.reading == row.reading]
        children = [(f"{row.key}.{i}", factor) for i, factor in enumerate(factors)]
        made = tally(new, row.key, row.factor, counts, children, machine=data.draw(st.sampled_from(MACHINES)))
        if data.draw(st.integers(0, 3)):
            self.both(lambda store, lease: store.accept(lease, [answer(made, token)]))
        return made

    @rule(some=st.lists(sent, max_size=3), token=st.sampled_from(TOKENS), change=st.booleans())
    def answers_again(self, some: list[TallyRecord | None], token: str, change: bool) -> None:
        """Answers that were sent before come again, as they were or with other numbers."""
        batch = [
            answer(replace(made, rows=made.rows + Tally.of_counts({5: 1})) if change else made, token)
            for made in some
            if made is not None
        ]
        self.both(lambda store, lease: store.accept(lease, batch))

    @rule(data=st.data())
    def finish(self, data: st.DataObject) -> None:
        reading = data.draw(st.sampled_from(self.readings)).reading
        self.both(lambda store, lease: store.finish_reading(lease, reading))

    # What happens to it

    @rule()
    def crash(self) -> None:
        """The coordinator dies without a word and is started again."""
        self.real.close()
        self.real = open_store(self.path)
        self.leases = self.take()

    @rule(data=st.data(), token=st.sampled_from(TOKENS))
    def lose_the_lease(self, data: st.DataObject, token: str) -> None:
        """Another takes over; whatever the old one still tries changes nothing."""
        old, self.leases = self.leases, self.take()
        assert old[0].token != self.leases[0].token
        if self.readings:
            new = data.draw(st.sampled_from(self.readings))
            keys = self.keys(new)
            tries: list[Callable[[Store, Lease], object]] = [
                lambda store, lease: store.hand_out(lease, new.reading, keys, token),
                lambda store, lease: store.hand_back(lease, new.reading, keys, token),
                lambda store, lease: store.accept(
                    lease, [answer(tally(new, keys[0], 1, {0: 1}), token)] if keys else []
                ),
                lambda store, lease: store.open_reading(lease, opening([]).text(), []),
                lambda store, lease: store.renew(lease),
            ]
            for act in tries:
                kind, what = self.both(act, old)  # type: ignore[misc]
                assert issubclass(kind, FleetcountError) and "does not hold it any more" in what

    # What must be true all the time

    @invariant()
    def the_same(self) -> None:
        if hasattr(self, "readings"):
            for new in self.readings:
                self.both(lambda store, _, r=new.reading: store.units(r))  # type: ignore[misc]
                self.both(lambda store, _, r=new.reading: store.waiting(r, 3))  # type: ignore[misc]
                self.both(lambda store, _, r=new.reading: store.census(r))  # type: ignore[misc]
                self.both(lambda store, _, r=new.reading: [one.key for one in store.latest(r, 3)])  # type: ignore[misc]
                self.both(lambda store, _, r=new.reading: replace(store.merge(DIGEST, r), head=""))  # type: ignore[misc]
            self.both(lambda store, _: [(event.kind, event.text) for event in store.events(DIGEST)])
            self.both(lambda store, _: [row.records for row in store.series()])
            self.both(
                lambda store, _: [(row.reading, row.finished is None) for row in store.readings(DIGEST)]
            )

    @invariant()
    def the_law(self) -> None:
        """Whatever happened, each unit has one state, and its weight is its factor times its parent's weight."""
        for new in getattr(self, "readings", []):
            rows = {row.key: row for row in self.real.units(new.reading)}
            for row in rows.values():
                above = rows[row.parent].weight if row.parent is not None else 1
                assert row.weight == row.factor * above
                assert row.parent is None or rows[row.parent].state is State.DIVIDED
                assert (row.token is not None) == (row.state is State.OUT)
            census = self.real.census(new.reading)
            assert census.units == len(rows)
            assert census.complete == (not any(row.state in OPEN for row in rows.values()))

    def teardown(self) -> None:
        if hasattr(self, "real"):
            self.real.close()
            self.folder.cleanup()


TestLedgers = Ledgers.TestCase
TestLedgers.settings = settings(
    max_examples=20,
    stateful_step_count=30,
    deadline=None,
    suppress_health_check=[HealthCheck.too_slow, HealthCheck.data_too_large],
)


@pytest.mark.long
def test_long_stories() -> None:
    """The same with many more and longer stories."""
    from hypothesis.stateful import run_state_machine_as_test

    run_state_machine_as_test(
        Ledgers, settings=settings(TestLedgers.settings, max_examples=300, stateful_step_count=50)
    )
