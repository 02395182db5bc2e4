"""What every store promises. Each store's test module subclasses `StoreContract` and gives it a store."""

from __future__ import annotations

import math
import time
import uuid
from dataclasses import replace

import pytest

from fleetcount.errors import HeldError, LedgerError, TrustError
from fleetcount.ledger import leasing, record
from fleetcount.ledger.states import State
from fleetcount.ledger.store import Machine, Store
from fleetcount.series.tally import Tally
from tests.ledger.builders import (
    DEFINITION,
    DIGEST,
    ELSEWHERE,
    GONE,
    OTHER_DEFINITION,
    OTHER_DIGEST,
    answer,
    begin,
    open_reading,
    opening,
    relabelled,
    settle,
    story,
    tally,
    unit,
)


class StoreContract:
    """Subclasses give a fixture `store`: a new, empty ledger that can be written."""

    # Series

    def test_a_series_is_opened_once(self, store: Store) -> None:
        """Opening a series a second time changes nothing."""
        store.open_series(DIGEST, DEFINITION, "first", 1)
        store.open_series(OTHER_DIGEST, OTHER_DEFINITION, "other", 2)
        store.open_series(DIGEST, DEFINITION, "second", 3)
        found = store.series()
        assert [(row.digest, row.written, row.opened, row.records, row.head) for row in found] == [
            (DIGEST, "first", 1, 0, DIGEST),
            (OTHER_DIGEST, "other", 2, 0, OTHER_DIGEST),
        ]
        assert found[0].canonical == DEFINITION

    def test_a_series_has_the_digest_of_its_definition(self, store: Store) -> None:
        """A series under a digest that is not that of its definition is refused."""
        with pytest.raises(TrustError, match="digest"):
            store.open_series("0" * 64, DEFINITION, "", 1)
        assert store.series() == []

    # The lease

    def test_a_gone_process_of_this_machine_is_succeeded_at_once(self, store: Store) -> None:
        """The same command started again after a kill does not wait for the lease."""
        begin(store, GONE)
        start = time.monotonic()
        lease = store.take(DIGEST, leasing.this_process())
        assert time.monotonic() - start < 1
        assert store.holder(DIGEST) == (leasing.this_process(), lease.ends)

    def test_a_living_holder_that_renews_is_named(self, store: Store) -> None:
        """Who comes second learns who holds the series and until when, and the holder keeps it."""
        store.lease_seconds = 1.2
        lease = begin(store, ELSEWHERE)
        thread = Renewing(store, lease)
        with (
            thread,
            pytest.raises(HeldError, match=r"process 4711 on rowan .* until \d\d:\d\d:\d\d") as caught,
        ):
            store.take(DIGEST, GONE)
        assert caught.value.exit_status == 2
        store.renew(lease)

    def test_a_lease_that_runs_out_is_taken(self, store: Store) -> None:
        """A holder of whom nothing is known is waited for until its lease ends, and no longer."""
        store.lease_seconds = 0.8
        begin(store, ELSEWHERE)
        start = time.monotonic()
        lease = store.take(DIGEST, GONE)
        assert 0.5 < time.monotonic() - start < 4
        assert lease.holder == GONE

    def test_waiting_for_a_holder(self, store: Store) -> None:
        """With `wait`, a holder that renews is waited for until it gives the lease up."""
        store.lease_seconds = 1.0
        lease = begin(store, ELSEWHERE)
        with Renewing(store, lease, release_after=1.5):
            assert store.take(DIGEST, GONE, wait=math.inf).holder == GONE

    def test_a_lease_lasts_fifteen_seconds_by_default(self, store: Store) -> None:
        """A lease ends fifteen seconds after it was taken or renewed, by the clock of the database."""
        lease = begin(store)
        assert abs(lease.ends / 1e6 - time.time() - 15) < 2
        assert store.renew(lease).ends >= lease.ends

    def test_a_released_lease_is_free(self, store: Store) -> None:
        """A lease that was given up can be taken at once, and giving it up twice does no harm."""
        lease = begin(store, ELSEWHERE)
        store.release(lease)
        assert store.holder(DIGEST) is None
        new = store.take(DIGEST, GONE)
        store.release(lease)
        assert store.renew(new).token == new.token

    def test_nobody_holds_a_series_that_is_not_there(self, store: Store) -> None:
        """Looking for the holder of an unknown series finds none; taking it is an error."""
        assert store.holder(DIGEST) is None
        with pytest.raises(LedgerError, match="no such series"):
            store.take(DIGEST, GONE)

    def test_a_lost_lease_writes_nothing(self, store: Store) -> None:
        """Whoever lost the lease can neither hand out, take back, accept, open, finish nor renew."""
        old = begin(store)
        one = open_reading(store, old, [("0:", 1), ("1:", 1)])
        store.hand_out(old, one.reading, ["0:"], "t")
        new = store.take(DIGEST, leasing.this_process())
        store.hand_out(new, one.reading, ["0:"], "t")
        before = (store.units(one.reading), store.series(), store.readings(DIGEST))
        writes = [
            lambda: store.renew(old),
            lambda: store.hand_out(old, one.reading, ["1:"], "u"),
            lambda: store.hand_back(old, one.reading, ["0:"], "t"),
            lambda: store.hand_back(old, one.reading, ["0:"], "t", failed="x", machine="alder"),
            lambda: store.readmit(old, one.reading, ["0:"]),
            lambda: store.accept(old, [answer(tally(one, "0:", 1, {0: 1}), "t")]),
            lambda: open_reading(store, old, [("2:", 1)]),
            lambda: store.finish_reading(old, one.reading),
        ]
        for write in writes:
            with pytest.raises(HeldError, match="does not hold it any more"):
                write()
        assert (store.units(one.reading), store.series(), store.readings(DIGEST)) == before

    def test_taking_over_brings_units_back(self, store: Store) -> None:
        """Units that were out when a series is taken over wait again, and no failure is counted."""
        lease = begin(store)
        one = open_reading(store, lease, [("0:", 1), ("1:", 1)])
        store.hand_out(lease, one.reading, ["1:"], "t")
        store.take(DIGEST, leasing.this_process())
        rows = store.units(one.reading)
        assert [(row.state, row.token, row.attempts) for row in rows] == [(State.WAITING, None, 0)] * 2

    # Readings

    def test_readings_in_order_of_the_chain(self, store: Store) -> None:
        """A reading has what its opening says; ids are used once; other series' openings are refused."""
        lease = begin(store)
        one, two = (
            open_reading(store, lease, [("0:", 1)]),
            open_reading(store, lease, [], lengths="3,5-7", width=3),
        )
        found = store.readings(DIGEST)
        assert [(row.reading, row.lengths, row.width, row.finished) for row in found] == [
            (one.reading, "0-9", 1, None),
            (two.reading, "3,5-7", 3, None),
        ]
        assert (found[0].purpose, found[0].method, found[0].method_version) == ("count", "direct", 1)
        with pytest.raises(LedgerError, match="open already"):
            open_reading(store, lease, [("0:", 1)], reading=one.reading)
        with pytest.raises(TrustError, match="no part of"):
            open_reading(store, lease, [("0:", 1)], digest=OTHER_DIGEST)
        with pytest.raises(TrustError, match="expected work"):
            store.open_reading(lease, opening([("0:", 1)]).text(), [])
        assert store.readings(DIGEST) == found and store.series()[0].records == 2

    def test_a_root_weighs_its_factor(self, store: Store) -> None:
        """Roots wait, have no parent, and their weight is their factor, of any size and sign."""
        lease = begin(store)
        one = open_reading(store, lease, [("0:", 10**40), ("1:", -3)])
        rows = store.units(one.reading)
        assert [(row.key, row.parent, row.factor, row.weight) for row in rows] == [
            ("0:", None, 10**40, 10**40),
            ("1:", None, -3, -3),
        ]
        assert [(row.expected, row.state, row.verdict) for row in rows] == [
            (10.0, State.WAITING, "unchecked"),
            (20.0, State.WAITING, "unchecked"),
        ]

    def test_a_reading_finishes_when_it_is_complete(self, store: Store) -> None:
        """A reading with open units cannot be finished; finishing it twice keeps the first time."""
        lease = begin(store)
        one = open_reading(store, lease, [("0:", 1)])
        with pytest.raises(LedgerError, match="no tally yet"):
            store.finish_reading(lease, one.reading)
        settle(store, lease, one, unit(store, one, "0:"), {0: 1})
        store.finish_reading(lease, one.reading)
        finished = store.readings(DIGEST)[0].finished
        assert finished is not None and abs(finished / 1e6 - time.time()) < 60
        store.finish_reading(lease, one.reading)
        assert store.readings(DIGEST)[0].finished == finished

    def test_an_unknown_reading(self, store: Store) -> None:
        """Looking at a reading that is not there finds nothing; working on it is an error."""
        lease = begin(store)
        assert store.units("x") == store.waiting("x", 5) == store.latest("x", 5) == []
        assert store.census("x").units == 0
        with pytest.raises(LedgerError, match="no such reading"):
            store.hand_out(lease, "x", ["0:"], "t")
        with pytest.raises(LedgerError, match="no such reading"):
            store.merge(DIGEST, "x")

    # Units

    def test_the_largest_wait_first(self, store: Store) -> None:
        """Waiting units come by expected work, then by the bytes of their keys."""
        lease = begin(store)
        roots = sorted([("a", 1), ("B", 1), ("é", 1), ("0:10", 1), ("0:9", 1)])
        new = opening(roots)
        work = {"a": 1.0, "B": 1.0, "é": 1.0, "0:10": 5.0, "0:9": 7.5}
        store.open_reading(lease, new.text(), [work[key] for key, _ in roots])
        assert [row.key for row in store.waiting(new.reading, 4)] == ["0:9", "0:10", "B", "a"]
        assert [row.key for row in store.units(new.reading)] == ["0:10", "0:9", "B", "a", "é"]
        assert [row.key for row in store.units(new.reading, State.WAITING, limit=2)] == ["0:10", "0:9"]
        assert store.units(new.reading, State.OUT, State.BARRED) == []

    def test_a_unit_is_handed_out_once(self, store: Store) -> None:
        """Only units that wait are handed out, in the order asked for, each once."""
        lease = begin(store)
        one = open_reading(store, lease, [("0:", 1), ("1:", 1), ("2:", 1)])
        first = store.hand_out(lease, one.reading, ["2:", "0:", "9:", "2:"], "t")
        assert [(row.key, row.state, row.token) for row in first] == [
            ("2:", State.OUT, "t"),
            ("0:", State.OUT, "t"),
        ]
        assert [row.key for row in store.hand_out(lease, one.reading, ["0:", "1:", "2:"], "u")] == ["1:"]
        assert [row.token for row in store.units(one.reading)] == ["t", "u", "t"]

    def test_handing_back_untouched(self, store: Store) -> None:
        """Only units that are out under the very token come back, with no failure counted."""
        lease = begin(store)
        one = open_reading(store, lease, [("0:", 1), ("1:", 1)])
        store.hand_out(lease, one.reading, ["0:"], "t")
        store.hand_out(lease, one.reading, ["1:"], "u")
        back = store.hand_back(lease, one.reading, ["0:", "1:"], "t")
        assert [(row.key, row.state, row.token, row.attempts) for row in back] == [
            ("0:", State.WAITING, None, 0)
        ]
        assert unit(store, one, "1:").state is State.OUT

    def test_a_failure_is_counted(self, store: Store) -> None:
        """A unit that failed waits again, with its failures counted and the last error kept."""
        lease = begin(store)
        one = open_reading(store, lease, [("0:", 1)])
        store.hand_out(lease, one.reading, ["0:"], "t")
        (row,) = store.hand_back(
            lease, one.reading, ["0:"], "t", failed="out of memory\0", machine="alder", machines=5
        )
        assert (row.state, row.attempts, row.last_error) == (State.WAITING, 1, "out of memory")

    @pytest.mark.parametrize(
        ("failed_on", "machines", "states"),
        [
            (["alder", "birch", "cedar"], 5, "wwb"),
            (["alder", "alder", "alder"], 1, "wwb"),
            (["alder", "alder", "alder", "birch", "alder", "cedar"], 5, "wwwwwb"),
            (["alder", "alder", "alder", "birch"], 2, "wwwb"),
        ],
    )
    def test_a_unit_that_fails_everywhere_is_barred(
        self, store: Store, failed_on: list[str], machines: int, states: str
    ) -> None:
        """Three failures on three machines, or on all there are, bar a unit; an event says so."""
        lease = begin(store)
        one = open_reading(store, lease, [("0:", 1)])
        found = ""
        for machine in failed_on:
            store.hand_out(lease, one.reading, ["0:"], "t")
            (row,) = store.hand_back(
                lease, one.reading, ["0:"], "t", failed="it broke", machine=machine, machines=machines
            )
            found += row.state[0]
        assert found == states and row.attempts == len(failed_on)
        (event,) = [event for event in store.events(DIGEST) if event.kind == "barred"]
        assert "0:" in event.text and "it broke" in event.text
        assert store.waiting(one.reading, 5) == store.hand_out(lease, one.reading, ["0:"], "u") == []
        assert not store.merge(DIGEST, one.reading).complete

    def test_a_barred_unit_is_readmitted_on_request(self, store: Store) -> None:
        """A barred unit that is readmitted waits with no failure; other units stay as they are."""
        lease = begin(store)
        one = open_reading(store, lease, [("0:", 1), ("1:", 1)])
        for _ in range(3):
            store.hand_out(lease, one.reading, ["0:"], "t")
            store.hand_back(lease, one.reading, ["0:"], "t", failed="x", machine="alder")
        (row,) = store.readmit(lease, one.reading, ["0:", "1:"])
        assert (row.key, row.state, row.attempts) == ("0:", State.WAITING, 0)
        assert store.hand_out(lease, one.reading, ["0:"], "u")

    # Accepting

    def test_a_tally_settles_its_unit(self, store: Store) -> None:
        """An accepted tally counts or divides its unit, and its children wait with their weights."""
        lease = begin(store)
        one = open_reading(store, lease, [("0:", 6), ("1:", 1)])
        store.hand_out(lease, one.reading, ["0:", "1:"], "t")
        batch = [
            answer(tally(one, "0:", 6, {0: 1}, [("0:0", 4), ("0:1", -2)]), "t"),
            answer(tally(one, "1:", 1, {0: 1}), "t"),
        ]
        assert store.accept(lease, batch) == ["accepted", "accepted"]
        rows = [(row.key, row.parent, row.factor, row.weight, row.state) for row in store.units(one.reading)]
        assert rows == [
            ("0:", None, 6, 6, State.DIVIDED),
            ("0:0", "0:", 4, 24, State.WAITING),
            ("0:1", "0:", -2, -12, State.WAITING),
            ("1:", None, 1, 1, State.COUNTED),
        ]
        assert store.series()[0].records == 3

    def test_a_late_answer_changes_nothing(self, store: Store) -> None:
        """An answer for a unit that waits, or is out under another token, is late."""
        lease = begin(store)
        one = open_reading(store, lease, [("0:", 1)])
        late = answer(tally(one, "0:", 1, {0: 1}, [("0:0", 1)]), "t")
        store.hand_out(lease, one.reading, ["0:"], "t")
        store.hand_back(lease, one.reading, ["0:"], "t")
        before = store.units(one.reading), store.series()
        assert store.accept(lease, [late]) == ["late"]
        assert (store.units(one.reading), store.series()) == before
        store.hand_out(lease, one.reading, ["0:"], "u")
        before = store.units(one.reading), store.series()
        assert store.accept(lease, [late]) == ["late"]
        assert (store.units(one.reading), store.series(), store.events()) == (*before, [])

    def test_a_double_answer_changes_nothing(self, store: Store) -> None:
        """The same answer again, also within one batch or from another machine, is a double."""
        lease = begin(store)
        one = open_reading(store, lease, [("0:", 1)])
        new = tally(one, "0:", 1, {0: 1}, [("0:0", 4)])
        store.hand_out(lease, one.reading, ["0:"], "t")
        assert store.accept(lease, [answer(new, "t"), answer(new, "t")]) == ["accepted", "double"]
        before = store.units(one.reading), store.series()
        assert store.accept(lease, [answer(relabelled(new, "cedar"), "u")]) == ["double"]
        assert (store.units(one.reading), store.series(), store.events()) == (*before, [])

    @pytest.mark.parametrize("change", ["rows", "factor"])
    def test_a_double_answer_with_other_numbers_is_an_alarm(self, store: Store, change: str) -> None:
        """Two tallies that left the same children must agree; if not, the first stays and all is told."""
        lease = begin(store)
        one = open_reading(store, lease, [("0:", 1)])
        new = tally(one, "0:", 1, {0: 1}, [("0:0", 4)], machine="alder")
        settle(store, lease, one, unit(store, one, "0:"), {0: 1}, [("0:0", 4)])
        other = replace(new, machine="birch", rows=Tally.of_counts({0: 2}))
        if change == "factor":
            other = replace(new, machine="birch", children=(("0:0", 5),))
        before = store.merge(DIGEST, one.reading)
        assert store.accept(lease, [answer(other, "u")]) == ["disputed"]
        (event,) = store.events(DIGEST)
        assert event.kind == "dispute" and "0:" in event.text and "birch" in event.text
        assert unit(store, one, "0:").verdict == "disputed"
        assert store.merge(DIGEST, one.reading) == replace(before, disputed=("0:",))

    def test_two_stops_of_one_unit_are_not_compared(self, store: Store) -> None:
        """A unit may stop anywhere: a double answer that left other children contradicts nothing."""
        lease = begin(store)
        one = open_reading(store, lease, [("0:", 1)])
        settle(store, lease, one, unit(store, one, "0:"), {0: 1}, [("0:0", 4)])
        further = tally(one, "0:", 1, {0: 1, 1: 4}, [("0:0.0", 4), ("0:0.1", 8)])
        assert store.accept(lease, [answer(further, "u")]) == ["double"]
        assert store.events() == [] and len(store.units(one.reading)) == 2

    @pytest.mark.parametrize(
        "kind",
        ["checksum", "json", "format", "text", "unit", "reading", "series", "factor", "lengths", "method",
         "method_version", "width", "nodes", "expected", "child", "zero factor", "order", "seconds"],
    )  # fmt: skip
    def test_an_answer_that_does_not_fit_is_refused(self, store: Store, kind: str) -> None:
        """What is not exactly a tally of its unit is refused with an event, and the unit is still out."""
        lease = begin(store)
        one = open_reading(store, lease, [("0:", 1), ("1:", 1)])
        store.hand_out(lease, one.reading, ["0:", "1:"], "t")
        right = tally(one, "0:", 1, {0: 1}, [("0:0", 4), ("0:1", 1)])
        wrong = answer(_spoilt(right, kind), "t")
        text = wrong.text
        if kind == "checksum":
            wrong = replace(wrong, checksum="0" * 64)
        elif kind == "json":
            text = text[:-1]
        elif kind == "format":
            text = text.replace("fleetcount tally", "fleetcount opening")
        elif kind == "text":
            text = text.replace('"nodes":"7"', '"nodes":"+7"')
        elif kind == "expected":
            wrong = replace(wrong, expected=[1.0])
        elif kind == "order":
            text = text.replace('[["0:0","4"],["0:1","1"]]', '[["0:1","1"],["0:0","4"]]')
        elif kind == "seconds":
            wrong = replace(wrong, seconds=math.nan)
        if text != wrong.text:
            wrong = replace(wrong, text=text, checksum=record.checksum(text))
        before = store.units(one.reading), store.series()
        good = answer(tally(one, "1:", 1, {0: 1}), "t")
        assert store.accept(lease, [wrong]) == ["refused"]
        assert (store.units(one.reading), store.series()) == before
        assert [event.kind for event in store.events(DIGEST)] == ["refused"]
        assert store.accept(lease, [wrong, good]) == ["refused", "accepted"]
        assert store.accept(lease, [answer(right, "t")]) == ["accepted"]
        store.merge(DIGEST, one.reading)

    def test_a_child_has_one_parent(self, store: Store) -> None:
        """A tally whose child is a unit already, also since this very batch, is refused: no overlap."""
        lease = begin(store)
        one = open_reading(store, lease, [("0:", 1), ("1:", 1)])
        store.hand_out(lease, one.reading, ["0:", "1:"], "t")
        batch = [
            answer(tally(one, "0:", 1, {0: 1}, [("x", 4)]), "t"),
            answer(tally(one, "1:", 1, {0: 1}, [("x", 4)]), "t"),
        ]
        assert store.accept(lease, batch) == ["accepted", "refused"]
        assert [row.key for row in store.units(one.reading)] == ["0:", "1:", "x"]

    def test_an_empty_batch(self, store: Store) -> None:
        """No answers, no verdicts, and no keys, no units."""
        lease = begin(store)
        one = open_reading(store, lease, [("0:", 1)])
        assert store.accept(lease, []) == [] == store.hand_out(lease, one.reading, [], "t")

    def test_a_large_batch(self, store: Store) -> None:
        """More units and children than a database takes variables in one question."""
        lease = begin(store)
        keys = sorted(f"0:{i}" for i in range(1700))
        one = open_reading(store, lease, [(key, 2) for key in keys])
        assert len(store.hand_out(lease, one.reading, keys, "t")) == 1700
        batch = [answer(tally(one, key, 2, {1: 1}, [(f"{key}.0", 3)]), "t") for key in keys]
        assert set(store.accept(lease, batch)) == {"accepted"}
        assert store.merge(DIGEST, one.reading).table.counts() == {1: 3400}
        assert store.census(one.reading).states[State.WAITING].units == 1700

    # Looking

    def test_the_census(self, store: Store) -> None:
        """Units, work expected and work done by state, and the share done."""
        lease = begin(store)
        one, two = story(store, lease)
        done = store.census(one.reading)
        assert (done.units, done.nodes, done.seconds, done.complete, done.share_done) == (
            5,
            35,
            2.5,
            True,
            1.0,
        )
        half = store.census(two.reading)
        assert set(half.states) == set(State)
        assert half.states[State.WAITING].units == 2 and half.expected == 23.0
        assert (half.nodes, half.complete) == (14, False)
        assert half.share_done == pytest.approx(14 / (14 + 23))

    def test_the_latest_tallies(self, store: Store) -> None:
        """The newest tallies of a reading come first, whatever was accepted for others in between."""
        one, _ = story(store, begin(store))
        found = store.latest(one.reading, 3)
        assert [(new.key, new.machine, new.nodes, new.seconds) for new in found] == [
            ("0:0.1.0", "alder", 7, 0.5),
            ("0:0.1", "birch", 7, 0.5),
            ("0:0.0", "alder", 7, 0.5),
        ]
        assert found[0].accepted >= found[1].accepted

    def test_the_sum_of_a_reading(self, store: Store) -> None:
        """A merged reading is the weighted sum of its tallies, with where they came from."""
        one, two = story(store, begin(store))
        merged = store.merge(DIGEST, one.reading)
        assert merged.table == Tally.of_counts({0: 1, 1: 4, 2: 12, 3: 40})
        assert (merged.complete, merged.tallies, merged.records, merged.nodes) == (True, 5, 9, 35)
        assert merged.machines == {"alder": 21, "birch": 14}
        assert merged.engines == ("e" * 64,) and merged.disputed == ()
        assert merged.head == store.series()[0].head != DIGEST
        assert store.merge(DIGEST, one.reading, check=False) == merged
        other = store.merge(DIGEST, two.reading)
        assert other.table == Tally.of_counts({1: 40, 2: 92}) and not other.complete

    def test_sums_of_any_size_and_width(self, store: Store) -> None:
        """Weights, counts and moments far beyond 64 bits are summed exactly, by statistic."""
        lease = begin(store)
        one = open_reading(store, lease, [("0:", 10**30), ("1:", -(10**25))], width=2)
        store.hand_out(lease, one.reading, ["0:", "1:"], "t")
        rows = Tally(2, {(3, 0): (10**50, -7), (3, 1): (1, 2)})
        batch = [
            answer(replace(tally(one, "0:", 10**30, {}), rows=rows), "t"),
            answer(replace(tally(one, "1:", -(10**25), {}), rows=Tally(2, {(3, 1): (10**40, 5)})), "t"),
        ]
        assert store.accept(lease, batch) == ["accepted"] * 2
        merged = store.merge(DIGEST, one.reading)
        assert merged.table == Tally(
            2, {(3, 0): (10**80, -7 * 10**30), (3, 1): (10**30 - 10**65, 2 * 10**30 - 5 * 10**25)}
        )

    def test_long_texts(self, store: Store) -> None:
        """A tally of any length comes back as it was."""
        lease = begin(store)
        one = open_reading(store, lease, [("0:", 1)])
        counts = {n: 7**n for n in range(1, 400)}
        settle(store, lease, one, unit(store, one, "0:"), counts)
        assert store.merge(DIGEST, one.reading).table.counts() == counts

    def test_an_empty_reading(self, store: Store) -> None:
        """A reading without roots is complete and sums to nothing."""
        lease = begin(store)
        one = open_reading(store, lease, [])
        merged = store.merge(DIGEST, one.reading)
        assert merged.complete and merged.table == Tally() and merged.records == 1

    # Machines and events

    def test_machines(self, store: Store) -> None:
        """A machine is noted with when it was first and last seen, and its standing changes."""
        store.note_machine(Machine("birch", "fast", "Linux", {"python": "3.11"}))
        store.note_machine(Machine("alder", "slow", "Linux", {"python": "3.12"}))
        (first,) = [row for row in store.machines() if row.machine.name == "birch"]
        time.sleep(0.01)
        store.note_machine(Machine("birch", "fast", "Linux", {"python": "3.13"}, "away"))
        rows = store.machines()
        assert [row.machine.name for row in rows] == ["alder", "birch"]
        assert rows[1].machine == Machine("birch", "fast", "Linux", {"python": "3.13"}, "away")
        assert rows[1].first_seen == first.first_seen and rows[1].last_seen > first.last_seen

    def test_events(self, store: Store) -> None:
        """Events come back in order, all or those of one series."""
        store.open_series(DIGEST, DEFINITION, "", 1)
        store.event(DIGEST, "coordinator", "started")
        store.event(None, "note", "half a pair \ud800 and a zero\0")
        assert [(event.series, event.kind) for event in store.events()] == [
            (DIGEST, "coordinator"),
            (None, "note"),
        ]
        assert [event.text for event in store.events(DIGEST)] == ["started"]
        with pytest.raises(LedgerError, match="no such series"):
            store.event(OTHER_DIGEST, "x", "y")


