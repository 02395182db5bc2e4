"""The tables that `refined_kernel` reads, made once a reach."""

from __future__ import annotations

import threading
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Any, NamedTuple

import numpy as np

from fleetcount.lattice.model import Lattice
from fleetcount.lattice.patch import Patch, build, distance_to
from fleetcount.methods import compiled
from fleetcount.methods.direct import refined_kernel as rk
from fleetcount.methods.direct.allowed import allowed_sites
from fleetcount.methods.direct.ground import width
from fleetcount.methods.direct.keys import Prefix
from fleetcount.methods.direct.measures import SORTS, Measure, layers, measure
from fleetcount.methods.direct.refined_stack import RefinedMarks, RefinedStack
from fleetcount.methods.direct.symmetry_states import SymmetryStates, states_of
from fleetcount.series.definition import Series
from fleetcount.series.forms import same_direction
from fleetcount.series.region import moved

Array = np.ndarray[Any, np.dtype[Any]]

_building = threading.Lock()
_AVOIDS = {"sites": rk.SITES, "edges": rk.EDGES, "neighbours": rk.NEIGHBOURS}
_ENDS = {"anywhere": rk.ANYWHERE, "trapped": rk.TRAPPED, "on top": rk.ON_TOP}


class Tables(NamedTuple):
    """What a kernel reads, in the order of its arguments; see `refined_kernel.refined_kernel`."""

    following: Array
    kind: Array
    images: Array
    onward: Array
    beside: Array
    edge: Array
    reverse: Array
    home: Array
    gain: Array
    value: Array
    way: Array
    height: Array
    open_arms: Array
    square: Array
    dual: Array
    place: Array
    stride: Array
    unclosed: Array


@dataclass(frozen=True)
class RefinedGround:
    """Read-only arrays shared by all searches of one series from one root, up to one reach.

    Attributes:
        tables: what the kernel reads.
        edges: number of edges where they are marked, else 0.
        farthest: greatest squared distance from the start, in units of 1 over (scale squared times metric_scale).
    """

    series: Series
    root: Prefix
    top: int
    patch: Patch
    states: SymmetryStates
    measures: tuple[Measure, ...]
    tables: Tables
    edges: int
    farthest: int
    run: Callable[..., bool]

    @property
    def arms(self) -> int:
        return int(self.patch.next.shape[1])

    @property
    def shape(self) -> tuple[int, int, int, int]:
        """Of the sums: lengths, values of the two statistics, columns."""
        first, second = ([m.size for m in self.measures] + [1, 1])[:2]
        traits = traits_of(self.series)
        return (
            self.top + 2,
            first,
            second,
            1 + traits.distances + traits.heights + traits.monomers + traits.pairs,
        )


def refined_ground(series: Series, root: Prefix, top: int) -> RefinedGround:
    """The ground of a series from a root: a prefix with no arm but the first, where that one matters."""
    with _building:
        return _ground(series, root, top)


def homeward(series: Series, prefix: Prefix, top: int) -> list[set[int]]:
    """Before each step of a prefix and after its last: the arms from which the goal can still be reached in time."""
    found, here = [], rk.START
    patch = refined_ground(series, _home_root(prefix, prefix.arms[:1]), top).patch
    for depth in range(len(prefix.arms) + 1):
        near = set()
        for arm, there in enumerate(patch.next[here].tolist()):
            first = prefix.arms[:1] if depth else (arm,)
            home = refined_ground(series, _home_root(prefix, first), top).tables.home
            if there and depth + 1 + int(home[there]) <= top:
                near.add(arm)
        found.append(near)
        if depth < len(prefix.arms):
            here = int(patch.next[here, prefix.arms[depth]])
    return found


def _home_root(prefix: Prefix, first: tuple[int, ...]) -> Prefix:
    return prefix._replace(arms=first if prefix.least else ())


def traits_of(series: Series) -> rk.Traits:
    """What the kernel of a series is compiled for."""
    lattice, rule, names = series.lattice, series.rule, set(series.moments)
    sorts = tuple(SORTS[s.name] for s in series.statistics)
    beside = rk.CONTACTS in sorts or rule.avoids == "neighbours"
    return rk.Traits(
        arms=width(lattice),
        adjacent=width(lattice) * (1 + lattice.one_way) if beside else 0,
        avoids=_AVOIDS[rule.avoids],
        ends=rk.AT_TARGET if series.end is not None else _ENDS[rule.ends],
        closed=int(rule.closed),
        one_way=int(lattice.one_way),
        sorts=sorts,
        distances=int(bool({"end2", "along2"} & names)),
        heights=int(bool({"height2", "along2"} & names)),
        monomers=int("monomer2" in names),
        pairs=int("gyration2" in names),
        dimension=lattice.dimension if "gyration2" in names else 0,
    )


