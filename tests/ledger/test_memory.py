"""The ledger in memory."""

from __future__ import annotations

import pytest

from fleetcount.ledger.memory import MemoryStore
from tests.ledger.contract import StoreContract


class TestMemory(StoreContract):
    @pytest.fixture
    def store(self) -> MemoryStore:
        return MemoryStore()
