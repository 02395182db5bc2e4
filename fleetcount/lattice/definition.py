"""Reading a definition file: text to `Lattice`, refusing everything that is not one."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from fractions import Fraction
from pathlib import Path

from fleetcount.lattice import checks, files
from fleetcount.lattice.entries import Entry
from fleetcount.lattice.model import Arc, Lattice, Site

_KEYS = frozenset(
    ("name", "title", "dimension", "periods", "metric", "metric_is", "up", "sites", "edges", "arcs")
)


def load(path: str | Path) -> Lattice:
    """The lattice of a definition file.

    Raises:
        InputError: the file cannot be read.
        LatticeError: it is not a valid definition.
    """
    path = Path(path)
    return parse(files.read_text(path, "lattice"), str(path))


def parse(text: str, source: str) -> Lattice:
    """The lattice that a text defines, in canonical form; `source` names the text in errors.

    Raises:
        LatticeError: naming source, entry and mend.
    """
    top = Entry(source, "", files.document(text, source))
    top.only(_KEYS)
    dimension = top.integer("dimension", 1, checks.GREATEST_DIMENSION)
    periods = top.integer("periods", 1, dimension, default=dimension)
    name = top.identifier("name")
    sites, numbers = _sites(top, dimension, periods)
    arcs, one_way = _arcs(top, numbers, periods)
    lattice = Lattice(
        name=name,
        title=top.line("title", default=name),
        dimension=dimension,
        periods=periods,
        metric=_metric(top, dimension),
        metric_is=top.choice("metric_is", ("exact", "drawing"), default="exact"),
        up=_up(top, dimension),
        sites=sites,
        arcs=arcs,
        one_way=one_way,
        source=source,
    )
    return replace(lattice, warnings=checks.check(lattice))


def _metric(top: Entry, dimension: int) -> tuple[tuple[Fraction, ...], ...]:
    rows = top.sub("metric").items(dimension, "one row for each axis")
    metric = tuple(row.rationals(dimension, "one entry for each axis") for row in rows)
    for i in range(dimension):
        for j in range(i):
            if metric[i][j] != metric[j][i]:
                what = (
                    f"not symmetric: row {i + 1}, column {j + 1} is {metric[i][j]}, its mirror {metric[j][i]}"
                )
                raise top.error(what, "give both the same scalar product of two cell vectors", "metric")
    return metric


def _up(top: Entry, dimension: int) -> tuple[int, ...]:
    if not top.has("up"):
        return (0,) * (dimension - 1) + (1,)
    up = top.sub("up").integers(dimension, checks.GREATEST_UP, "one for each axis")
    if not any(up):
        raise top.error("all zero", "give the form that is the height, for example [0, 1]", "up")
    return up


def _sites(top: Entry, dimension: int, periods: int) -> tuple[tuple[Site, ...], dict[str, int]]:
    """The sites by position, and the number of each name."""
    entries = top.tables("sites")
    if not entries or len(entries) > checks.GREATEST_SITES:
        what = f"{len(entries)} sites in a cell"
        raise top.error(what, f"give at least one [[sites]] and at most {checks.GREATEST_SITES}", "sites")
    by_place: dict[tuple[Fraction, ...], Entry] = {}
    sites: dict[str, Site] = {}
    for entry in entries:
        entry.only(frozenset(("name", "at")))
        site = Site(entry.identifier("name"), entry.sub("at").rationals(dimension, "one for each axis"))
        if site.name in sites:
            raise entry.error(f"a second site called {site.name!r}", "give each site a name of its own")
        for axis in range(periods):
            if not 0 <= site.at[axis] < 1:
                shift = site.at[axis].__floor__()
                what = f"coordinate {axis + 1} is {site.at[axis]}, outside [0, 1)"
                mend = f"write {site.at[axis] - shift} and move the cells of the site's edges by {shift}"
                raise entry.error(what, mend, "at")
        if site.at in by_place:
            raise entry.error(f"at the same place as {by_place[site.at].label}", "move one of the two", "at")
        by_place[site.at] = entry
        sites[site.name] = site
    ordered = tuple(sorted(sites.values(), key=lambda s: s.at))
    return ordered, {site.name: number for number, site in enumerate(ordered)}


def _arcs(top: Entry, numbers: Mapping[str, int], periods: int) -> tuple[tuple[Arc, ...], bool]:
    """The arcs in order, and whether any is one-way."""
    edges, ways = top.tables("edges"), top.tables("arcs")
    if not edges and not ways:
        raise top.error("neither [[edges]] nor [[arcs]]", "say which sites are joined", "edges")
    if len(edges) + len(ways) > checks.GREATEST_SITES * checks.GREATEST_ARMS:
        raise top.error("too many edges", f"at most {checks.GREATEST_ARMS} arms to a site", "edges")
    found: dict[Arc, Entry] = {}

    def add(arc: Arc, entry: Entry) -> None:
        if arc in found:
            raise entry.error(f"the same connection as {found[arc].label}", "leave one of the two out")
        found[arc] = entry

    for entry in edges + ways:
        entry.only(frozenset(("from", "to", "cell")))
        source, target = (entry.known("from", numbers, "site"), entry.known("to", numbers, "site"))
        cell = entry.sub("cell").integers(periods, checks.GREATEST_CELL, "one for each period")
        if source == target and not any(cell):
            raise entry.error("joins a site to itself", "give the cell of another site, or leave it out")
        add(Arc(source, target, cell), entry)
        if entry.kind == "edges":
            add(Arc(target, source, tuple(-c for c in cell)), entry)
    return tuple(sorted(found)), bool(ways)
