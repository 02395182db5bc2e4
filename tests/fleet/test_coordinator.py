"""The coordinator's loop against crews that misbehave: nothing is lost, nothing counts twice, all is handed back."""

from __future__ import annotations

import time
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

import hypothesis.strategies as st
import pytest
from hypothesis import given, settings

from fleetcount.errors import FleetError, HeldError, LedgerError, StoppedError, TrustError
from fleetcount.fleet import counting
from fleetcount.fleet.interrupt import StopFlag
from fleetcount.fleet.planning import open_reading
from fleetcount.fleet.work import HandBack, HandOut, Task
from fleetcount.ledger import leasing, tables
from fleetcount.ledger.access import open_store
from fleetcount.ledger.memory import MemoryStore
from fleetcount.ledger.record import TallyRecord, checksum
from fleetcount.ledger.states import State
from fleetcount.ledger.store import Answer, Lease, Store
from fleetcount.methods.direct.method import DirectMethod
from fleetcount.methods.face import Counted, Forecast
from fleetcount.series.tally import Tally
from tests.fleet.crews import (
    SQUARE_WALKS,
    TOP,
    Answered,
    Capricious,
    Crew,
    Recorder,
    held,
    only_reading,
    set_to_work,
    square_walks,
    states,
)

COUNTS = dict(enumerate(SQUARE_WALKS[: TOP + 1]))


def finished(store: Store, top: int = TOP) -> None:
    """The ledger holds the whole table, one tally a unit, and nothing is open."""
    table = tables.view(store, square_walks()).table
    assert list(table.counts().values()) == SQUARE_WALKS[: top + 1]
    for row in store.readings(square_walks().digest):
        merged = store.merge(square_walks().digest, row.reading)
        assert merged.complete and merged.tallies == store.census(row.reading).units > 30
        assert store.census(row.reading).states[State.OUT].units == 0


def test_a_crew_that_behaves(tmp_path: Path) -> None:
    """An ordinary count ends with the published table, and every record of its chain holds."""
    observer = Recorder()
    with open_store(str(tmp_path / "x.sqlite"), create=True) as store:
        set_to_work(store, held(store), Crew(), observer=observer)
        finished(store)
    last = observer.moments[-1]
    assert last.share == 1.0 and last.settled == last.units and last.remaining == 0.0


@settings(max_examples=15, deadline=None)
@given(st.integers(0, 2**32))
def test_answers_in_any_order(seed: int) -> None:
    """Answers late, twice, incomplete, lost or found again: the table is exact, no unit has two tallies."""
    store = MemoryStore()
    set_to_work(store, held(store), Capricious(seed))
    finished(store)


@pytest.mark.parametrize("seed", range(3))
def test_answers_in_any_order_in_a_database(seed: int, tmp_path: Path) -> None:
    """The same in SQLite, where every record of the chain is checked when the table is made."""
    with open_store(str(tmp_path / "x.sqlite"), create=True) as store:
        set_to_work(store, held(store), Capricious(seed))
        finished(store)


class Failing(Crew):
    """The unit that goes out first raises whenever it is counted."""

    bad = ""

    def answer(self, hand_out: HandOut) -> Sequence[Answered]:
        self.bad = self.bad or hand_out.units[0][0]
        good = tuple(unit for unit in hand_out.units if unit[0] != self.bad)
        back = self.count(HandOut(hand_out.task, hand_out.token, good, hand_out.seconds))
        if len(good) < len(hand_out.units):
            back.failed.append((self.bad, "ZeroDivisionError: division by zero"))
        return [(hand_out.token, back)]


def test_a_failing_unit_is_barred() -> None:
    """A unit that fails three times is barred: the error names it and its last failure, all else is counted."""
    store, crew = MemoryStore(), Failing()
    with pytest.raises(TrustError) as caught:
        set_to_work(store, held(store), crew)
    message = str(caught.value)
    assert f"unit {crew.bad}:" in message and "3 failures" in message and "division by zero" in message
    assert set(states(store)) == {State.COUNTED, State.DIVIDED, State.BARRED}
    (barred,) = store.units(only_reading(store), State.BARRED)
    assert barred.key == crew.bad and barred.attempts == 3
    assert tables.view(store, square_walks()).table.final is None


def test_a_barred_unit_that_is_let_in_again() -> None:
    """Once the cause is gone and the unit is readmitted, the count goes on to its end."""
    store, crew = MemoryStore(), Failing()
    lease = held(store)
    with pytest.raises(TrustError):
        set_to_work(store, lease, crew)
    store.readmit(lease, only_reading(store), [crew.bad])
    set_to_work(store, lease, Crew(), task=task_of(store))
    finished(store)


class Deadly(Crew):
    """Two units kill the process, and with it every bundle that is out."""

    deadly: frozenset[str] = frozenset()

    def collect(self, timeout: float) -> list[Answered]:
        queue, self.queue = self.queue, []
        self.deadly = self.deadly or frozenset(out.units[0][0] for out in queue[:2])
        if any(key in self.deadly for out in queue for key, _ in out.units):
            return [(out.token, Exception("KilledWorker")) for out in queue]
        return [(out.token, self.count(out)) for out in queue]


