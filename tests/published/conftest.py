"""How the tests here count: through the interface that users have."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

import fleetcount
from fleetcount.series.table import CoefficientTable
from fleetcount.trust.published import PublishedTable, tables
from tests.published.reach import Question

Count = Callable[..., dict[int, int]]
Answer = Callable[[Question, int], CoefficientTable]


@pytest.fixture
def counted() -> Count:
    """`counted(lattice, object, to=N, start=None)`: counts by length."""

    def count(lattice: str | Path, kind: str, *, to: int, start: str | None = None) -> dict[int, int]:
        return fleetcount.count(lattice, kind, to=to, start=start, ledger=":memory:").counts()

    return count


@pytest.fixture
def answered(tmp_path: Path) -> Answer:
    """`answered(question, to)`: its coefficient table; walls are written into a series file as a user does it."""

    def answer(question: Question, to: int) -> CoefficientTable:
        if not question.walls:
            return fleetcount.count(question.lattice, question.object, to=to, **question.options)
        path = tmp_path / "series.toml"
        lines = [f'lattice = "{question.lattice}"', f'object = "{question.object}"']
        for form, least in question.walls:
            lines += ["[[walls]]", f"form = {list(form)}", f"least = {least}"]
        path.write_text("\n".join(lines) + "\n", encoding="utf-8")
        return fleetcount.count(path, to=to)

    return answer


@pytest.fixture(scope="session")
def published_table() -> Callable[[str], PublishedTable]:
    """A published table by its id."""
    by_id = {table.id: table for table in tables()}
    return by_id.__getitem__
