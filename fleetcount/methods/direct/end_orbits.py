"""The distribution of ends is tallied by orbits under the symmetries that are used, and unfolded at the end."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np

from fleetcount.errors import TrustError
from fleetcount.lattice.patch import Patch
from fleetcount.lattice.symmetry import Symmetry
from fleetcount.methods.direct.kept import kept_symmetries
from fleetcount.series.definition import Series
from fleetcount.series.tally import Tally

Array = np.ndarray[Any, np.dtype[Any]]
End = tuple[int, ...]
"""Cell coordinates, then the number of the site."""


def end_orbits(series: Series, patch: Patch) -> tuple[Array, list[End]]:
    """For each site of a patch the number of its orbit, int32 [sites + 1], and the first end of each orbit."""
    ends = np.concatenate([patch.cells.astype(np.int64), patch.kind.astype(np.int64)[:, None]], axis=1)
    first = ends.copy()
    for g in kept_symmetries(series, patch.start):
        images = _images(g, patch)
        first = np.where(_before(images, first)[:, None], images, first)
    first[0] = first[1]
    found, orbits = np.unique(first, axis=0, return_inverse=True)
    return orbits.reshape(-1).astype(np.int32), [tuple(map(int, end)) for end in found]


def _images(g: Symmetry, patch: Patch) -> Array:
    periods = patch.cells.shape[1]
    turn = np.array([row[:periods] for row in g.matrix[:periods]], dtype=np.int64)
    shifts, images = np.array(g.shifts, dtype=np.int64), np.array(g.images, dtype=np.int64)
    cells = patch.cells.astype(np.int64) @ turn.T + shifts[patch.kind]
    return np.concatenate([cells, images[patch.kind][:, None]], axis=1)


def _before(a: Array, b: Array) -> Array:
    """Row by row, whether a comes before b in lexicographic order."""
    sign = np.zeros(len(a), dtype=np.int64)
    for column in range(a.shape[1]):
        sign = np.where(sign == 0, np.sign(a[:, column] - b[:, column]), sign)
    return np.asarray(sign < 0)


def unfolded(series: Series, table: Tally, partial: bool = False) -> Tally:
    """The rows of each orbit shared out equally over its ends; partial sums are rounded down.

    Raises:
        TrustError: a remainder, which no correct sum can leave.
    """
    before = next((i for i, s in enumerate(series.statistics) if s.name == "end"), None)
    if before is None or series.start is None:
        return table
    group, at, width = kept_symmetries(series, series.start), 1 + before, series.lattice.periods + 1
    orbits: dict[End, set[End]] = {}
    together = Tally(table.width)  # what a unit has counted plainly stands at any end of an orbit
    for place, values in table.rows.items():
        end = place[at : at + width]
        if end not in orbits:
            orbit = set(_orbit(group, end[:-1], end[-1]))
            orbits.update(dict.fromkeys(orbit, orbit))
        together.add(Tally(table.width, {(*place[:at], *min(orbits[end]), *place[at + width :]): values}))
    spread = Tally(table.width)
    for place, values in together.sorted_rows():
        orbit = orbits[place[at : at + width]]
        if not partial and any(value % len(orbit) for value in values):
            raise TrustError(
                f"{values[0]} is no multiple of the {len(orbit)} ends of an orbit", where=f"row {place}"
            )
        share = tuple(value // len(orbit) for value in values)
        for end in orbit:
            spread.rows[(*place[:at], *end, *place[at + width :])] = share
    return spread


def _orbit(group: tuple[Symmetry, ...], cell: tuple[int, ...], site: int) -> Iterator[End]:
    for g in group:
        image, there = g.apply(site, cell)
        yield (*there, image)
