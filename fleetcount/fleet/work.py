"""The work done on a machine: count a bundle of units until the time is up, and answer with their tallies.

Nothing here knows Dask or a database. Hand-outs and answers are JSON bytes, so that no code travels with them.
"""

from __future__ import annotations

import json
import time
from collections.abc import Callable
from dataclasses import dataclass, field
from functools import partial

from fleetcount.errors import FleetcountError
from fleetcount.fleet.interrupt import StopFlag
from fleetcount.host import machine_name
from fleetcount.ledger.record import TallyRecord, checksum
from fleetcount.ledger.store import Answer
from fleetcount.methods import registry
from fleetcount.methods.engine import engine_digest, versions
from fleetcount.methods.face import Counted, Method, Word
from fleetcount.series.definition import Series, from_canonical
from fleetcount.series.lengths import format_lengths, parse_lengths


@dataclass(frozen=True)
class Task:
    """What all units of a reading have in common."""

    series: Series
    reading: str
    method: str
    lengths: str

    @classmethod
    def of(cls, series: Series, reading: str, method: str, top: int) -> Task:
        return cls(series, reading, method, format_lengths(range(top + 1)))


@dataclass(frozen=True)
class HandOut:
    """A bundle of units under one token, with a budget of seconds. Units are key and factor."""

    task: Task
    token: str
    units: tuple[tuple[str, int], ...]
    seconds: float

    def pack(self) -> bytes:
        """As bytes, to be sent."""
        fields = {
            "series": self.task.series.canonical(),
            "written": self.task.series.written(),
            "reading": self.task.reading,
            "method": self.task.method,
            "lengths": self.task.lengths,
            "token": self.token,
            "units": [[key, str(factor)] for key, factor in self.units],
            "seconds": self.seconds,
        }
        return json.dumps(fields).encode()

    @classmethod
    def unpack(cls, sent: bytes) -> HandOut:
        """The hand-out of such bytes."""
        fields = json.loads(sent)
        series = from_canonical(fields["series"], fields["written"])
        task = Task(series, fields["reading"], fields["method"], fields["lengths"])
        units = tuple((key, int(factor)) for key, factor in fields["units"])
        return cls(task, fields["token"], units, fields["seconds"])


@dataclass
class HandBack:
    """What became of a bundle: answers, keys never touched, and keys that failed, with what went wrong."""

    token: str
    machine: str
    answers: list[Answer] = field(default_factory=list)
    untouched: list[str] = field(default_factory=list)
    failed: list[tuple[str, str]] = field(default_factory=list)
    nodes: int = 0
    seconds: float = 0.0
    wall: float = 0.0

    def pack(self) -> bytes:
        """As bytes, to be sent."""
        answers = [[a.text, a.checksum, list(a.expected), a.seconds] for a in self.answers]
        fields = {**vars(self), "nodes": str(self.nodes), "answers": answers}
        return json.dumps(fields).encode()

    @classmethod
    def unpack(cls, sent: bytes) -> HandBack:
        """The hand-back of such bytes."""
        fields = json.loads(sent)
        token = fields["token"]
        answers = [Answer(text, digest, token, tuple(e), s) for text, digest, e, s in fields["answers"]]
        failed = [(key, error) for key, error in fields["failed"]]
        return cls(**{**fields, "nodes": int(fields["nodes"]), "answers": answers, "failed": failed})


STOP = StopFlag()
"""The flag of this process: once up, every bundle here is handed back after the running slice."""

STOPPED: set[str] = set()
"""Runs whose bundles are handed back here: a process of a shared cluster outlives each of them."""


class RunFlag:
    """The flag of one run in this process."""

    def __init__(self, run: str) -> None:
        self._run = run

    @property
    def up(self) -> bool:
        """Whether this process or this run is to stop."""
        return STOP.up or self._run in STOPPED


def stop_run(run: str) -> None:
    """Hand back all bundles that this process has of a run, now and later; what a machine is told."""
    STOPPED.add(run)


class BundleClock:
    """A clock for one bundle: `seconds` from now, or the stop flag."""

    def __init__(self, seconds: float, stop: StopFlag | RunFlag) -> None:
        self.deadline = time.monotonic() + seconds
        self.stop = stop

    def word(self) -> Word:
        if self.stop.up:
            return Word.STOP_NOW
        return Word.TIME_UP if time.monotonic() >= self.deadline else Word.GO


def work(sent: bytes, run: str) -> bytes:
    """Count a bundle of a run that came over the wire; what a machine runs."""
    return count_bundle(HandOut.unpack(sent), RunFlag(run)).pack()


def count_bundle(hand_out: HandOut, stop: StopFlag | RunFlag) -> HandBack:
    """Count the units of a bundle one after another until the time is up."""
    began = time.monotonic()
    task, clock = hand_out.task, BundleClock(hand_out.seconds, stop)
    method, lengths = registry.get(task.method), parse_lengths(task.lengths)
    back = HandBack(hand_out.token, machine_name())
    for key, factor in hand_out.units:
        if clock.word() is not Word.GO:
            back.untouched.append(key)
            continue
        try:
            answer, counted = answer_unit(
                task,
                method,
                key,
                factor,
                hand_out.token,
                partial(method.count, task.series, lengths, key, clock),
            )
        except FleetcountError as error:
            back.failed.append((key, str(error)))
        except Exception as error:  # noqa: BLE001 - whatever a unit does, the bundle goes on and says so
            back.failed.append((key, f"{type(error).__name__}: {error}"))
        else:
            back.answers.append(answer)
            back.nodes, back.seconds = back.nodes + counted.nodes, back.seconds + counted.seconds
    back.wall = time.monotonic() - began
    return back


def answer_unit(
    task: Task, method: Method, key: str, factor: int, token: str, count: Callable[[], Counted]
) -> tuple[Answer, Counted]:
    """Count (or divide) one unit and write its tally."""
    started = time.time_ns() // 1000
    counted = count()
    record = TallyRecord(
        series=task.series.digest,
        reading=task.reading,
        method=method.name,
        method_version=method.version,
        lengths=task.lengths,
        key=key,
        factor=factor,
        children=tuple((child.key, child.factor) for child in counted.children),
        rows=counted.explored,
        engine=engine_digest(method.name),
        versions=versions(),
        machine=machine_name(),
        nodes=counted.nodes,
        started=started,
        finished=max(started, time.time_ns() // 1000),
    )
    text = record.text()
    expected = tuple(child.expected for child in counted.children)
    return Answer(text, checksum(text), token, expected, counted.seconds), counted
