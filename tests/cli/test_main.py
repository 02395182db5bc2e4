"""The entry point: what each way of failing looks like from outside."""

from __future__ import annotations

import subprocess
import sys

import pytest
import typer

from fleetcount import __version__
from fleetcount.cli.main import answer
from fleetcount.errors import FleetcountError, InputError, InternalError, StoppedError, TrustError

PROGRAM = [sys.executable, "-c", "from fleetcount.cli.main import run; run()"]


def program(*arguments: str, **options: object) -> subprocess.CompletedProcess[str]:
    return subprocess.run([*PROGRAM, *arguments], capture_output=True, text=True, timeout=60, **options)  # type: ignore[call-overload, no-any-return]


def failing(error: BaseException) -> typer.Typer:
    """An app whose only command raises."""
    app = typer.Typer(rich_markup_mode=None, add_completion=False)

    @app.command()
    def fail() -> None:
        raise error

    return app


def test_version() -> None:
    """`--version` prints the version and nothing else."""
    done = program("--version")
    assert (done.returncode, done.stdout, done.stderr) == (0, f"fleetcount {__version__}\n", "")


def test_help_lists_every_command() -> None:
    """`--help` names all commands."""
    done = program("--help")
    assert done.returncode == 0
    listed = [line.split()[0] for line in done.stdout.partition("Commands:")[2].splitlines() if line.strip()]
    assert listed == ["count", "progress", "table", "lattices", "ledger"]


@pytest.mark.parametrize("command", [[], ["count"], ["progress"], ["table"], ["lattices"], ["ledger"]])
def test_help_imports_nothing_heavy(command: list[str]) -> None:
    """Help of any command answers without loading the libraries that count, store or draw."""
    code = (
        "import sys\n"
        "from fleetcount.cli.main import answer, build\n"
        f"assert answer(build(), {[*command, '--help']!r}) == 0\n"
        "heavy = {'numpy', 'numba', 'llvmlite', 'sqlalchemy', 'alembic', 'dask', 'distributed', 'rich', 'psutil'}\n"
        "print(sorted(heavy & set(sys.modules)), file=sys.stderr)\n"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, timeout=60)
    assert done.stderr == "[]\n"


def test_no_argument_shows_help() -> None:
    """Called with nothing the program shows its help and fails, so that a script notices."""
    done = program()
    assert (done.returncode, done.stdout) == (2, "")
    assert done.stderr.startswith("Usage: fleetcount")


@pytest.mark.parametrize(
    ("arguments", "word"),
    [
        (["cuont"], "'cuont'"),
        (["--fast"], "--fast"),
        (["lattices", "--jsn"], "--jsn"),
        (["lattices", "square", "cubic"], "cubic"),
        (["lattices", "squrae"], "did you mean square?"),
    ],
)
def test_bad_usage_is_one_line(arguments: list[str], word: str) -> None:
    """A command line that makes no sense is one line on standard error, naming what is wrong, with status 2."""
    done = program(*arguments)
    assert (done.returncode, done.stdout) == (2, "")
    assert done.stderr.startswith("fleetcount: ")
    assert done.stderr.count("\n") == 1
    assert word in done.stderr


@pytest.mark.parametrize(
    ("error", "status"),
    [
        (FleetcountError("odd", where="here", mend="look"), 2),
        (InputError("odd", where="here", mend="look"), 2),
        (TrustError("odd", where="here", mend="look"), 1),
        (StoppedError("odd", where="here", mend="look"), 3),
        (InternalError("odd", where="here", mend="look"), 4),
    ],
)
def test_errors_of_our_own(error: Exception, status: int, capsys: pytest.CaptureFixture[str]) -> None:
    """Each error of the family is its one line and its exit status."""
    assert answer(failing(error), []) == status
    assert capsys.readouterr() == ("", "fleetcount: here: odd; look\n")


def test_interrupt(capsys: pytest.CaptureFixture[str]) -> None:
    """Ctrl-C where nothing else took it is exit status 3."""
    assert answer(failing(KeyboardInterrupt()), []) == 3
    assert capsys.readouterr().err == "fleetcount: interrupted\n"


def test_anything_else_is_an_internal_error(
    capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    """An exception nobody expected is one line and status 4; the traceback only where it is asked for."""
    monkeypatch.delenv("FLEETCOUNT_DEBUG", raising=False)
    assert answer(failing(ZeroDivisionError("by\nzero")), []) == 4
    line = capsys.readouterr().err
    assert (
        line
        == "fleetcount: internal error: ZeroDivisionError: by zero; with FLEETCOUNT_DEBUG=1 it shows where\n"
    )
    monkeypatch.setenv("FLEETCOUNT_DEBUG", "1")
    assert answer(failing(ZeroDivisionError("by zero")), []) == 4
    assert "Traceback (most recent call last)" in capsys.readouterr().err


def test_a_reader_that_goes_away() -> None:
    """A closed pipe on standard output ends the program quietly."""
    with subprocess.Popen(
        [*PROGRAM, "lattices", "--json"], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
    ) as process:
        assert process.stdout is not None
        assert process.stderr is not None
        process.stdout.close()
        assert process.stderr.read() == ""
        assert process.wait(timeout=60) == 0


@pytest.mark.skipif(sys.platform != "linux", reason="needs /dev/full")
def test_standard_output_on_a_full_disk() -> None:
    """Standard output that takes nothing is one line and status 2."""
    with open("/dev/full", "w") as full:  # noqa: PTH123 - not a path of ours
        done = subprocess.run(
            [*PROGRAM, "lattices"], stdout=full, stderr=subprocess.PIPE, text=True, timeout=60
        )
    assert done.returncode == 2
    assert done.stderr == "fleetcount: the system refuses: No space left on device\n"
