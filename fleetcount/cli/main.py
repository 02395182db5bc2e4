"""The program `fleetcount`: its commands, and how each way of failing ends.

Whatever goes wrong is one line on standard error and an exit status: 1 a check of trust failed, 2 bad input
or unusable surroundings, 3 interrupted and can be resumed, 4 internal error.
"""

from __future__ import annotations

import contextlib
import os
import sys
import traceback
from collections.abc import Sequence
from importlib import import_module
from typing import Annotated, NoReturn

import typer
from typer.main import get_command

from fleetcount import __version__
from fleetcount.errors import FleetcountError, InternalError, StoppedError

GROUPS = ("count", "progress", "table", "lattices", "ledger")
"""Modules of this package with a `register(app)` each, in the order of the help."""

DEBUG = "FLEETCOUNT_DEBUG"


def build() -> typer.Typer:
    """The app with all its commands."""
    app = typer.Typer(
        name="fleetcount",
        help="Exact counts of lattice walks and polygons, by a fleet, into a ledger that can be audited.",
        rich_markup_mode=None,
        no_args_is_help=True,
        add_completion=False,
        pretty_exceptions_enable=False,
    )
    app.callback()(_program)
    for group in GROUPS:
        import_module(f"fleetcount.cli.{group}").register(app)
    return app


def run() -> NoReturn:
    """Entry point of the program."""
    sys.exit(answer(build(), sys.argv[1:]))


def answer(app: typer.Typer, arguments: Sequence[str]) -> int:
    """Carry out one command line; returns the exit status."""
    try:
        status = _carry_out(app, list(arguments))
        _flush()
        return status
    except BrokenPipeError:  # the reader has seen enough, as in `fleetcount table ... | head`
        _silence()
        return 0
    except FleetcountError as error:
        return _fail(str(error), error.exit_status, debug=isinstance(error, InternalError))
    except OSError as error:
        _silence()
        place = error.filename or "the system refuses"
        return _fail(f"{place}: {error.strerror or error}", FleetcountError.exit_status, debug=True)
    except KeyboardInterrupt:
        return _fail("interrupted", StoppedError.exit_status)
    except Exception as error:  # noqa: BLE001 - the last wall: a user gets a line, never a traceback
        line = f"internal error: {type(error).__name__}: {error}; with {DEBUG}=1 it shows where"
        return _fail(line, InternalError.exit_status, debug=True)


def _carry_out(app: typer.Typer, arguments: list[str]) -> int:
    """Run a command line; what the library says of a bad one becomes one line."""
    try:
        with get_command(app).make_context("fleetcount", arguments) as context:
            context.command.invoke(context)
        return 0
    except typer.Exit as end:
        return end.exit_code
    except typer.Abort:
        raise KeyboardInterrupt from None
    except typer.TyperException as error:
        where: typer.Context | None = getattr(error, "ctx", None)
        path = where.command_path if where else "fleetcount"
        if where and error.format_message() == where.get_help():  # no argument at all
            typer.echo(error.format_message(), err=True)
            return 2
        return _fail(f"{error.format_message().rstrip('.')}; see `{path} --help`", 2)


def _fail(line: str, status: int, *, debug: bool = False) -> int:
    if debug and os.environ.get(DEBUG):
        traceback.print_exc()
    with contextlib.suppress(OSError):  # nobody may be left to read it
        print("fleetcount:", " ".join(line.split()), file=sys.stderr, flush=True)
    return status


def _flush() -> None:
    if sys.stdout is not None:  # None if this process was started with it closed
        sys.stdout.flush()


def _silence() -> None:
    """What standard output cannot take goes nowhere: the interpreter would complain of it at its end."""
    try:
        _flush()
    except OSError:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


def _say_version(asked: bool) -> None:
    if asked:
        typer.echo(f"fleetcount {__version__}")
        raise typer.Exit


def _program(
    version: Annotated[
        bool,
        typer.Option("--version", callback=_say_version, is_eager=True, help="Show the version and exit."),
    ] = False,
) -> None:
    pass
