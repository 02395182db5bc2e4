"""Ctrl-C and SIGTERM: the program ends in order from its first moment on, and what was counted is kept."""

from __future__ import annotations

import signal
import sys
import threading
import time
from pathlib import Path

import psutil
import pytest

from fleetcount.errors import InputError
from fleetcount.fleet.interrupt import Interrupts, StopFlag
from tests.fleet.program import (
    NAME,
    Running,
    counting,
    finished,
    line,
    query,
    running,
    tallies,
    units_out,
    wait_for,
)

SLACK = 4.0
"""Seconds allowed on a busy machine beyond the three that the program promises."""


# The handler itself


def test_a_signal_raises_the_flag_where_somebody_looks_at_it() -> None:
    """While units are counted the first signal raises the flag, a second one says hurry, a third one interrupts."""
    stop = StopFlag()
    with Interrupts(stop) as interrupts, interrupts.patient():
        signal.raise_signal(signal.SIGTERM)
        assert stop.up and not stop.hurry
        signal.raise_signal(signal.SIGINT)
        assert stop.up and stop.hurry
        with pytest.raises(KeyboardInterrupt):
            signal.raise_signal(signal.SIGINT)


def test_a_signal_interrupts_where_nobody_looks_at_the_flag() -> None:
    """Anywhere else the first signal interrupts at once, and the flag is up as well."""
    stop = StopFlag()
    with Interrupts(stop) as interrupts:
        with interrupts.patient():
            pass
        with pytest.raises(KeyboardInterrupt):
            signal.raise_signal(signal.SIGHUP)
    assert stop.up


def test_handlers_are_put_back() -> None:
    """Afterwards every signal does what it did before, whatever happened."""
    before = {number: signal.getsignal(number) for number in (signal.SIGINT, signal.SIGTERM, signal.SIGHUP)}
    with pytest.raises(ZeroDivisionError), Interrupts(StopFlag()):
        assert signal.getsignal(signal.SIGTERM) is not before[signal.SIGTERM]
        raise ZeroDivisionError
    assert {number: signal.getsignal(number) for number in before} == before


def test_an_ignored_signal_stays_ignored() -> None:
    """A count under `nohup` goes on when its terminal is closed."""
    stop, before = StopFlag(), signal.signal(signal.SIGHUP, signal.SIG_IGN)
    try:
        with Interrupts(stop):
            signal.raise_signal(signal.SIGHUP)
        assert not stop.up and signal.getsignal(signal.SIGHUP) is signal.SIG_IGN
    finally:
        signal.signal(signal.SIGHUP, before)


def test_in_another_thread_signals_are_left_alone() -> None:
    """Only a main thread can handle signals; counting in another one works all the same."""
    seen = []

    def enter() -> None:
        with Interrupts(StopFlag()) as interrupts, interrupts.patient():
            seen.append(signal.getsignal(signal.SIGTERM))

    thread = threading.Thread(target=enter)
    thread.start()
    thread.join()
    assert seen == [signal.getsignal(signal.SIGTERM)]


def test_an_interrupt_in_a_callback_comes_again(capsys: pytest.CaptureFixture[str]) -> None:
    """Where nothing can be raised an interrupt is not lost and nothing is printed: it comes again a moment later."""

    class Finalised:
        def __del__(self) -> None:
            signal.raise_signal(signal.SIGTERM)

    hooks, stop = (sys.unraisablehook, sys.excepthook), StopFlag()
    with pytest.raises(KeyboardInterrupt), Interrupts(stop):
        Finalised()
        assert stop.up
        time.sleep(60)
    assert not stop.hurry and (sys.unraisablehook, sys.excepthook) == hooks
    assert capsys.readouterr().err == ""


