"""The sites of a patch that an object may visit: its region, what its rule forbids, and how it is rooted."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np

from fleetcount.lattice.model import Lattice
from fleetcount.methods.direct.keys import Prefix
from fleetcount.methods.direct.twin import surface_rooted, walls_at
from fleetcount.series import forms
from fleetcount.series.definition import Series
from fleetcount.series.region import Wall, contains_all, excesses

Array = np.ndarray[Any, np.dtype[Any]]
Test = Callable[[Array, Array], Array]


def allowed_sites(series: Series, root: Prefix) -> Test | None:
    """Kinds [k] and cells [k, periods] to truth values [k]; None where every site is allowed.

    The start itself is always part of a patch, whatever this says of it.
    """
    lattice, walls = series.lattice, walls_at(series, root)
    tests: list[Test] = [contains_all(lattice, walls)] if walls else []
    if series.rule.above_start:
        bottom = Wall(lattice.up, forms.value(lattice.up, lattice, root.start))
        tests.append(lambda kinds, cells: excesses(lattice, bottom, kinds, cells) > 0)
    if root.least:
        greater = _greater(lattice, root.start)
        surface = walls[0] if surface_rooted(series) else None
        tests.append(
            greater
            if surface is None
            else lambda kinds, cells: (excesses(lattice, surface, kinds, cells) > 0) | greater(kinds, cells)
        )
    if not tests:
        return None
    return lambda kinds, cells: np.logical_and.reduce([test(kinds, cells) for test in tests])


def _greater(lattice: Lattice, start: int) -> Test:
    """The sites after the start in the lexicographic order of positions, which translations keep."""
    at = np.array(lattice.positions, dtype=np.int64)

    def greater(kinds: Array, cells: Array) -> Array:
        away = at[kinds] - at[start]
        away[:, : lattice.periods] += lattice.scale * cells.astype(np.int64)
        sign = np.zeros(len(kinds), dtype=np.int64)
        for axis in range(lattice.dimension):
            sign = np.where(sign == 0, np.sign(away[:, axis]), sign)
        return np.asarray(sign > 0)

    return greater