def test_units_that_kill_their_process() -> None:
    """Units that kill whoever counts them are barred in the end, and they alone: all else is counted."""
    store, observer, crew = MemoryStore(), Recorder(), Deadly(slots=3)
    with pytest.raises(TrustError, match="died each time"):
        set_to_work(store, held(store), crew, observer=observer)
    assert len(crew.deadly) == 2
    assert {unit.key for unit in store.units(only_reading(store), State.BARRED)} == crew.deadly
    assert set(states(store)) == {State.COUNTED, State.DIVIDED, State.BARRED}
    assert any("was lost with its process" in note for note in observer.notes)


class Stopping(Crew):
    """Raises the coordinator's stop flag after some bundles; some of the rest comes back, some never."""

    def __init__(self, coordinator: StopFlag, after: int) -> None:
        super().__init__(slots=4)
        self.coordinator, self.after = coordinator, after

    def collect(self, timeout: float) -> list[Answered]:
        self.after -= 1
        if self.after <= 0:
            self.coordinator.up = True
            if self.own_stop.up:
                del self.queue[1::2]
                return super().collect(timeout)
            return []
        return super().collect(timeout)


@pytest.mark.parametrize("after", [0, 1, 5])
def test_stopping(after: int, monkeypatch: pytest.MonkeyPatch) -> None:
    """Told to stop, it takes what the machines have, puts the rest back, and the next run completes the table."""
    monkeypatch.setattr("fleetcount.fleet.coordinator._PATIENCE", 0.2)
    store, stop = MemoryStore(), StopFlag()
    lease = held(store)
    crew = Stopping(stop, after)
    with pytest.raises(StoppedError):
        set_to_work(store, lease, crew, stop=stop)
    assert crew.own_stop.up
    assert State.OUT not in states(store) and states(store)[State.WAITING] > 0
    before = store.latest(only_reading(store), 10_000)
    set_to_work(store, lease, Crew(), task=task_of(store))
    finished(store)
    assert [t.accepted for t in store.latest(only_reading(store), 10_000)][-len(before) or None :] == [
        t.accepted for t in before
    ]


def test_stopped_before_it_begins() -> None:
    """A flag that is up already stops the count before anything is handed out, also without a single core."""
    store, stop = MemoryStore(), StopFlag()
    stop.up = True
    with pytest.raises(StoppedError):
        set_to_work(store, held(store), Crew(slots=0), stop=stop)
    assert states(store) == {State.WAITING: 1} or State.OUT not in states(store)


class Broken(Crew):
    """Sends nothing back but an error, or raises one."""

    def __init__(self, error: Exception, raises: bool) -> None:
        super().__init__()
        self.error, self.raises, self.rounds = error, raises, 0

    def collect(self, timeout: float) -> list[Answered]:
        self.rounds += 1
        if self.rounds < 3:
            return super().collect(timeout)
        if self.raises:
            raise self.error
        queue, self.queue = self.queue, []
        return [(out.token, self.error) for out in queue[:1]]

    def stop(self) -> None:
        raise OSError("nobody is there any more")


@pytest.mark.parametrize("raises", [False, True])
@pytest.mark.parametrize("error", [FleetError("a worker cannot count"), LedgerError("the disk is full")])
def test_a_crew_that_breaks(error: Exception, raises: bool, monkeypatch: pytest.MonkeyPatch) -> None:
    """An error that is no lost process ends the count at once, as itself, with every unit handed back."""
    monkeypatch.setattr("fleetcount.fleet.coordinator._PATIENCE", 0.2)
    store = MemoryStore()
    lease = held(store)
    with pytest.raises(type(error), match=str(error)):
        set_to_work(store, lease, Broken(error, raises))
    assert State.OUT not in states(store)
    set_to_work(store, lease, Crew(), task=task_of(store))
    finished(store)


class Thief(Crew):
    """Takes the series away from its coordinator in the middle of the count."""

    def __init__(self, store: Store, lease: Lease) -> None:
        super().__init__()
        self.store, self.lease, self.stolen = store, lease, False

    def collect(self, timeout: float) -> list[Answered]:
        if not self.stolen and self.store.census(only_reading(self.store)).states[State.COUNTED].units > 5:
            self.store.release(self.lease)
            self.lease = self.store.take(self.lease.series, leasing.this_process())
            self.stolen = True
        return super().collect(timeout)


def test_a_series_taken_over() -> None:
    """A coordinator that has lost its series writes nothing more; the one that has it goes on to the end."""
    store = MemoryStore()
    lease = held(store)
    thief = Thief(store, lease)
    with pytest.raises(HeldError, match="does not hold it any more"):
        set_to_work(store, lease, thief)
    set_to_work(store, thief.lease, Crew(), task=task_of(store))
    finished(store)


