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
            metavar="LATTICE|SERIES.toml|DIGEST",
            help="A lattice or series file as in count, or the beginning of a series' digest.",
        ),
    ],
    object_name: options.ObjectName = None,
    start: options.Start = None,
    end: options.End = None,
    by: options.By = None,
    moment: options.Moment = None,
    region: options.Region = None,
    to: Annotated[int | None, typer.Option("--to", metavar="N", help="Only lengths up to this one.")] = None,
    so_far: Annotated[
        bool, typer.Option("--so-far", help="Add the partial sums of the open reading, marked.")
    ] = False,
    per_site: options.PerSite = False,
    ledger: options.Ledger = None,
    as_json: options.AsJson = False,
    as_csv: options.AsCsv = False,
    plain: options.Plain = False,
    polynomials: Annotated[
        bool,
        typer.Option(
            "--polynomials", help="Each length as a polynomial in named variables, for computer algebra."
        ),
    ] = False,
) -> None:
    """Print the coefficient table of a series, every record of its chain checked."""
    from fleetcount.ledger import tables
    from fleetcount.ledger.access import open_store
    from fleetcount.series.files import asked, is_file

    options.one_form(json=as_json, csv=as_csv, plain=plain, polynomials=polynomials)
    if so_far and (as_csv or plain or polynomials or to is not None):
        raise InputError(
            "--so-far goes with the text and with --json, whole", mend="leave the other option out"
        )
    options_given = any(given not in (None, []) for given in (start, end, by, moment, region))
    defined = None
    if object_name is not None or is_file(lattice) or options_given:
        definition = asked(
            lattice, object_name, to, start=start, end=end, by=by, moment=moment, region=region
        )
        defined = options.series_of(definition)
    with open_store(ledger, read_only=True) as store:
        series = _series(store, lattice, defined)
        view = tables.view(store, series, so_far)
        found = view.table if to is None else view.table.cut(to)
        if per_site:
            found = found.per_site()
        still_open = [reading.document() for reading in view.open]
        options.give(
            found, json=as_json, csv=as_csv, plain=plain, polynomials=polynomials, still_open=still_open
        )
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
            mend="give lattice and object, a series file, or at least four digits of a series' digest",
        )
    return series_of(tables.find_series(store, beginning))


def _open_line(reading: OpenReading) -> str:
    from fleetcount.cli.screen import duration

    census = reading.census
    left = duration(reading.seconds_left)
    done = f"{100 * census.share_done:.1f}% done"
    return f"open reading to n={reading.reach}: {done}, {census.units} units, time left {left}"
