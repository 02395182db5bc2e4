"""Random refined series, and the refined loop as plain Python: every combination can be tried, none is compiled."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager
from typing import Any

import pytest
from hypothesis import assume
from hypothesis import strategies as st

from fleetcount.errors import SeriesError
from fleetcount.lattice.model import Lattice
from fleetcount.methods.direct import ground, method, refined_ground, rooting, symmetry_states, twin
from fleetcount.methods.direct import refined_kernel as rk
from fleetcount.methods.direct.keys import Prefix
from fleetcount.series import moments, statistics
from fleetcount.series.defining import define
from fleetcount.series.definition import Series
from fleetcount.series.objects import OBJECTS
from fleetcount.series.tally import Tally
from tests.methods.splitting import METHOD, whole

WIDTH = 6
"""Columns of the tables in these tests, whatever the lattice: so one kernel serves them all."""


def forget() -> None:
    """Whatever was made of a series, and is kept for the next look."""
    for made in (ground._ground, refined_ground._ground, method._calibration, symmetry_states.states_of):
        made.cache_clear()


@contextmanager
def one_width() -> Iterator[None]:
    """Tables of all lattices with at most `WIDTH` arms are padded to that width."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(ground, "WIDTHS", (WIDTH,))
        forget()
        yield
    forget()


@contextmanager
def interpreted() -> Iterator[None]:
    """The refined loop runs as Python; an overflow of one of its small integers is a warning, and so an error."""

    def load(series: Series) -> Callable[..., bool]:
        run: Any = rk.refined_kernel(*refined_ground.traits_of(series))
        loop: Callable[..., bool] = run.py_func
        return loop

    with pytest.MonkeyPatch.context() as patch:
        for name, part in list(vars(rk).items()):
            if hasattr(part, "py_func"):
                patch.setattr(rk, name, part.py_func)
        patch.setattr(refined_ground, "load", load)
        patch.setattr(method, "_FIRST_TRIAL", 2)
        forget()
        yield
    forget()


def by_twin(series: Series, top: int) -> Tally:
    """The table of a series by the plain definitions alone, from every root that it has."""
    least = rooting.rootings(series)[0]
    sums = Tally(series.width)
    starts: list[Prefix] = [Prefix(r.start, least, (), r.cell) for r in rooting.roots(series, least)]
    if not series.rule.closed or (not series.walls and not least):
        sites = range(len(series.lattice.sites)) if series.start is None else (series.start,)
        starts = [Prefix(site, False, ()) for site in sites]
    for start in starts:
        sums.add(twin.whole(series, start, top))
    return METHOD.assemble(series, sums) if series.rule.closed else sums


def by_kernel(series: Series, top: int) -> Tally:
    """The same table as the method counts it."""
    return METHOD.assemble(series, whole(series, top))


@st.composite
def refined_series(
    draw: st.DrawFn, lattices: st.SearchStrategy[Lattice], objects: tuple[str, ...] = tuple(OBJECTS)
) -> Series:
    """An object on a lattice with up to two statistics, moments, region and end, as far as they make sense."""
    lattice = draw(lattices)
    rule = OBJECTS[draw(st.sampled_from(objects))]
    options: dict[str, Any] = {"start": draw(st.sampled_from([None, *(site.name for site in lattice.sites)]))}
    regions = ["half", "slab:1", "slab:2", *["quarter", "wedge", "orthant"] * (lattice.dimension > 1)]
    options["region_name"] = draw(st.sampled_from([None, None, *regions]))
    options["by"] = draw(st.lists(statistics_of(lattice), max_size=2, unique=True))
    options["moment"] = draw(st.lists(st.sampled_from(tuple(moments.MEANINGS)), max_size=3, unique=True))
    options["end"] = draw(st.sampled_from([None, None, place(lattice, draw)]))
    return sensible(lattice, rule.name, options)


def statistics_of(lattice: Lattice) -> st.SearchStrategy[str]:
    direction = st.lists(st.integers(-1, 1), min_size=lattice.dimension, max_size=lattice.dimension)
    directed = st.builds(
        lambda name, d: f"{name}:{','.join(map(str, d))}",
        st.sampled_from(("steps", "span")),
        direction.filter(any),
    )
    plain = [name for name in statistics.MEANINGS if name not in ("steps", "span")]
    return st.one_of(directed, st.sampled_from([*plain, "visits:any", "visits:2"]))


def place(lattice: Lattice, draw: st.DrawFn) -> str:
    cell = [draw(st.integers(-1, 1)) for _ in range(lattice.periods)]
    return f"{','.join(map(str, cell))}:{draw(st.sampled_from(lattice.sites)).name}"


def sensible(lattice: Lattice, kind: str, options: dict[str, Any]) -> Series:
    """The series with those options, less what is refused."""
    options = {name: value for name, value in options.items() if value}
    statistic_list, moment_list = options.pop("by", []), options.pop("moment", [])
    series = _try(lattice, kind, options)
    for dropped in ("end", "start", "region_name"):
        if series is None:
            options.pop(dropped, None)
            series = _try(lattice, kind, options)
    if series is None:
        options["start"] = lattice.sites[0].name
        series = _try(lattice, kind, options)
    assume(series is not None)
    for name, texts in (("by", statistic_list), ("moment", moment_list)):
        for text in texts:
            more = {**options, name: [*options.get(name, []), text]}
            for start in (options.get("start"), lattice.sites[0].name):
                found = _try(lattice, kind, {**more, "start": start})
                if found is not None:
                    series, options = found, {**more, "start": start}
                    break
    assert series is not None
    assume(METHOD.refuses(series) is None)
    return series


def _try(lattice: Lattice, kind: str, options: dict[str, Any]) -> Series | None:
    try:
        return define(lattice, kind, **options)
    except SeriesError as error:
        assert "\n" not in str(error)
        return None
