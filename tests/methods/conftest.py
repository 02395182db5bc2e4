"""Trials that take no time, and a count of the kernels that a run compiles: more than `MOST_KERNELS` fail it."""

from __future__ import annotations

import time
from collections.abc import Iterator

import pytest

from fleetcount.methods import compiled
from fleetcount.methods.direct import calibration, method

MOST_KERNELS = {"plain": 40, "refined": 60}
"""So many may be compiled in one run; each takes some seconds where the cache is cold."""

_began = time.time()


@pytest.fixture(scope="module", autouse=True)
def quick_trials() -> Iterator[None]:
    """What a count is expected to cost is judged by one trial only: hundreds of lattices are tried here."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(calibration, "ALL_SECONDS", -1.0)
        method._calibration.cache_clear()
        yield
        method._calibration.cache_clear()


def compiled_kernels() -> dict[str, int]:
    """How many kernels of each sort this run has compiled, by whatever process."""
    fresh = [
        path.name for path in compiled.folder("direct").glob("*.ready") if path.stat().st_mtime >= _began
    ]
    refined = sum(name.startswith("refined.") for name in fresh)
    return {"plain": len(fresh) - refined, "refined": refined}


def pytest_sessionfinish(session: pytest.Session, exitstatus: int) -> None:
    too_many = any(number > MOST_KERNELS[sort] for sort, number in compiled_kernels().items())
    if exitstatus == pytest.ExitCode.OK and too_many:
        session.exitstatus = pytest.ExitCode.TESTS_FAILED


def pytest_terminal_summary(terminalreporter: pytest.TerminalReporter) -> None:
    numbers = (
        f"{number} {sort} of at most {MOST_KERNELS[sort]}" for sort, number in compiled_kernels().items()
    )
    terminalreporter.write_line(f"kernels compiled in this run: {', '.join(numbers)}")
