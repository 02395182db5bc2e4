"""How each statistic is kept in a kernel: its tables, and what its values there mean."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np

from fleetcount.lattice.model import Lattice
from fleetcount.lattice.patch import Patch
from fleetcount.methods.direct import refined_kernel as rk
from fleetcount.methods.direct.end_orbits import end_orbits
from fleetcount.series import forms
from fleetcount.series.area import area_unit
from fleetcount.series.definition import Series
from fleetcount.series.region import Wall, excesses
from fleetcount.series.statistics import Statistic

Array = np.ndarray[Any, np.dtype[Any]]

SORTS = {
    "contacts": rk.CONTACTS,
    "visits": rk.ADDED,
    "steps": rk.ADDED,
    "turns": rk.TURNED,
    "height": rk.AT_END,
    "end": rk.AT_END,
    "span": rk.SPANNED,
    "revisits": rk.REVISITED,
    "area": rk.AREA,
}


@dataclass(frozen=True)
class Measure:
    """One statistic in a kernel.

    Attributes:
        size: its values in the kernel are 0 to size - 1.
        gain: int32 [sites + 1, arms], what a step adds; None where nothing is added.
        value: int32 [sites + 1], of a site, at least 0; None where sites have none.
        first: its value before the first step.
        unclosed: what closing adds too much.
        decoded: the numbers of a tally's place that a value stands for.
    """

    size: int
    gain: Array | None = None
    value: Array | None = None
    first: int = 0
    unclosed: int = 0
    decoded: Callable[[int], tuple[int, ...]] = lambda x: (x,)


def measure(
    series: Series, one: Statistic, patch: Patch, positions: Array, walls: Sequence[Wall], top: int
) -> Measure:
    """The tables of one statistic on a patch.

    Args:
        positions: of the sites relative to the start, int64 [sites + 1, dimension], in units of 1/scale.
        walls: the region as seen from the start's cell.
    """
    lattice = series.lattice
    if one.name == "visits":
        return _visits(series, one, patch, walls, top)
    if one.name == "steps":
        along = [[forms.parallel(lattice.step(a), one.direction) for a in arms] for arms in lattice.arms]
        return Measure(top + 1, gain=by_arm(along, patch))
    if one.name == "area":
        return _area(lattice, patch, positions, top)
    if one.name == "span":
        form = forms.direction_form(one.direction, lattice)
        value = layers(lattice, form, patch)
        return Measure(int(value.max()) + 1, value=value)
    if one.name == "height":
        value = layers(lattice, lattice.up, patch)
        first = int(value[rk.START])
        return Measure(int(value.max()) + 1, value=value, first=first, decoded=lambda x: (x - first,))
    if one.name == "end":
        value, ends = end_orbits(series, patch)
        return Measure(len(ends), value=value, first=int(value[rk.START]), decoded=lambda x: ends[x])
    if one.name == "contacts":
        pairs = max(len(a) + len(b) for a, b in zip(lattice.arms, lattice.arms_in, strict=True))
        return Measure((top + 1) * pairs // 2 + 1)
    return Measure(top + 1)


def _visits(series: Series, one: Statistic, patch: Patch, walls: Sequence[Wall], top: int) -> Measure:
    on = np.zeros(patch.sites + 1, dtype=bool)
    for wall in walls if one.wall == 0 else (walls[one.wall - 1],):
        on |= excesses(series.lattice, wall, patch.kind, patch.cells) == 0
    on[0] = False
    start = int(on[rk.START]) if series.rule.closed else 0
    return Measure(top + 2, gain=on[patch.next].astype(np.int32), first=start, unclosed=start)


def _area(lattice: Lattice, patch: Patch, positions: Array, top: int) -> Measure:
    """Twice the area between the start and each step, in units of 1/scale squared; whole objects add up to units."""
    x, y = positions[:, 0], positions[:, 1]
    gain = x[:, None] * y[patch.next] - y[:, None] * x[patch.next]
    gain[patch.next == 0] = 0
    unit = area_unit(lattice)

    def decoded(twice: int) -> tuple[int, ...]:
        area = Fraction(twice, 2 * lattice.scale**2) * unit.denominator
        assert area.denominator == 1, "an area that is no multiple of its unit"
        return (int(area),)

    return Measure(top * int(np.abs(gain).max()) + 1, gain=gain.astype(np.int32), decoded=decoded)


def layers(lattice: Lattice, form: forms.Form, patch: Patch) -> Array:
    """Values of a form on a patch in units of its least spacing, the least being 0: int32 [sites + 1]."""
    lowest = Wall(form, min(forms.value(form, lattice, site) for site in range(len(lattice.sites))))
    found = excesses(lattice, lowest, patch.kind, patch.cells)
    found -= found[1:].min()
    found[0] = 0
    return found.astype(np.int32)


def by_arm(table: Sequence[Sequence[object]], patch: Patch) -> Array:
    """A table by kind and arm, spread over the sites of a patch: int32 [sites + 1, arms]."""
    kinds = np.zeros((len(table), patch.next.shape[1]), dtype=np.int32)
    for kind, row in enumerate(table):
        kinds[kind, : len(row)] = [int(bool(x)) for x in row]
    spread: Array = np.take(kinds, patch.kind, axis=0)
    return spread
