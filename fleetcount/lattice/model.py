"""The lattice as a value: sites in a cell, arcs between cells, an exact metric."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from fractions import Fraction
from functools import cached_property

Cell = tuple[int, ...]
"""A translation, in periods: `Lattice.periods` integers."""


@dataclass(frozen=True)
class Site:
    """One site of the cell: its name in the file and its fractional coordinates."""

    name: str
    at: tuple[Fraction, ...]


@dataclass(frozen=True, order=True)
class Arc:
    """One way from site `source` of a cell to site `target` of the cell `cell` further on."""

    source: int
    target: int
    cell: Cell


@dataclass(frozen=True)
class Lattice:
    """A periodic graph with an exact metric, in canonical form.

    Sites are sorted by position, arcs by (source, target, cell); an edge of the file is two arcs here.
    Built only by `fleetcount.lattice.definition`, which has checked it.

    Attributes:
        dimension: number of coordinates of a position.
        periods: the first `periods` coordinate axes are periods; the others are not.
        metric: Gram matrix of the coordinate axes, `dimension` x `dimension`.
        metric_is: "exact", or "drawing" where lengths in the drawing mean nothing.
        up: integer form on cell coordinates, the height of a site; `dimension` integers.
        one_way: the file has at least one one-way arc.
    """

    name: str
    title: str
    dimension: int
    periods: int
    metric: tuple[tuple[Fraction, ...], ...]
    metric_is: str
    up: tuple[int, ...]
    sites: tuple[Site, ...]
    arcs: tuple[Arc, ...]
    one_way: bool
    source: str = field(default="", compare=False)
    warnings: tuple[str, ...] = field(default=(), compare=False)

    @cached_property
    def _hash(self) -> int:
        # No text in it: the hash of a string changes from process to process, and this one is pickled.
        return hash((self.dimension, self.periods, self.metric, self.arcs))

    def __hash__(self) -> int:
        return self._hash

    @cached_property
    def scale(self) -> int:
        """Least common denominator of the positions."""
        return math.lcm(*(x.denominator for site in self.sites for x in site.at))

    @cached_property
    def metric_scale(self) -> int:
        """Least common denominator of the metric."""
        return math.lcm(*(x.denominator for row in self.metric for x in row))

    @cached_property
    def positions(self) -> tuple[tuple[int, ...], ...]:
        """Positions of the sites of cell 0 in units of 1/`scale`."""
        return tuple(tuple(int(x * self.scale) for x in site.at) for site in self.sites)

    @cached_property
    def gram(self) -> tuple[tuple[int, ...], ...]:
        """The metric in units of 1/`metric_scale`."""
        return tuple(tuple(int(x * self.metric_scale) for x in row) for row in self.metric)

    def step(self, arc: Arc) -> tuple[int, ...]:
        """The vector of an arc, `dimension` coordinates in units of 1/`scale`."""
        cell = arc.cell + (0,) * (self.dimension - self.periods)
        here, there = self.positions[arc.source], self.positions[arc.target]
        return tuple(self.scale * c + b - a for a, b, c in zip(here, there, cell, strict=True))

    @cached_property
    def arms(self) -> tuple[tuple[Arc, ...], ...]:
        """The arcs out of each site of the cell; their places are the arm numbers of unit keys."""
        out: list[list[Arc]] = [[] for _ in self.sites]
        for arc in self.arcs:
            out[arc.source].append(arc)
        return tuple(map(tuple, out))

    @cached_property
    def arms_in(self) -> tuple[tuple[Arc, ...], ...]:
        """The arcs into each site of the cell."""
        into: list[list[Arc]] = [[] for _ in self.sites]
        for arc in self.arcs:
            into[arc.target].append(arc)
        return tuple(map(tuple, into))

    def canonical(self) -> dict[str, object]:
        """What of the lattice enters the digest of a series: no names, titles or comments."""
        return {
            "dimension": self.dimension,
            "periods": self.periods,
            "metric": [[str(x) for x in row] for row in self.metric],
            "positions": [[str(x) for x in site.at] for site in self.sites],
            "one_way": self.one_way,
            "arcs": [[a.source, a.target, list(a.cell)] for a in self.arcs],
        }
