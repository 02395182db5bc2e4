"""`fleetcount ledger ...`: what is done to a ledger itself."""

from __future__ import annotations

import json
from typing import Annotated

import typer

ledger = typer.Typer(
    name="ledger",
    help="Look after a ledger.",
    no_args_is_help=True,
    rich_markup_mode=None,
    add_completion=False,
)


def register(app: typer.Typer) -> None:
    """Add the group to the program."""
    app.add_typer(ledger)


@ledger.callback()
def _group() -> None:
    """Look after a ledger."""


@ledger.command()
def upgrade(
    where: Annotated[
        str | None,
        typer.Option(
            "--ledger",
            metavar="PATH_OR_URL",
            envvar="FLEETCOUNT_LEDGER",
            help="The ledger. Default: fleetcount.sqlite in this folder.",
        ),
    ] = None,
    as_json: Annotated[
        bool, typer.Option("--json", help="One JSON document on standard output, nothing else.")
    ] = False,
) -> None:
    """Bring the schema of a ledger up to date. It is never done unasked: keep a copy first."""
    from fleetcount.ledger import access

    location, before, after = access.upgrade(where)
    if as_json:
        typer.echo(json.dumps({"format": 1, "ledger": location, "before": before, "after": after}))
    elif before == after:
        typer.echo(f"{location}: schema {after}, nothing to do")
    else:
        typer.echo(f"{location}: upgraded from schema {before} to {after}")
