"""How the tests here count: through the interface that users have."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

import fleetcount
from fleetcount.trust.published import PublishedTable, tables

Count = Callable[..., dict[int, int]]


@pytest.fixture
def counted() -> Count:
    """`counted(lattice, object, to=N, start=None)`: counts by length."""

    def count(lattice: str | Path, kind: str, *, to: int, start: str | None = None) -> dict[int, int]:
        return fleetcount.count(lattice, kind, to=to, start=start, ledger=":memory:").counts()

    return count


@pytest.fixture(scope="session")
def published_table() -> Callable[[str], PublishedTable]:
    """A published table by its id."""
    by_id = {table.id: table for table in tables()}
    return by_id.__getitem__
