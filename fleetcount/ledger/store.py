"""The face of the ledger: what a coordinator, a table and an audit may ask of it, whatever database it is.

One coordinator holds a series by a lease. Every method that takes a lease checks its token inside the
transaction that writes, and raises HeldError, having changed nothing, if another has taken the series over.
All methods raise LedgerError when the database fails; what was accepted before is never lost by that.
A store may be used from several threads.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from enum import StrEnum
from typing import Protocol, Self

from fleetcount.ledger.states import OPEN, State
from fleetcount.series.tally import Tally

LEASE_SECONDS = 15.0
"""A lease that is not renewed ends after this time, by the clock of the database."""

RENEW_SECONDS = 3.0
"""How often a holder renews its lease."""


class Verdict(StrEnum):
    """What became of an answer."""

    ACCEPTED = "accepted"
    LATE = "late"
    """The unit was not out under this token any more. Nothing changed."""
    DOUBLE = "double"
    """The unit had a tally already, and this one does not contradict it. Nothing changed."""
    DISPUTED = "disputed"
    """The unit had a tally already that left the same rest, and this one has other numbers: an alarm."""
    REFUSED = "refused"
    """Checksum, text or children are not what they should be: an alarm. The unit is still out."""


@dataclass(frozen=True)
class Holder:
    """A coordinator process. `fleetcount.host` knows these facts about the own process.

    Attributes:
        machine: name of its machine.
        boot: id of the run of that machine in which the process id means something.
        pid: process id.
        started: start of the process, in a unit that only the machine itself needs to understand.
    """

    machine: str
    boot: str
    pid: int
    started: int


@dataclass(frozen=True)
class Lease:
    """The right to write a series, until `ends` (microseconds UTC, by the clock of the database)."""

    series: str
    token: str
    holder: Holder
    ends: int


@dataclass(frozen=True)
class SeriesRow:
    """A series of the ledger.

    Attributes:
        digest: its identity.
        canonical: its canonical definition.
        written: the definition as it was written.
        opened: microseconds UTC.
        records: number of records in its chain.
        head: link of the last one; the digest where there is none.
    """

    digest: str
    canonical: str
    written: str
    opened: int
    records: int
    head: str


@dataclass(frozen=True)
class ReadingRow:
    """A reading; times in microseconds UTC, `finished` None while it is open."""

    series: str
    reading: str
    purpose: str
    method: str
    method_version: int
    lengths: str
    width: int
    opened: int
    finished: int | None


@dataclass(frozen=True)
class UnitRow:
    """A unit. `parent` is None for a root; `token` is set while it is out; `attempts` counts failures;
    `verdict` is unchecked, agreed or disputed."""

    reading: str
    key: str
    parent: str | None
    factor: int
    weight: int
    expected: float
    state: State
    verdict: str
    attempts: int
    last_error: str | None
    token: str | None


@dataclass(frozen=True)
class Answer:
    """The tally of one unit, as a worker sent it.

    Attributes:
        text: canonical text of its TallyRecord.
        checksum: SHA-256 of the text, computed by the worker.
        token: of the hand-out it answers.
        expected: nodes that counting each child is expected to visit, in the order of the record's children.
        seconds: core time that the count took.
    """

    text: str
    checksum: str
    token: str
    expected: Sequence[float] = ()
    seconds: float = 0.0


@dataclass(frozen=True)
class Share:
    """Units of one state, the work expected of them, and the work done on them (all zero where none)."""

    units: int = 0
    expected: float = 0.0
    nodes: int = 0
    seconds: float = 0.0


@dataclass(frozen=True)
class Census:
    """The units of a reading by state; every state is there. For screens: `nodes` is exact up to 2^53."""

    states: Mapping[State, Share]

    @property
    def units(self) -> int:
        return sum(share.units for share in self.states.values())

    @property
    def nodes(self) -> int:
        """Nodes visited."""
        return sum(share.nodes for share in self.states.values())

    @property
    def seconds(self) -> float:
        """Core time inside kernels."""
        return sum(share.seconds for share in self.states.values())

    @property
    def expected(self) -> float:
        """Nodes expected of the units that have no tally yet."""
        return sum(self.states[state].expected for state in OPEN)

    @property
    def complete(self) -> bool:
        """No unit is without a tally."""
        return not any(self.states[state].units for state in OPEN)

    @property
    def share_done(self) -> float:
        """Nodes visited over nodes visited and expected; 1 exactly when complete."""
        if self.complete:
            return 1.0
        whole = self.nodes + self.expected
        return min(self.nodes / whole, 1 - 1e-9) if whole > 0 else 0.0


@dataclass(frozen=True)
class Machine:
    """A computer that counts. `standing` is counting, away, leaving, refused or suspect."""

    name: str
    processor: str
    system: str
    versions: Mapping[str, str]
    standing: str = "counting"


@dataclass(frozen=True)
class MachineRow:
    """A machine of the ledger, and when it was first and last noted (microseconds UTC)."""

    machine: Machine
    first_seen: int
    last_seen: int


@dataclass(frozen=True)
class EventRow:
    """Something that happened, at a time in microseconds UTC; `series` is None where it is about none."""

    at: int
    series: str | None
    kind: str
    text: str


@dataclass(frozen=True)
class Recent:
    """One of the tallies accepted last: for the speed on screens."""

    key: str
    machine: str
    nodes: int
    seconds: float
    accepted: int


@dataclass(frozen=True)
class Merged:
    """What a reading has found so far, every number of it checked.

    Attributes:
        table: sum over its tallies of weight times explored part.
        complete: every unit has a tally.
        head: link of the last record of the series' chain; the digest of the series where there is none.
        records: number of records in the chain.
        tallies: number of tallies summed.
        nodes: nodes visited.
        seconds: core time.
        machines: nodes visited by each machine, by name.
        engines: digests of the engines that counted, sorted.
        disputed: keys of units that another answer contradicted, sorted.
    """

    table: Tally
    complete: bool
    head: str
    records: int
    tallies: int
    nodes: int
    seconds: float
    machines: Mapping[str, int]
    engines: tuple[str, ...]
    disputed: tuple[str, ...]


class Store(Protocol):
    """A ledger, open. A context manager that closes it.

    Attributes:
        location: where it is, for messages, without any password.
        notices: what the user should be told once about how it was opened.
        lease_seconds: how long a lease lasts unless it is renewed.
    """

    location: str
    notices: tuple[str, ...]
    lease_seconds: float

    def close(self) -> None: ...

    def __enter__(self) -> Self: ...

    def __exit__(self, *exc: object) -> None: ...

    # Series and their leases

    def open_series(self, digest: str, canonical: str, written: str, opened: int) -> None:
        """Make a series known. Nothing changes if it is known already."""

    def series(self) -> list[SeriesRow]:
        """All series, in the order in which they were opened."""

    def take(self, series: str, holder: Holder, wait: float = 0.0) -> Lease:
        """Take the lease of a series; units that were out go back to waiting.

        A holder process of this machine that is gone is succeeded at once. Otherwise this looks on until the
        lease ends, and takes it then, or until the holder renews it. A holder that renews is waited for
        `wait` seconds longer (`math.inf`: for ever); then HeldError says who holds it and until when.
        """

    def renew(self, lease: Lease) -> Lease:
        """Put off the end of a lease; HeldError if another has taken it."""

    def release(self, lease: Lease) -> None:
        """Give a lease up. Nothing happens if it is lost already."""

    def holder(self, series: str) -> tuple[Holder, int] | None:
        """Who holds a series and until when, or None. Never raises for a series that is not there."""

    # Readings

    def open_reading(self, lease: Lease, opening: str, expected: Sequence[float]) -> None:
        """Open a reading by the text of its OpeningRecord; its roots wait.

        Args:
            opening: the text; its series is that of the lease, its reading a new one.
            expected: nodes expected for each root, in the order of the record's roots.
        """

    def readings(self, series: str) -> list[ReadingRow]:
        """The readings of a series, in the order of the chain."""

    def finish_reading(self, lease: Lease, reading: str) -> None:
        """Note that a reading is finished; LedgerError if a unit of it has no tally. Once is enough."""

    # Units

    def waiting(self, reading: str, limit: int) -> list[UnitRow]:
        """Units that wait, the largest expected work first, then by key."""

    def units(self, reading: str, *states: State, limit: int | None = None) -> list[UnitRow]:
        """Units in one of the states (default: in any), by key."""

    def hand_out(self, lease: Lease, reading: str, keys: Sequence[str], token: str) -> list[UnitRow]:
        """Put those of the units that wait out under a token, and return them in the order of `keys`."""

    def hand_back(
        self,
        lease: Lease,
        reading: str,
        keys: Sequence[str],
        token: str,
        failed: str | None = None,
        machine: str = "",
        machines: int = 1,
    ) -> list[UnitRow]:
        """Take those of the units that are out under the token back, and return them as they are now.

        Args:
            failed: what went wrong, if the units failed rather than being left untouched. A unit that has
                failed too often (`fleetcount.ledger.states.bars`) is barred, with an event.
            machine: where it failed.
            machines: how many machines are counting now.
        """

    def readmit(self, lease: Lease, reading: str, keys: Sequence[str]) -> list[UnitRow]:
        """Let barred units wait again, their failures forgotten, and return them."""

    def accept(self, lease: Lease, batch: Sequence[Answer]) -> list[Verdict]:
        """Accept the tallies of units that are out under the token of their answer, in one transaction.

        For each accepted answer its record is added to the chain, its children wait, and the unit is counted
        or divided. All other answers change nothing but, where something is wrong, the list of events and
        the mark that a unit is disputed. Two tallies of a unit are only comparable if they left the same
        rest, since a unit may stop anywhere; then they must agree in rows and factors.

        Returns: a verdict for each answer, in their order.
        """

    # Looking

    def census(self, reading: str) -> Census:
        """The units of a reading by state."""

    def latest(self, reading: str, limit: int) -> list[Recent]:
        """The tallies of a reading that were accepted last, the newest first."""

    def merge(self, series: str, reading: str, check: bool = True) -> Merged:
        """The sum of a reading, out of records that are checked.

        With `check`, the records of all readings of the series are read in the order of the chain: every
        checksum and link, that texts and columns agree, and that the units which follow from openings and
        tallies (keys, parents, factors, weights, states) are exactly those of the ledger: none missing, none
        added, none changed. Any contradiction is a TrustError that names the unit. What it cannot see is a
        chain whose last records are cut off where units, states and the head of the series have been put
        back as well: compare the head with one that was kept elsewhere. Not covered either is what follows
        from no record: expected work, failures, seconds, and the mark of being disputed.

        Without `check`, only the checksums of the reading's own tallies are computed and the weights of the
        units table are believed: for sums shown while counting, never for a table.
        """

    # Machines and events

    def note_machine(self, machine: Machine) -> None:
        """Note a machine as seen now, with its standing."""

    def machines(self) -> list[MachineRow]:
        """All machines, by name."""

    def event(self, series: str | None, kind: str, text: str) -> None:
        """Note that something happened."""

    def events(self, series: str | None = None) -> list[EventRow]:
        """What happened, to one series or at all, the oldest first."""