def test_what_an_interrupt_broke_counts_as_interrupted() -> None:
    """An error that an interrupt turned into (as when an extension is being loaded) is an interrupt; one of the
    program's own stays what it is, and so does any error without an interrupt."""

    def broken(error: Exception, interrupt: bool = True) -> None:
        with Interrupts(StopFlag()):
            try:
                if interrupt:
                    signal.raise_signal(signal.SIGINT)
            except KeyboardInterrupt:
                pass
            raise error

    with pytest.raises(KeyboardInterrupt):
        broken(ImportError("an extension failed to load"))
    with pytest.raises(InputError):
        broken(InputError("odd"))
    with pytest.raises(ImportError):
        broken(ImportError("not installed"), interrupt=False)


# Real processes


def interrupted(one: Running, number: signal.Signals) -> None:
    """Send the signal; the process leaves soon, with status 3, and says in one last line how to go on."""
    began, workers = time.monotonic(), one.workers()
    one.process.send_signal(number)
    assert one.wait() == 3, one.stderr
    assert time.monotonic() - began < 3 + SLACK
    last = one.stderr.splitlines()[-1]
    assert last.startswith("fleetcount: ") and last.endswith("the same line goes on from there")
    assert "Traceback" not in one.stderr and one.stdout == ""
    _, left = psutil.wait_procs(workers, timeout=SLACK)
    assert not left


def at_peace(ledger: Path) -> None:
    """Nothing in the ledger is out and nobody holds a series."""
    assert units_out(ledger) == 0
    assert all(token is None for (token,) in query(ledger, "SELECT token FROM leases"))


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_during_start_up(number: signal.Signals, tmp_path: Path) -> None:
    """While the libraries are being loaded."""
    with running(*line(), cwd=tmp_path) as one:
        maps = Path(f"/proc/{one.process.pid}/maps")
        if not maps.exists():
            pytest.skip("needs /proc to see how far it is")
        wait_for(lambda: "numpy" in maps.read_text() or not one.alive())
        interrupted(one, number)
    assert not (tmp_path / NAME).exists()


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_during_compiling(number: signal.Signals, tmp_path: Path) -> None:
    """While kernels are compiled for the first time; the next run compiles them."""
    with running(*line(), cwd=tmp_path, env={"FLEETCOUNT_CACHE": str(tmp_path / "cache")}) as one:
        one.says("compiling")
        time.sleep(0.5)
        interrupted(one, number)
    at_peace(tmp_path / NAME)


def test_during_the_short_reading(tmp_path: Path) -> None:
    """While the first terms are counted in the command's own process."""
    with running(*line(), cwd=tmp_path) as one:
        wait_for(lambda: units_out(tmp_path / NAME))
        interrupted(one, signal.SIGINT)
    at_peace(tmp_path / NAME)


def test_while_the_fleet_starts(tmp_path: Path) -> None:
    """While scheduler and worker process are coming up."""
    with running(*line(), cwd=tmp_path) as one:
        one.says("starting 2 cores")
        interrupted(one, signal.SIGTERM)
    at_peace(tmp_path / NAME)


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_while_counting(number: signal.Signals, tmp_path: Path) -> None:
    """What the cores have is handed back and accepted, and the same line ends with the published table."""
    ledger = tmp_path / NAME
    with running(*line(), cwd=tmp_path) as one:
        wait_for(lambda: counting(one, ledger))
        time.sleep(0.3)
        before = tallies(ledger)
        interrupted(one, number)
        assert NAME in one.stderr.splitlines()[-1]
    at_peace(ledger)
    kept = tallies(ledger)
    assert len(kept) > len(before) and kept[: len(before)] == before
    if number == signal.SIGINT:
        with running(*line(), cwd=tmp_path) as one:
            assert one.wait() == 0
        assert tallies(ledger)[: len(kept)] == kept
        finished(ledger)


def test_an_impatient_user(tmp_path: Path) -> None:
    """Ctrl-C twice, and again on the way out: the same line, the same status, and the ledger in order."""
    with running(*line(), cwd=tmp_path) as one:
        wait_for(lambda: counting(one, tmp_path / NAME))
        one.process.send_signal(signal.SIGINT)
        time.sleep(0.02)
        one.process.send_signal(signal.SIGINT)
        one.says("stopped")
        interrupted(one, signal.SIGINT)
    at_peace(tmp_path / NAME)
