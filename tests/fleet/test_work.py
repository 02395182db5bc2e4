"""The work done on a machine: bundles and answers as bytes, the two stops, units that fail."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Any

import pytest

from fleetcount.errors import InputError
from fleetcount.fleet.interrupt import StopFlag
from fleetcount.fleet.work import (
    STOPPED,
    BundleClock,
    HandBack,
    HandOut,
    RunFlag,
    Task,
    count_bundle,
    stop_run,
    work,
)
from fleetcount.ledger import record
from fleetcount.ledger.record import TallyRecord
from fleetcount.methods.direct.method import DirectMethod
from fleetcount.methods.face import Word
from fleetcount.series.tally import Tally
from tests.fleet.crews import SQUARE_WALKS, square_walks

TOP = 9
UNITS = (("0:0.0", 4), ("0:0.1", 10**30))


def bundle(seconds: float = 60.0, units: tuple[tuple[str, int], ...] = UNITS, top: int = TOP) -> HandOut:
    return HandOut(Task.of(square_walks(), "r" * 32, "direct", top), "token", units, seconds)


def test_bundles_survive_the_wire() -> None:
    """A hand-out is the same after it has been sent, with factors of any size."""
    out = bundle()
    assert HandOut.unpack(out.pack()).pack() == out.pack() and HandOut.unpack(out.pack()).units == UNITS
    assert HandOut.unpack(out.pack()).task.series.digest == square_walks().digest


def test_answers_survive_the_wire() -> None:
    """So is a hand-back, with everything that can be in it."""
    back = count_bundle(bundle(), StopFlag())
    back.untouched, back.failed, back.nodes = ["0:2"], [("0:3", "ValueError: ü\nno")], 2**80
    again = HandBack.unpack(back.pack())
    assert again == replace(back, answers=[replace(a, expected=tuple(a.expected)) for a in back.answers])


def test_a_tally_says_what_was_counted() -> None:
    """Each answer is the record of its unit, under the checksum that the ledger will compute again."""
    (unit,) = UNITS[:1]
    back = count_bundle(bundle(units=(("0:", 1),)), StopFlag())
    (answer,) = back.answers
    tally = TallyRecord.parse(answer.text)
    assert answer.checksum == record.checksum(answer.text) and answer.token == "token"
    assert tally.rows == Tally.of_counts(dict(enumerate(SQUARE_WALKS[: TOP + 1])))
    assert (tally.key, tally.factor, tally.children, tally.lengths) == ("0:", 1, (), f"0-{TOP}")
    assert tally.started <= tally.finished and tally.nodes == back.nodes > 0
    assert count_bundle(bundle(units=(unit,)), StopFlag()).answers[0].text.count('"factor":"4"') == 1


def test_no_time() -> None:
    """A bundle without time is handed back untouched."""
    back = count_bundle(bundle(seconds=0.0), StopFlag())
    assert back.untouched == [key for key, _ in UNITS] and not back.answers and not back.failed


def test_time_up() -> None:
    """When the time is up in the middle of a unit, what was seen is answered with the rest as its children, and the
    units after it are untouched."""
    back = count_bundle(bundle(0.2, (("0:", 1), ("0:0.1", 1)), top=40), StopFlag())
    (answer,) = back.answers
    tally = TallyRecord.parse(answer.text)
    assert tally.children and len(answer.expected) == len(tally.children) and back.nodes > 1
    assert back.untouched == ["0:0.1"]


def test_the_flag_of_a_run() -> None:
    """Stopping one run leaves the others on the same machine alone."""
    clock = BundleClock(60.0, RunFlag("mine"))
    assert clock.word() is Word.GO
    stop_run("another")
    assert clock.word() is Word.GO and HandBack.unpack(work(bundle().pack(), "mine")).answers
    stop_run("mine")
    assert clock.word() is Word.STOP_NOW
    assert HandBack.unpack(work(bundle().pack(), "mine")).untouched == [key for key, _ in UNITS]
    STOPPED.clear()


@pytest.mark.parametrize(
    ("error", "text"),
    [(InputError("odd", where="here"), "here: odd"), (MemoryError("much"), "MemoryError: much")],
)
def test_a_unit_that_fails(error: Exception, text: str, monkeypatch: pytest.MonkeyPatch) -> None:
    """A unit that raises is named with its error; the rest of the bundle is counted all the same."""
    counted: Callable[..., Any] = DirectMethod.count

    def count(self: DirectMethod, series: Any, lengths: Any, key: str, *more: Any) -> Any:
        if key == "0:0.0":
            raise error
        return counted(self, series, lengths, key, *more)

    monkeypatch.setattr(DirectMethod, "count", count)
    back = count_bundle(bundle(), StopFlag())
    assert back.failed == [("0:0.0", text)]
    assert [TallyRecord.parse(answer.text).key for answer in back.answers] == ["0:0.1"]
