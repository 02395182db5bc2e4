"""Who holds a series: the rules of taking a lease, whatever keeps it."""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass
from datetime import datetime

from fleetcount import host
from fleetcount.errors import HeldError
from fleetcount.ledger.store import Holder, Lease

POLL_SECONDS = 0.2


@dataclass(frozen=True)
class Held:
    """A lease that another has."""

    holder: Holder
    ends: int


def this_process() -> Holder:
    """The holder that this process would be."""
    pid, started = host.this_process()
    return Holder(host.machine_name(), host.boot_id(), pid, started)


def is_gone(holder: Holder, machine: str, boot: str) -> bool:
    """Whether the holder is known, by one who runs on `machine` and `boot`, to run no more."""
    return (holder.machine, holder.boot) == (machine, boot) and host.is_gone(holder.pid, holder.started)


def can_take(held: Held, newcomer: Holder, now: int) -> bool:
    """Whether a newcomer may take over a lease at this time (microseconds UTC)."""
    return held.ends <= now or is_gone(held.holder, newcomer.machine, newcomer.boot)


def take(attempt: Callable[[], Lease | Held], series: str, wait: float) -> Lease:
    """Attempt until the lease is taken, or is seen to be renewed and `wait` seconds are over."""
    begin = time.monotonic()
    first: Held | None = None
    while True:
        got = attempt()
        if isinstance(got, Lease):
            return got
        first = first or got
        if got != first and time.monotonic() - begin >= wait:
            raise held_error(series, got.holder, got.ends)
        time.sleep(POLL_SECONDS)


def held_error(series: str, holder: Holder, ends: int) -> HeldError:
    """The error that says who holds a series and until when."""
    until = datetime.fromtimestamp(ends / 1e6).astimezone().strftime("%H:%M:%S %Z")
    return HeldError(
        f"process {holder.pid} on {holder.machine} is counting it and holds it until {until}, "
        "longer if it goes on",
        where=f"series {series[:12]}",
        mend="wait for it (--wait), or stop that process",
    )


def lost_error(series: str, holder: Holder | None) -> HeldError:
    """The error of one who writes with a lease that is not his any more."""
    by = f"process {holder.pid} on {holder.machine} holds it now" if holder else "it was given up"
    return HeldError(
        f"this process does not hold it any more: {by}",
        where=f"series {series[:12]}",
        mend="what was accepted is safe; start again to go on",
    )
