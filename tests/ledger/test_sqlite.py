"""The ledger in SQLite keeps the contract."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from fleetcount.ledger.access import open_store
from fleetcount.ledger.store import Store
from tests.ledger.contract import StoreContract


class TestSqlite(StoreContract):
    @pytest.fixture
    def store(self, tmp_path: Path) -> Iterator[Store]:
        with open_store(str(tmp_path / "ledger.sqlite"), create=True) as store:
            yield store