def _spoilt(right: record.TallyRecord, kind: str) -> record.TallyRecord:
    changes: dict[str, dict[str, object]] = {
        "unit": {"key": "7:"},
        "reading": {"reading": uuid.uuid4().hex},
        "series": {"series": OTHER_DIGEST},
        "factor": {"factor": 2},
        "lengths": {"lengths": "0-10"},
        "method": {"method": "doubling"},
        "method_version": {"method_version": 2},
        "width": {"rows": Tally(2, {(1,): (1, 1)})},
        "nodes": {"nodes": 2**63},
        "child": {"children": (("0:0", 1), ("1:", 1))},
        "zero factor": {"children": (("0:0", 0), ("0:1", 1))},
    }
    return replace(right, **changes.get(kind, {}))  # type: ignore[arg-type]


class Renewing:
    """A holder that renews its lease in a thread, as a coordinator does."""

    def __init__(self, store: Store, lease: object, release_after: float = math.inf) -> None:
        import threading

        self._stop = threading.Event()
        self._thread = threading.Thread(target=self._run, args=(store, lease, release_after))

    def _run(self, store: Store, lease: object, release_after: float) -> None:
        start = time.monotonic()
        while not self._stop.wait(0.3):
            if time.monotonic() - start > release_after:
                store.release(lease)  # type: ignore[arg-type]
                return
            store.renew(lease)  # type: ignore[arg-type]

    def __enter__(self) -> None:
        self._thread.start()

    def __exit__(self, *exc: object) -> None:
        self._stop.set()
        self._thread.join()
