"""The command `count`: the main job."""

from __future__ import annotations

import math
import time
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from fleetcount.cli import options
from fleetcount.errors import InputError, StoppedError

if TYPE_CHECKING:
    from fleetcount.fleet.counting import Options
    from fleetcount.series.files import WrittenSeries
    from fleetcount.series.table import CoefficientTable


def register(app: typer.Typer) -> None:
    """Add the command to an app."""
    app.command("count")(count)


def count(
    lattice: Annotated[
        str,
        typer.Argument(
            metavar="LATTICE|SERIES.toml",
            help="A built-in lattice, or the path of a lattice file; alone, the path of a series file.",
        ),
    ],
    object_name: options.ObjectName = None,
    to: Annotated[
        int | None,
        typer.Option("--to", metavar="N", help="Greatest length, in steps; of polygons the perimeter."),
    ] = None,
    start: options.Start = None,
    end: options.End = None,
    by: options.By = None,
    moment: options.Moment = None,
    region: options.Region = None,
    save: Annotated[
        Path | None, typer.Option(metavar="SERIES.toml", help="Write the definition into a series file.")
    ] = None,
    ledger: options.Ledger = None,
    cores: Annotated[int | None, typer.Option(metavar="K", help="Cores to count on. Default: all.")] = None,
    wait: Annotated[
        bool, typer.Option("--wait", help="Wait while another process counts this series.")
    ] = False,
    ledger_size: Annotated[
        float, typer.Option(metavar="GB", help="Plan the units so that the ledger stays under this size.")
    ] = 1.0,
    per_site: options.PerSite = False,
    as_json: options.AsJson = False,
    as_csv: options.AsCsv = False,
    plain: options.Plain = False,
    readmit: Annotated[
        bool, typer.Option("--readmit", help="Hand out barred units again, which failed too often.")
    ] = False,
    quiet: Annotated[bool, typer.Option("--quiet", help="No progress, only the table.")] = False,
) -> None:
    """Count a series up to a length, or go on where an earlier run was stopped.

    Walks are counted as directed from a fixed start, one of length 0 included; polygons and closed trails up to
    translation, that is per cell, without root or sense (on one-way lattices each sense that occurs).
    """
    from fleetcount.fleet.interrupt import Interrupts, StopFlag, ignore
    from fleetcount.series.files import asked

    options.one_form(json=as_json, csv=as_csv, plain=plain)
    if cores is not None and not 1 <= cores <= 1024:
        raise InputError(f"{cores} cores", where="--cores", mend="give a number from 1 to 1024")
    if not 0.001 <= ledger_size <= 1e6:
        raise InputError(f"{ledger_size} GB", where="--ledger-size", mend="give a size from 0.001 to 1000000")
    definition = asked(lattice, object_name, to, start=start, end=end, by=by, moment=moment, region=region)
    began = time.monotonic()
    stop = StopFlag()
    try:
        with Interrupts(stop):
            from fleetcount.cli.screen import Screen, duration
            from fleetcount.fleet.counting import Options

            how = Options(
                cores=cores,
                wait=math.inf if wait else 0.0,
                ledger_bytes=ledger_size * 1e9,
                readmit=readmit,
                stop=stop,
            )
            with Screen(quiet) as screen:
                how.observer = screen
                table, location = _counted(definition, save, ledger, how)
    except (StoppedError, KeyboardInterrupt) as error:
        ignore()  # the program is on its way out; more of them would only spoil its exit status
        raise error if isinstance(error, StoppedError) else _stopped() from None
    if per_site:
        table = table.per_site()
    options.give(table, json=as_json, csv=as_csv, plain=plain)
    if not quiet:
        kept = "nothing is kept" if location == ":memory:" else f"every tally is in {location}"
        options.say(f"{duration(time.monotonic() - began)}; {kept}")


def _counted(
    definition: WrittenSeries, save_as: Path | None, ledger: str | None, how: Options
) -> tuple[CoefficientTable, str]:
    """The table, and where its tallies are."""
    from fleetcount.fleet.counting import check, count_series
    from fleetcount.ledger.access import open_store
    from fleetcount.series import files

    series, to = options.series_of(definition), definition.to
    if to is None:
        raise InputError(
            "up to which length?", where=definition.source or "--to", mend="add --to N, or to = N in the file"
        )
    check(series, to)
    if save_as is not None:
        files.save(definition, save_as)
        how.observer.note(f"the definition is in {save_as}")
    with open_store(ledger, create=True) as store:
        for notice in store.notices:
            how.observer.note(notice)
        try:
            return count_series(store, series, to, how), store.location
        except StoppedError:
            raise _stopped(store.location) from None


def _stopped(where: str = "") -> StoppedError:
    return StoppedError(
        "stopped; what was counted is kept", where=where, mend="the same line goes on from there"
    )
