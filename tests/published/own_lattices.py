"""Definition files of strips, tubes and slabs, written as a user writes them.

The first axes are the periods; the others count the rows and layers, which become sites of the cell. A site
is named by its places along them: `s0`, `s1`, ... in a strip, `s0-0`, `s0-1`, ... in a tube.
"""

from __future__ import annotations

from itertools import product
from pathlib import Path

OWN_FILES = {
    "strip3-square-edge": (1, (3,), "s0"),
    "strip3-square-middle": (1, (3,), "s1"),
    "tube1-cubic": (1, (2, 2), "s0-0"),
    "tube2-cubic": (1, (3, 3), "s0-0"),
    "tube3-cubic": (1, (4, 4), "s0-0"),
    "tube4-cubic": (1, (5, 5), "s0-0"),
    "two-layer-slab-cubic": (2, (2,), "s0"),
}
"""For each table: number of periods, widths across them in sites, and the start site."""


def write(folder: Path, table_id: str) -> tuple[Path, str]:
    """Write the definition file for a table; returns its path and the name of the start site."""
    periods, widths, start = OWN_FILES[table_id]
    path = folder / f"{table_id}.toml"
    path.write_text(definition(periods, widths), encoding="utf-8")
    return path, start


def definition(periods: int, widths: tuple[int, ...]) -> str:
    """The part of a (hyper)cubic lattice that is `widths` sites wide across its periods."""
    dimension = periods + len(widths)
    unit = [[int(i == j) for j in range(dimension)] for i in range(dimension)]
    lines = [
        'name = "part"',
        'title = "part of a lattice"',
        f"dimension = {dimension}",
        f"periods = {periods}",
    ]
    lines.append(f"metric = {unit}")
    places = list(product(*map(range, widths)))
    for place in places:
        lines += ["[[sites]]", f'name = "{_name(place)}"', f"at = {[0] * periods + list(place)}"]
    for place in places:
        lines += [_edge(place, place, unit[axis][:periods]) for axis in range(periods)]
        for axis, width in enumerate(widths):
            if place[axis] + 1 < width:
                beside = (*place[:axis], place[axis] + 1, *place[axis + 1 :])
                lines.append(_edge(place, beside, [0] * periods))
    return "\n".join(lines) + "\n"


def _name(place: tuple[int, ...]) -> str:
    return "s" + "-".join(map(str, place))


def _edge(one: tuple[int, ...], other: tuple[int, ...], cell: list[int]) -> str:
    return f'[[edges]]\nfrom = "{_name(one)}"\nto = "{_name(other)}"\ncell = {cell}'
