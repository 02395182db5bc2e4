"""The command `lattices`: what there is to walk on, and one of it in full."""

from __future__ import annotations

import json
import shutil
import textwrap
from collections.abc import Iterable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from fleetcount.errors import InputError

if TYPE_CHECKING:
    from fleetcount.lattice.model import Lattice

_FIELD = 12
_DRAWN_STEPS = {1: 6, 2: 6, 3: 2}


def register(app: typer.Typer) -> None:
    """Add the command to an app."""
    app.command("lattices")(lattices)


def lattices(
    name: Annotated[
        str | None, typer.Argument(metavar="[NAME]", help="A built-in lattice, or the path of a file.")
    ] = None,
    picture: Annotated[
        Path | None,
        typer.Option(
            metavar="FILE.svg",
            help="Draw a patch of the lattice into this file, or what --object and --length name.",
        ),
    ] = None,
    object_name: Annotated[
        str | None,
        typer.Option(
            "--object",
            metavar="OBJECT",
            help="Draw the configurations that a count of this object counts, one of each kind, with how many images "
            "it has; in two dimensions.",
        ),
    ] = None,
    length: Annotated[int | None, typer.Option(metavar="N", help="Their length.")] = None,
    start: Annotated[
        str | None, typer.Option(metavar="SITE", help="Their start site. Default: one of each kind.")
    ] = None,
    as_json: Annotated[bool, typer.Option("--json", help="One JSON document on standard output.")] = False,
) -> None:
    """List the built-in lattices, or show one in full."""
    from fleetcount.lattice import catalogue

    _check_together(picture, object_name, length, start)

    if name is None:
        if picture is not None:
            raise InputError("--picture of which lattice?", mend="give a name before it")
        every = [catalogue.find(known) for known in catalogue.names()]
        if as_json:
            typer.echo(
                json.dumps({"format": 1, "lattices": [_summary(lattice) for lattice in every]}, indent=1)
            )
        else:
            typer.echo("\n".join(_listing(every, shutil.get_terminal_size().columns)))
        return
    lattice = catalogue.find(name)
    summary = ""
    if picture is not None and object_name is not None and length is not None:
        summary = _draw_configurations(lattice, object_name, length, start, picture)
    elif picture is not None:
        _draw(lattice, picture)
    if as_json:
        typer.echo(json.dumps({"format": 1, "lattice": _full(lattice)}, indent=1))
    else:
        typer.echo("\n".join(_page(lattice, shutil.get_terminal_size().columns)))
        if picture is not None:
            typer.echo("\n" + (f"{summary}\n" if summary else "") + f"drawn into {picture}")


def _check_together(
    picture: Path | None, object_name: str | None, length: int | None, start: str | None
) -> None:
    """Options that mean nothing without each other."""
    if picture is not None and picture.suffix.lower() != ".svg":
        raise InputError(
            "pictures are drawn in SVG", where=f"--picture {picture}", mend="give a file name ending in .svg"
        )
    if picture is None and (object_name is not None or length is not None or start is not None):
        raise InputError("configurations are drawn into a file", mend="add --picture FILE.svg")
    if (object_name is None) != (length is None) or (start is not None and object_name is None):
        raise InputError("an object of which length?", mend="give --object and --length together")


def _draw_configurations(
    lattice: Lattice, object_name: str, length: int, start: str | None, path: Path
) -> str:
    from fleetcount.methods.direct.gallery import picture
    from fleetcount.series.defining import define

    text, summary = picture(define(lattice, object_name, start), length)
    _write(path, text)
    return summary


def _draw(lattice: Lattice, path: Path) -> None:
    from fleetcount.lattice.svg import patch_svg

    _write(path, patch_svg(lattice, _DRAWN_STEPS.get(lattice.dimension, 1) if lattice.periods > 1 else 6))


def _write(path: Path, text: str) -> None:
    try:
        path.write_text(text, encoding="utf-8")
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise InputError(f"cannot be written: {reason}", where=str(path), mend="give another place") from None


def _coordination(lattice: Lattice) -> list[int]:
    """The numbers of ways out of a site that occur."""
    return sorted({len(arms) for arms in lattice.arms})


def _summary(lattice: Lattice) -> dict[str, object]:
    from fleetcount.lattice import symmetry

    return {
        "name": lattice.name,
        "title": lattice.title,
        "dimension": lattice.dimension,
        "periods": lattice.periods,
        "sites_a_cell": len(lattice.sites),
        "coordination": _coordination(lattice),
        "one_way": lattice.one_way,
        "symmetries": symmetry.order(lattice),
    }


def _full(lattice: Lattice) -> dict[str, object]:
    from fleetcount.lattice import symmetry

    return {
        **_summary(lattice),
        "metric": [[str(x) for x in row] for row in lattice.metric],
        "metric_is": lattice.metric_is,
        "up": list(lattice.up),
        "sites": [
            {
                "name": site.name,
                "at": [str(x) for x in site.at],
                "arms": [{"to": lattice.sites[arm.target].name, "cell": list(arm.cell)} for arm in arms],
            }
            for site, arms in zip(lattice.sites, lattice.arms, strict=True)
        ],
        "alike": [[lattice.sites[s].name for s in orbit] for orbit in symmetry.site_orbits(lattice)],
        "warnings": list(lattice.warnings),
    }


