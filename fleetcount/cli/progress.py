"""The command `progress`: how far everything in a ledger is."""

from __future__ import annotations

import json
from collections.abc import Iterator
from datetime import datetime
from typing import TYPE_CHECKING

import typer

from fleetcount.cli import options

if TYPE_CHECKING:
    from fleetcount.ledger.overview import Overview, ReadingView, SeriesView


def register(app: typer.Typer) -> None:
    """Add the command to an app."""
    app.command("progress")(progress)


def progress(ledger: options.Ledger = None, as_json: options.AsJson = False) -> None:
    """Show all series of a ledger: readings, units, share done, speed, time left, machines."""
    from fleetcount.ledger.access import open_store
    from fleetcount.ledger.overview import overview

    with open_store(ledger, read_only=True) as store:
        found = overview(store)
    if as_json:
        typer.echo(json.dumps(found.document()))
    else:
        typer.echo("\n".join(_lines(found)))


def _lines(found: Overview) -> Iterator[str]:
    yield f"ledger {found.location}"
    if not found.series:
        yield "  no series yet"
    for view in found.series:
        yield ""
        yield from _series_lines(view)
    if found.machines:
        yield ""
        yield "machines"
        for row in found.machines:
            yield f"  {row.machine.name}: {row.machine.standing}, last seen {_clock(row.last_seen)}"
            yield f"    {row.machine.processor}"


def _series_lines(view: SeriesView) -> Iterator[str]:
    reach = "no final term yet" if view.final is None else f"final to n={view.final}"
    yield f"{view.series.title()}  {view.row.digest[:12]}  {reach}"
    if view.holder is not None:
        who, until = view.holder
        yield f"  held by process {who.pid} on {who.machine} until {_clock(until)}"
    for reading in view.readings:
        yield from _reading_lines(reading)


def _reading_lines(reading: ReadingView) -> Iterator[str]:
    from fleetcount.cli.screen import amount, duration

    row, census = reading.row, reading.census
    if row.finished is not None:
        yield (
            f"  reading {row.reading[:8]} of {row.lengths}: finished {_clock(row.finished)}, {census.units} units, "
            f"{amount(census.nodes)}nodes, {duration(census.seconds)} of core time"
        )
        return
    units = ", ".join(f"{share.units} {state}" for state, share in census.states.items() if share.units)
    yield f"  reading {row.reading[:8]} of {row.lengths}: {100 * census.share_done:.1f}% done"
    yield f"    units: {units}"
    speed = f"{amount(reading.rate)}nodes/s" if reading.rate else "nobody is counting it now"
    yield f"    {speed}, time left {duration(reading.seconds_left)}"


def _clock(microseconds: int) -> str:
    return datetime.fromtimestamp(microseconds / 1e6).astimezone().strftime("%Y-%m-%d %H:%M:%S %Z")
