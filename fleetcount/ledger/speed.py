"""How fast a reading goes."""

from __future__ import annotations

import time

from fleetcount.ledger.store import Store

RECENT = 64
_STALE_SECONDS = 120.0


def nodes_a_second(store: Store, reading: str) -> float:
    """Nodes a second over the tallies accepted last; 0 when the last one is old."""
    recent = store.latest(reading, RECENT)
    now = time.time_ns() // 1000
    if len(recent) < 2 or now - recent[0].accepted > _STALE_SECONDS * 1e6:
        return 0.0
    span = max(recent[0].accepted - recent[-1].accepted, 1)
    return sum(tally.nodes for tally in recent[:-1]) / (span / 1e6)
