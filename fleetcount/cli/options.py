"""Options and answers that several commands share."""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated

import typer

from fleetcount.errors import InputError, TrustError

if TYPE_CHECKING:
    from fleetcount.series.definition import Series
    from fleetcount.series.table import CoefficientTable

Ledger = Annotated[
    str | None,
    typer.Option(
        "--ledger",
        metavar="PATH_OR_URL",
        envvar="FLEETCOUNT_LEDGER",
        help="The ledger: a file, or postgresql://... Default: fleetcount.sqlite in this folder.",
    ),
]
AsJson = Annotated[
    bool, typer.Option("--json", help="One JSON document on standard output, nothing else there.")
]
AsCsv = Annotated[bool, typer.Option("--csv", help="Comma-separated values with a heading.")]
Plain = Annotated[bool, typer.Option("--plain", help="Two columns, length and term, without a heading.")]
PerSite = Annotated[
    bool, typer.Option("--per-site", help="Polygons: state the divisor that gives the number per site.")
]
Start = Annotated[
    str | None,
    typer.Option(
        metavar="SITE", help="Start site, where sites are not all alike. Default: the sum over one cell."
    ),
]


def define(lattice: str, object_name: str, start: str | None) -> Series:
    """The series that a command line defines."""
    from fleetcount.lattice.catalogue import find
    from fleetcount.series.defining import define as define_series

    found = find(lattice)
    for warning in found.warnings:
        say(f"{found.name}: {warning}")
    return define_series(found, object_name, start)


def say(text: str) -> None:
    """A line for people, beside the answer: on standard error."""
    typer.echo(text, err=True)


def one_form(*, json: bool, csv: bool, plain: bool) -> None:
    """Refuse two forms of output at once."""
    if json + csv + plain > 1:
        raise InputError("--json, --csv and --plain exclude each other", mend="choose one")


def give(table: CoefficientTable, *, json: bool, csv: bool, plain: bool) -> None:
    """Print a table in the form that was asked for, with what published values say of it.

    Raises:
        TrustError: a term contradicts a published value; the table is printed all the same.
    """
    from fleetcount.trust.published import compare

    agreement = compare(table)
    line = agreement.line() if agreement else "no published values to compare with are at hand"
    if json:
        typer.echo(table.json())
    elif csv or plain:
        typer.echo(table.csv() if csv else table.plain(), nl=False)
    else:
        typer.echo(table.text() + line)
    if agreement and agreement.disagreement:
        raise TrustError(agreement.disagreement)
    if csv or plain or json:
        say(line)
