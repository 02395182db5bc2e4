"""Which symmetries may be used: those that keep every wall, and every site, direction or form that a series names."""

from __future__ import annotations

import operator
from collections.abc import Sequence

from fleetcount.lattice.symmetry import Symmetry, stabilizer
from fleetcount.series.definition import Series
from fleetcount.series.forms import direction_form

Form = tuple[int, ...]


def kept_symmetries(series: Series, start: int) -> tuple[Symmetry, ...]:
    """The symmetries that fix the start and change nothing that is counted; the identity first."""
    return tuple(g for g in stabilizer(series.lattice, start) if _keeps(series, g))


def _keeps(series: Series, g: Symmetry) -> bool:
    exact, either = _named_forms(series)
    directions = [s.direction for s in series.statistics if s.name == "steps"]
    return (
        (series.end is None or g.apply(*series.end) == series.end)
        and all(_pulled(form, g) == form for form in exact)
        and all(_pulled(form, g) in (form, _minus(form)) for form in either)
        and all(_turned(d, g) in (d, _minus(d)) for d in directions)
    )


def _named_forms(series: Series) -> tuple[list[Form], list[Form]]:
    """Forms whose values must stay, and forms whose values may change sign."""
    exact = [wall.form for wall in series.walls]
    up = series.lattice.up
    if (
        series.rule.above_start
        or series.rule.ends == "on top"
        or any(s.name == "height" for s in series.statistics)
    ):
        exact.append(up)
    either = [up] if {"height2", "along2"} & set(series.moments) else []
    either += [direction_form(s.direction, series.lattice) for s in series.statistics if s.name == "span"]
    return exact, either


def _pulled(form: Sequence[int], g: Symmetry) -> Form:
    """The form whose value at a place is that of `form` at its image."""
    return tuple(sum(map(operator.mul, form, column)) for column in zip(*g.matrix, strict=True))


def _turned(direction: Sequence[int], g: Symmetry) -> Form:
    return tuple(sum(map(operator.mul, row, direction)) for row in g.matrix)


def _minus(form: Sequence[int]) -> Form:
    return tuple(-x for x in form)
