"""Trials that take no time, and a count of the kernels that exist: more than `MOST_KERNELS` fail the run."""

from __future__ import annotations

from collections.abc import Iterator

import pytest

from fleetcount.methods import compiled
from fleetcount.methods.direct import calibration, method

MOST_KERNELS = 40


@pytest.fixture(scope="module", autouse=True)
def quick_trials() -> Iterator[None]:
    """What a count is expected to cost is judged by one trial only: hundreds of lattices are tried here."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(calibration, "ALL_SECONDS", -1.0)
        method._calibration.cache_clear()
        yield
        method._calibration.cache_clear()


def existing_kernels() -> list[str]:
    """The kernels that this engine has on this machine, by whatever process they were compiled."""
    return sorted(path.name.removesuffix(".ready") for path in compiled.folder("direct").glob("*.ready"))


def pytest_sessionfinish(session: pytest.Session, exitstatus: int) -> None:
    if exitstatus == pytest.ExitCode.OK and len(existing_kernels()) > MOST_KERNELS:
        session.exitstatus = pytest.ExitCode.TESTS_FAILED


def pytest_terminal_summary(terminalreporter: pytest.TerminalReporter) -> None:
    kernels = existing_kernels()
    terminalreporter.write_line(
        f"{len(kernels)} compiled kernels of at most {MOST_KERNELS}: {', '.join(kernels)}"
    )