@lru_cache(maxsize=16)
def _ground(series: Series, root: Prefix, top: int) -> RefinedGround:
    lattice, rule, traits = series.lattice, series.rule, traits_of(series)
    radius = top // 2 if rule.closed and not lattice.one_way else top
    patch = build(lattice, root.start, max(radius, 1), allowed_sites(series, root), width=traits.arms)
    states = states_of(series, root.start, root.least)
    positions = _positions(lattice, patch)
    walls = moved(series.walls, root.cell) if root.cell else series.walls
    measures = tuple(measure(series, s, patch, positions, walls, top) for s in series.statistics)
    edge, reverse, edges = _edges(lattice, patch) if rule.avoids == "edges" else (_nothing(2), _nothing(2), 0)
    dual = positions @ np.array(lattice.gram, dtype=np.int64)
    square = (positions * dual).sum(axis=1)
    tables = Tables(
        patch.next.view(np.uint32),
        patch.kind.view(np.uint16),
        *states.tables(traits.arms),
        _beside(lattice, patch, traits.adjacent),
        edge,
        reverse,
        _home(series, patch, root),
        _stacked([m.gain for m in measures], patch.next.shape),
        _stacked([m.value for m in measures], (patch.sites + 1,)),
        _ways(lattice, traits.arms),
        layers(lattice, lattice.up, patch) if series.uses_up else np.zeros(patch.sites + 1, dtype=np.int32),
        patch.free.astype(np.int32),
        _squares(series, patch, square),
        np.ascontiguousarray(dual),
        np.ascontiguousarray(positions),
        _strides(lattice, traits.arms).reshape(-1),
        np.array([m.unclosed for m in measures] + [0] * (2 - len(measures)), dtype=np.int32),
    )
    return RefinedGround(
        series, root, top, patch, states, measures, tables, edges, int(square.max()), load(series)
    )


def _nothing(dimensions: int) -> Array:
    return np.zeros((1,) * dimensions, dtype=np.uint32)


def _positions(lattice: Lattice, patch: Patch) -> Array:
    """Positions relative to the start in units of 1/scale, int64 [sites + 1, dimension]; zero for the wall."""
    at = np.array(lattice.positions, dtype=np.int64)
    found: Array = at[patch.kind] - at[patch.start]
    found[:, : lattice.periods] += lattice.scale * patch.cells.astype(np.int64)
    found[0] = 0
    return found


def _beside(lattice: Lattice, patch: Patch, columns: int) -> Array:
    """The sites that an arc joins each site to, in either sense, each once; zeros elsewhere."""
    if not columns:
        return _nothing(2)
    if not lattice.one_way:  # the same array as `next`: less memory to hold near
        return patch.next.view(np.uint32)
    both = np.sort(np.concatenate([patch.next, patch.previous], axis=1), axis=1)[:, ::-1]
    repeated = both == np.pad(both, ((0, 0), (1, 0)))[:, :-1]
    both = np.sort(np.where(repeated, 0, both), axis=1)[:, ::-1]
    return np.ascontiguousarray(both[:, :columns]).astype(np.uint32)


def _edges(lattice: Lattice, patch: Patch) -> tuple[Array, Array, int]:
    """Numbers from 1 for the edges out of each site, and for those that lead back; 0 for none.

    On one-way lattices every arc is an edge of its own; elsewhere both senses have one number.
    """
    following = patch.next.astype(np.int64)
    here = np.broadcast_to(np.arange(patch.sites + 1)[:, None], following.shape)
    size = patch.sites + 1
    there_and_back = (here * size + following, following * size + here)
    if not lattice.one_way:
        smaller = np.minimum(*there_and_back)
        there_and_back = (smaller, smaller)
    names = np.unique(there_and_back[0][following > 0])
    if not len(names):  # the start alone: nothing leads anywhere
        return _nothing(2), _nothing(2), 0
    numbers = []
    for name in there_and_back:
        number = np.minimum(np.searchsorted(names, name), len(names) - 1)
        known = (following > 0) & (names[number] == name)
        numbers.append(np.where(known, number + 1, 0).astype(np.uint32))
    return numbers[0], numbers[1], len(names)


