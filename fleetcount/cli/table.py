"""The command `table`: what has been counted."""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated

import typer

from fleetcount.cli import options
from fleetcount.errors import InputError

if TYPE_CHECKING:
    from fleetcount.ledger.store import Store
    from fleetcount.ledger.tables import OpenReading
    from fleetcount.series.definition import Series


def register(app: typer.Typer) -> None:
    """Add the command to an app."""
    app.command("table")(table)


def table(
    lattice: Annotated[
        str,
        typer.Argument(
            metavar="LATTICE|DIGEST", help="A lattice as in count, or the beginning of a series' digest."
        ),
    ],
    object_name: Annotated[
        str | None, typer.Argument(metavar="[OBJECT]", help="As in count; left out with a digest.")
    ] = None,
    start: options.Start = None,
    to: Annotated[int | None, typer.Option("--to", metavar="N", help="Only lengths up to this one.")] = None,
    so_far: Annotated[
        bool, typer.Option("--so-far", help="Add the partial sums of the open reading, marked.")
    ] = False,
    per_site: options.PerSite = False,
    ledger: options.Ledger = None,
    as_json: options.AsJson = False,
    as_csv: options.AsCsv = False,
    plain: options.Plain = False,
) -> None:
    """Print the coefficient table of a series, every record of its chain checked."""
    from fleetcount.ledger import tables
    from fleetcount.ledger.access import open_store

    options.one_form(json=as_json, csv=as_csv, plain=plain)
    if so_far and (as_csv or plain or to is not None):
        raise InputError(
            "--so-far goes with the text and with --json, whole", mend="leave the other option out"
        )
    defined = options.define(lattice, object_name, start) if object_name is not None else None
    with open_store(ledger, read_only=True) as store:
        series = _series(store, lattice, defined)
        view = tables.view(store, series, so_far)
        found = view.table if to is None else view.table.cut(to)
        if per_site:
            found = found.per_site()
        options.give(found, json=as_json, csv=as_csv, plain=plain)
        if not as_json:
            for reading in view.open:
                options.say(_open_line(reading))


def _series(store: Store, beginning: str, defined: Series | None) -> Series:
    from fleetcount.ledger import tables
    from fleetcount.ledger.overview import series_of

    known = {row.digest for row in store.series()}
    if defined is not None:
        if defined.digest not in known:
            raise InputError(
                f"{defined.title()} is not in this ledger",
                where=store.location,
                mend="`fleetcount progress` lists what is",
            )
        return defined
    if len(beginning) < tables.LEAST_BEGINNING or set(beginning.lower()) - set("0123456789abcdef"):
        raise InputError(
            f"{beginning} alone is no series",
            mend="give lattice and object, or at least four digits of a series' digest",
        )
    return series_of(tables.find_series(store, beginning))


def _open_line(reading: OpenReading) -> str:
    census = reading.census
    return f"open reading to n={reading.reach}: {100 * census.share_done:.1f}% done, {census.units} units"
