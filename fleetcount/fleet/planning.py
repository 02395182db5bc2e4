"""Opening a reading and dividing its roots until there are units enough for every core."""

from __future__ import annotations

import time
import uuid
from collections.abc import Callable
from functools import partial

from fleetcount.fleet.work import Task, answer_unit
from fleetcount.ledger.record import OpeningRecord
from fleetcount.ledger.store import Lease, Store
from fleetcount.methods import registry
from fleetcount.methods.face import Forecast
from fleetcount.series.definition import Series
from fleetcount.series.lengths import format_lengths, parse_lengths

UNITS_A_CORE = 24
"""Units are divided until the largest is this fraction of one core's part of the work."""

MOST_PLANNED = 4_000
_BATCH = 64


def open_reading(store: Store, lease: Lease, series: Series, method_name: str, top: int) -> Task:
    """Open a new reading of all lengths up to `top`; its roots wait."""
    method = registry.get(method_name)
    lengths = range(top + 1)
    roots = method.roots(series, lengths)
    opening = OpeningRecord(
        series=series.digest,
        reading=uuid.uuid4().hex,
        purpose="count",
        method=method.name,
        method_version=method.version,
        lengths=format_lengths(lengths),
        roots=tuple((root.key, root.factor) for root in roots),
        opened=time.time_ns() // 1000,
        width=series.width,
    )
    store.open_reading(lease, opening.text(), [root.expected for root in roots])
    return Task(series, opening.reading, method.name, opening.lengths)


def divide_roots(
    store: Store,
    lease: Lease,
    task: Task,
    forecast: Forecast,
    cores: int,
    least_seconds: float,
    tick: Callable[[], None],
    most: int = MOST_PLANNED,
) -> None:
    """Divide the largest waiting units, without counting, while they are too large to share out evenly.

    Args:
        least_seconds: no unit expected to take less is divided.
        tick: called between batches.
        most: no more units than this, and `MOST_PLANNED`, are made.
    """
    method, lengths = registry.get(task.method), parse_lengths(task.lengths)
    rate = forecast.nodes / max(forecast.seconds, 1e-9)
    enough = max(forecast.nodes / (cores * UNITS_A_CORE), rate * least_seconds)
    planned = store.census(task.reading).units
    while planned < min(most, MOST_PLANNED):
        large = [unit for unit in store.waiting(task.reading, _BATCH) if unit.expected > enough]
        if not large:
            return
        token = uuid.uuid4().hex
        out = store.hand_out(lease, task.reading, [unit.key for unit in large], token)
        answers = []
        for unit in out:
            answer, counted = answer_unit(
                task,
                method,
                unit.key,
                unit.factor,
                token,
                partial(method.divide, task.series, lengths, unit.key),
            )
            answers.append(answer)
            planned += len(counted.children)
        store.accept(lease, answers)
        tick()