def _home(series: Series, patch: Patch, root: Prefix) -> Array:
    """Least number of steps to the goal, int32 [sites + 1]: home for closed objects, else the given end."""
    if series.rule.closed:
        entries = patch.previous[rk.START] if series.lattice.one_way else patch.next[rk.START]
        if (
            root.least and not series.lattice.one_way
        ):  # in one sense only: home by a greater arm than it left by
            entries = patch.next[rk.START, root.arms[0] + 1 :] if root.arms else entries
        home = distance_to(patch, [int(x) for x in entries]) + 1
    elif series.end is not None:
        site, cell = series.end
        goal = (patch.kind == site) & (patch.cells == np.array(cell)).all(axis=1)
        goal[0] = False
        home = distance_to(patch, goal)
    else:
        return np.zeros(1, dtype=np.int32)
    home[0] = rk.FAR
    return np.minimum(home, rk.FAR).astype(np.int32)


def _stacked(tables: Sequence[Array | None], shape: tuple[int, ...]) -> Array:
    """Up to two tables on top of each other, of shape (2, *shape); tiny where none is there."""
    if not any(table is not None for table in tables):
        return np.zeros((2, *(1 for _ in shape)), dtype=np.int32)
    stacked = np.zeros((2, *shape), dtype=np.int32)
    for place, table in enumerate(tables):
        if table is not None:
            stacked[place] = table
    return stacked


def _ways(lattice: Lattice, arms: int) -> Array:
    """A number for the direction of each arm of each kind of site, int32 [kinds, arms]."""
    known: list[tuple[int, ...]] = []
    ways = np.zeros((len(lattice.sites), arms), dtype=np.int32)
    for kind, out in enumerate(lattice.arms):
        for arm, arc in enumerate(out):
            step = lattice.step(arc)
            number = next((i for i, other in enumerate(known) if same_direction(step, other)), len(known))
            if number == len(known):
                known.append(step)
            ways[kind, arm] = number
    return ways


def _strides(lattice: Lattice, arms: int) -> Array:
    """What each arm of each kind of site adds to a position, int64 [kinds, arms, dimension]."""
    strides = np.zeros((len(lattice.sites), arms, lattice.dimension), dtype=np.int64)
    for kind, out in enumerate(lattice.arms):
        for arm, arc in enumerate(out):
            strides[kind, arm] = lattice.step(arc)
    return strides


def _squares(series: Series, patch: Patch, square: Array) -> Array:
    """Squared distances from the start, and squared heights where they are asked for: int64 [2, sites + 1]."""
    height = np.zeros(patch.sites + 1, dtype=np.int64)
    if {"height2", "along2"} & set(series.moments):
        height = layers(series.lattice, series.lattice.up, patch).astype(np.int64)
        height -= height[rk.START]
    return np.ascontiguousarray(np.stack([square, height**2]))


def load(series: Series) -> Callable[..., bool]:
    """The kernel of a series, compiled or from the cache."""
    traits = traits_of(series)

    def example(run: Callable[..., bool]) -> None:
        flat32, flat64 = np.zeros((1, 1), dtype=np.int32), np.zeros((2, 1), dtype=np.int64)
        line32 = np.zeros(1, dtype=np.int32)
        index, cube = np.zeros((1, 1), dtype=np.uint32), np.zeros((1, 1, 1), dtype=np.uint32)
        stacked = np.zeros((2, 1, 1), dtype=np.int32)
        symmetry = (np.ones((1, 1, 1), dtype=np.int32), cube)
        tables = (index, np.zeros(1, dtype=np.uint16), *symmetry, index, index, index, line32, stacked)
        sites = (np.zeros((2, 1), dtype=np.int32), flat32, line32, line32)
        positions = (flat64, flat64, flat64, np.zeros(1, dtype=np.int64), line32)
        stack, marks = RefinedStack.of(4, traits.dimension, (6, 1, 1, 4)), RefinedMarks.of(1, 1)
        run(*tables, *sites, *positions, *marks.arrays(), *stack.arrays(), 0)

    return compiled.kernel("direct", "refined", rk.refined_kernel, tuple(traits), example)
