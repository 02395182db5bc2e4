"""Options and answers that several commands share."""

from __future__ import annotations

import shutil
from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Annotated, Any

import typer

from fleetcount.errors import InputError, TrustError
from fleetcount.series import canonical, moments, statistics
from fleetcount.series.objects import OBJECTS

if TYPE_CHECKING:
    from fleetcount.series.definition import Series
    from fleetcount.series.files import WrittenSeries
    from fleetcount.series.table import CoefficientTable

OBJECTS_MEAN = {name: rule.meaning for name, rule in OBJECTS.items()}


def _glossary(meanings: Mapping[str, str]) -> str:
    return "; ".join(f"{name}: {meaning}" for name, meaning in meanings.items())


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
Plain = Annotated[
    bool, typer.Option("--plain", help="The columns separated by blanks, without a heading: length, term.")
]
PerSite = Annotated[
    bool, typer.Option("--per-site", help="Polygons: state the divisor that gives the number per site.")
]
ObjectName = Annotated[
    str | None,
    typer.Argument(metavar="OBJECT", help=f"What to count. {_glossary(OBJECTS_MEAN)}. Left out with a file."),
]
Start = Annotated[
    str | None,
    typer.Option(
        metavar="SITE|CELL[:SITE]",
        help="Start site, as 0,3:a in cell coordinates or by its name in cell 0. Default: the origin's cell; where "
        "sites are not all alike, the sum over one cell.",
    ),
]
End = Annotated[
    str | None,
    typer.Option(
        metavar="CELL[:SITE]", help="Only walks that end there: 1,0 in cell coordinates, 1,0:a with a site."
    ),
]
By = Annotated[
    list[str] | None,
    typer.Option(
        "--by",
        metavar="STAT",
        help=f"Refine the count by a statistic; twice for two. {_glossary(statistics.MEANINGS)}. On trails visits run "
        "over positions, contacts over sites.",
    ),
]
Moment = Annotated[
    list[str] | None,
    typer.Option(
        "--moment",
        metavar="NAME",
        help=f"Add an exact sum (no mean) over all that is counted; may be repeated. {_glossary(moments.MEANINGS)}. "
        "Nearest neighbours are at distance 1; at squared distance 3 on bcc and diamond, 2 on fcc.",
    ),
]
Region = Annotated[
    str | None,
    typer.Option(
        metavar="NAME",
        help="Stay in a region, walls included, in cell coordinates. half: height at least 0; quarter: the last two "
        "coordinates at least 0; orthant: all of them; wedge: the last at least 0 and at most the first; slab:W: "
        "heights 0 to W, which are W+1 layers; box:A,B,...: each coordinate from 0 to its number; tube:A,...: only "
        "the first ones. Polygons in it are counted up to the translations that keep it; in a half-space they touch "
        "the wall.",
    ),
]


def series_of(definition: WrittenSeries) -> Series:
    """The series of a definition; what its lattice warns of is said."""
    from fleetcount.lattice.catalogue import find

    found = find(definition.lattice)
    for warning in found.warnings:
        say(f"{found.name}: {warning}")
    return definition.series(found)


def say(text: str) -> None:
    """A line for people, beside the answer: on standard error."""
    typer.echo(text, err=True)


def one_form(*, json: bool, csv: bool, plain: bool, polynomials: bool = False) -> None:
    """Refuse two forms of output at once."""
    if json + csv + plain + polynomials > 1:
        raise InputError("--json, --csv, --plain and --polynomials exclude each other", mend="choose one")


def give(
    table: CoefficientTable,
    *,
    json: bool,
    csv: bool,
    plain: bool,
    polynomials: bool = False,
    still_open: Sequence[Mapping[str, Any]] = (),
) -> None:
    """Print a table in the form that was asked for, with what published values say of it.

    Args:
        still_open: readings that are not finished, for the JSON document.

    Raises:
        TrustError: a term contradicts a published value; the table is printed all the same.
    """
    from fleetcount.trust.published import compare

    agreement = compare(table)
    line = agreement.line() if agreement else "no published values to compare with are at hand"
    if json:
        document = {**table.document(), "open": list(still_open)} if still_open else table.document()
        typer.echo(canonical.text(document))
    elif csv or plain:
        typer.echo(table.csv() if csv else table.plain(), nl=False)
    elif polynomials:
        typer.echo(table.polynomial_text(), nl=False)
    else:
        typer.echo(table.text(shutil.get_terminal_size().columns) + line)
    if agreement and agreement.disagreement:
        raise TrustError(agreement.disagreement)
    if csv or plain or json or polynomials:
        say(line)