def _listing(every: Sequence[Lattice], columns: int) -> list[str]:
    """A table, or where it would not fit a few lines a lattice."""
    head = ("name", "dimension", "sites a cell", "coordination", "one-way", "symmetries")
    rows = [_cells(_summary(lattice)) for lattice in every]
    widths = [max(len(row[i]) for row in (head, *rows)) for i in range(len(head))]
    if sum(widths) + 2 * (len(widths) - 1) <= columns:
        cells = ((row[0].ljust(widths[0]), *map(str.rjust, row[1:], widths[1:])) for row in (head, *rows))
        return ["  ".join(row) for row in cells]
    lines = []
    for name, dimension, sites, coordination, one_way, order in rows:
        way = "one-way, " if one_way == "yes" else ""
        text = f"dimension {dimension}, sites {sites}, coordination {coordination}, {way}symmetries {order}"
        lines += [name, *_wrapped(text, columns, "  ")]
    return lines


def _cells(summary: dict[str, object]) -> tuple[str, ...]:
    coordination = summary["coordination"]
    assert isinstance(coordination, list)
    return (
        str(summary["name"]),
        str(summary["dimension"]),
        str(summary["sites_a_cell"]),
        ", ".join(map(str, coordination)),
        "yes" if summary["one_way"] else "no",
        str(summary["symmetries"]),
    )


def _page(lattice: Lattice, columns: int) -> list[str]:
    from fleetcount.lattice import symmetry

    columns = max(columns, 24)
    periods = "" if lattice.periods == lattice.dimension else f", {lattice.periods} of them periodic"
    alike = "all sites alike"
    if not symmetry.all_alike(lattice):
        orbits = symmetry.site_orbits(lattice)
        kinds = (", ".join(lattice.sites[s].name for s in orbit) for orbit in orbits)
        alike = f"kinds of sites: {'; '.join(kinds)}"
    fixing = len(symmetry.stabilizer(lattice, 0))
    first = lattice.sites[0].name
    lines = [*_wrapped(f"{lattice.name}: {lattice.title}", columns, ""), ""]
    lines += _field("dimension", f"{lattice.dimension}{periods}", columns)
    lines += _matrix(lattice)
    if lattice.metric_is == "drawing":
        lines += _field("", "a drawing: counts are exact, lengths mean nothing", columns)
    lines += _field("height", f"{_vector(lattice.up)} on cell coordinates", columns)
    lines += _field("one-way", "yes" if lattice.one_way else "no", columns)
    text = f"{symmetry.order(lattice)} up to translations, {fixing} of them fix site {first}; {alike}"
    lines += _field("symmetries", text, columns)
    for warning in lattice.warnings:
        lines += _field("warning", warning, columns)
    lines += ["", *_sites(lattice, columns)]
    lines += _sketch(lattice, columns)
    return lines


def _sites(lattice: Lattice, columns: int) -> list[str]:
    """Each site with its place and its arms: number, end, cell of the end."""
    lines: list[str] = []
    for number, (site, arms) in enumerate(zip(lattice.sites, lattice.arms, strict=True)):
        lines += _wrapped(f"site {number}, {site.name}, at {_vector(site.at)}", columns, "")
        ends = [f"{k}: {lattice.sites[arm.target].name} {_vector(arm.cell)}" for k, arm in enumerate(arms)]
        lines += _columns(ends, columns)
    return lines


def _sketch(lattice: Lattice, columns: int) -> list[str]:
    from fleetcount.lattice.picture import START, site_marks, sketch

    drawn = sketch(lattice, 0, min(columns, 61))
    if not drawn:
        return []
    marks = dict.fromkeys(site_marks(lattice))
    legend = f"{START} site {lattice.sites[0].name}"
    if len(marks) > 1:
        names: dict[str, list[str]] = {mark: [] for mark in marks}
        for site, mark in zip(lattice.sites, site_marks(lattice), strict=True):
            names[mark].append(site.name)
        legend += "; " + "; ".join(f"{mark} {', '.join(names[mark])}" for mark in marks)
    return ["", *drawn, "", *_wrapped(f"{legend}; not to scale", columns, "")]


def _matrix(lattice: Lattice) -> list[str]:
    rows = [[str(x) for x in row] for row in lattice.metric]
    width = max(len(x) for row in rows for x in row)
    lines = ["  ".join(x.rjust(width) for x in row) for row in rows]
    return [("metric" if k == 0 else "").ljust(_FIELD) + line for k, line in enumerate(lines)]


def _field(name: str, text: str, columns: int) -> list[str]:
    return _wrapped(text, columns, " " * _FIELD, name.ljust(_FIELD))


def _wrapped(text: str, columns: int, indent: str, first: str | None = None) -> list[str]:
    start = indent if first is None else first
    return textwrap.wrap(text, max(columns, 24), initial_indent=start, subsequent_indent=indent)


def _columns(items: Sequence[str], columns: int) -> list[str]:
    """Items side by side, as many as fit."""
    width = max(map(len, items)) + 2
    across = max(1, columns // width)
    rows = (items[k : k + across] for k in range(0, len(items), across))
    return ["  " + "".join(item.ljust(width) for item in row).rstrip() for row in rows]


def _vector(numbers: Iterable[object]) -> str:
    return f"({', '.join(map(str, numbers))})"
