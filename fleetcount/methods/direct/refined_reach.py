"""Whether a refined series can be counted up to a length: the memory of its sums, and 64 bits for a slice of them."""

from __future__ import annotations

import math
import os
from collections.abc import Iterable

from fleetcount.errors import SeriesError
from fleetcount.lattice.model import Lattice
from fleetcount.lattice.patch import check_fits, sites_needed
from fleetcount.methods.direct.allowed import allowed_sites
from fleetcount.methods.direct.ground import width
from fleetcount.methods.direct.kept import kept_symmetries
from fleetcount.methods.direct.keys import Prefix
from fleetcount.methods.direct.refined_search import nodes_within
from fleetcount.series import forms
from fleetcount.series.definition import Series
from fleetcount.series.statistics import Statistic


def check_reach(series: Series, roots: Iterable[Prefix], top: int) -> None:
    """Raise InputError if the sums of all cores do not fit into memory, or those of a slice not into 64 bits.

    Nothing is built: each step adds to a distance at most the longest step, and to a statistic at most the greatest
    value that a step can add.
    """
    lattice = series.lattice
    longest = max(forms.dot(lattice, lattice.step(a), lattice.step(a)) for a in lattice.arcs)
    squared = top**2 * max(longest, _layers(lattice, lattice.up) ** 2)
    radius = top // 2 if series.rule.closed and not lattice.one_way else top
    for root in roots:
        nodes_within(series, top, squared, len(kept_symmetries(series, root.start)))
        allowed = allowed_sites(series, root)
        limit = check_fits(lattice, root.start, max(radius, 1), allowed, width=width(lattice))
        sites = sites_needed(lattice, root.start, max(radius, 1), allowed)
        cells = (top + 2) * math.prod(_values(series, one, top, sites) for one in series.statistics)
        needed = 8 * cells * (series.width + 1) * (os.cpu_count() or 1)
        if needed > limit:
            raise SeriesError(
                f"up to length {top} there may be {cells} rows, which need about {needed / 1e9:.3g} GB of memory",
                where=series.title(),
                mend=f"at most {limit / 1e9:.3g} GB can be used; ask for a smaller length or fewer statistics",
            )


def _values(series: Series, one: Statistic, top: int, sites: int) -> int:
    """At most so many values has a statistic in a kernel."""
    lattice = series.lattice
    if one.name == "end":
        return sites
    if one.name == "height":
        return 2 * top * _layers(lattice, lattice.up) + 1
    if one.name == "span":
        return 2 * top * _layers(lattice, forms.direction_form(one.direction, lattice)) + 1
    if one.name == "contacts":
        return (top + 1) * width(lattice) + 1
    if one.name == "area":
        steps = [lattice.step(arc) for arc in lattice.arcs]
        return top * top * max(abs(forms.cross(a, b)) for a in steps for b in steps) + 1
    return top + 2


def _layers(lattice: Lattice, form: forms.Form) -> int:
    """By how many units of its least spacing a form changes with one step, at most."""
    unit = forms.spacing(form, lattice) * lattice.scale
    return max(
        int(abs(sum(f * x for f, x in zip(form, lattice.step(arc), strict=True))) / unit)
        for arc in lattice.arcs
    )
