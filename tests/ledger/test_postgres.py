"""The ledger in PostgreSQL keeps the contract."""

from __future__ import annotations

from collections.abc import Iterator

import pytest

from fleetcount.ledger.access import open_store
from fleetcount.ledger.store import Store
from tests.ledger.contract import StoreContract


class TestPostgres(StoreContract):
    @pytest.fixture
    def store(self, postgres: str) -> Iterator[Store]:
        with open_store(postgres, create=True) as store:
            yield store