class Forging(Crew):
    """Adds one walk of a length to the first tally that has any, checksum and all."""

    def __init__(self, length: int, honest_checksum: bool = True) -> None:
        super().__init__()
        self.length, self.honest, self.forged = length, honest_checksum, False

    def count(self, hand_out: HandOut) -> HandBack:
        back = super().count(hand_out)
        back.answers = [self._doctored(answer) for answer in back.answers]
        return back

    def _doctored(self, answer: Answer) -> Answer:
        record = TallyRecord.parse(answer.text)
        if self.forged or (self.length,) not in record.rows.rows:
            return answer
        self.forged = True
        record.rows.add(Tally.of_counts({self.length: 1}))
        text = record.text()
        return replace(answer, text=text, checksum=checksum(text) if self.honest else answer.checksum)


def test_a_tally_spoilt_on_the_way() -> None:
    """An answer that is not what its checksum says ends the count; the error names the machine."""
    store = MemoryStore()
    with pytest.raises(TrustError, match="machine "):
        set_to_work(store, held(store), Forging(5, honest_checksum=False))
    assert State.OUT not in states(store)


def test_several_readings() -> None:
    """Readings of several reaches are held against each other; the widest one gives the table."""
    store = MemoryStore()
    lease = held(store)
    for top in (7, TOP, 6):
        set_to_work(store, lease, Crew(), top)
    view = tables.view(store, square_walks())
    assert view.table.counts() == COUNTS and view.readings == 3 and view.table.complete


@pytest.mark.parametrize("first", [True, False])
def test_a_doctored_reading(first: bool) -> None:
    """One walk too many in one of two readings: no table, and the error names both and the length."""
    store = MemoryStore()
    lease = held(store)
    for top, crew in ((6, Forging(5) if first else Crew()), (TOP, Crew() if first else Forging(5))):
        set_to_work(store, lease, crew, top)
    with pytest.raises(TrustError) as caught:
        tables.view(store, square_walks())
    one, other = (row.reading[:8] for row in store.readings(square_walks().digest))
    assert "disagree at length 5" in str(caught.value)
    assert one in str(caught.value) and other in str(caught.value)


def task_of(store: Store) -> Task:
    """The one reading, to go on with."""
    return Task.of(square_walks(), only_reading(store), "direct", TOP)


def test_one_short_reading_is_enough(monkeypatch: pytest.MonkeyPatch) -> None:
    """A count that goes on takes up the short reading it had begun, and begins no other once it has the long one."""
    monkeypatch.setattr(counting, "OWN_PROCESS_SECONDS", 0.0)
    monkeypatch.setattr(counting, "SHORT_SECONDS", 0.0005)

    class Fleet(Crew):
        def __init__(self, cores: int) -> None:
            super().__init__(cores)

        def __enter__(self) -> Fleet:
            return self

        def __exit__(self, *exc: object) -> None: ...

        def launch(self, *more: object) -> None: ...

        def crew(self, stop: StopFlag) -> Crew:
            return self

    monkeypatch.setattr(counting, "LocalFleet", Fleet)
    store = MemoryStore()
    lease = held(store)
    short = open_reading(store, lease, square_walks(), "direct", 9)
    store.release(lease)
    shares = tuple(3.0**n for n in range(16))
    forecast = Forecast(shares[15], 0.0004 * shares[15] / shares[10], 1.0, shares)
    monkeypatch.setattr(DirectMethod, "forecast", lambda *_: forecast)
    table = counting.count_series(store, square_walks(), 15, counting.Options(cores=1))
    assert table[15] == 6416596
    rows = store.readings(square_walks().digest)
    assert rows[0].reading == short.reading
    assert [row.lengths for row in rows] == ["0-9", "0-15"] and all(row.finished for row in rows)


def test_the_lease_is_kept_while_nothing_is_written(monkeypatch: pytest.MonkeyPatch) -> None:
    """However long it takes to read a ledger or to start a fleet, the lease is renewed meanwhile, and given up at the
    end."""
    monkeypatch.setattr(counting, "RENEW_SECONDS", 0.02)
    store, ends = MemoryStore(), set[int]()
    store.release(held(store))
    with counting._lease(store, square_walks(), 0.0):
        for _ in range(40):
            time.sleep(0.02)
            holder = store.holder(square_walks().digest)
            assert holder is not None
            ends.add(holder[1])
    assert len(ends) > 3 and store.holder(square_walks().digest) is None


def test_barred_units_are_counted_when_they_are_let_in_again(monkeypatch: pytest.MonkeyPatch) -> None:
    """A count that ended with a barred unit goes on to its table with `readmit`, and says so before."""
    series, failing, honest = square_walks(), [True], DirectMethod.count
    DirectMethod().forecast(series, range(10))  # its trials are not what fails

    def count(self: DirectMethod, *arguments: Any, **named: Any) -> Counted:
        if failing[0]:
            raise RuntimeError("no luck")
        return honest(self, *arguments, **named)

    with MemoryStore() as store:
        monkeypatch.setattr(DirectMethod, "count", count)
        with pytest.raises(TrustError, match=r"no luck.*--readmit"):
            counting.count_series(store, series, 9, counting.Options())
        failing[0] = False
        with pytest.raises(TrustError, match="barred"):
            counting.count_series(store, series, 9, counting.Options())
        table = counting.count_series(store, series, 9, counting.Options(readmit=True))
    assert table[9] == SQUARE_WALKS[9]
