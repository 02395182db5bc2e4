"""Command lines carried out in this process, in an empty folder, and what they answered."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import pytest

from fleetcount.cli.main import answer, build


@dataclass(frozen=True)
class Answer:
    """Exit status and what was printed."""

    status: int
    out: str
    err: str


Fleetcount = Callable[..., Answer]


@pytest.fixture
def fleetcount(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> Fleetcount:
    """`fleetcount("count", "square", ...)`, carried out in an empty folder."""
    monkeypatch.chdir(tmp_path)
    monkeypatch.delenv("FLEETCOUNT_LEDGER", raising=False)

    def carry_out(*arguments: str) -> Answer:
        capsys.readouterr()
        status = answer(build(), arguments)
        said = capsys.readouterr()
        return Answer(status, said.out, said.err)

    return carry_out
