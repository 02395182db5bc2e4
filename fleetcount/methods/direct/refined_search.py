"""The search with the refined kernel: any object, statistics, moments."""

from __future__ import annotations

from fractions import Fraction

import numpy as np

from fleetcount.errors import InputError
from fleetcount.methods.direct import refined_kernel as rk
from fleetcount.methods.direct import twin
from fleetcount.methods.direct.ground import width
from fleetcount.methods.direct.kernels import DEPTH, FLOOR, NODES, TOP
from fleetcount.methods.direct.refined_ground import RefinedGround, traits_of
from fleetcount.methods.direct.refined_stack import RefinedMarks, RefinedStack
from fleetcount.methods.direct.slices import LEAST_SLICE, SLICE_NODES, Slices
from fleetcount.series import moments
from fleetcount.series.definition import Series
from fleetcount.series.tally import Place, Tally


def bound(ground: RefinedGround) -> int:
    """The most nodes of a slice on a ground; see `nodes_within`."""
    squared = max(ground.farthest, int(np.abs(ground.tables.square).max()))
    return nodes_within(ground.series, ground.top, squared, max(ground.states.orders))


def nodes_within(series: Series, top: int, squared: int, order: int) -> int:
    """The most nodes of a slice for which no 64-bit sum can overflow.

    An object adds to a sum at most its weight, which never exceeds the order of the group of symmetries that are
    used, times the greatest value of a moment: (n + 1)^2 times the greatest squared distance for gyration2, less for
    the others. A node adds one object for itself and, if objects close, at most one for each of its arms. Others may
    be taken on, arm by arm, when the limit is reached: at most arms * (arms + 1) nodes of one object each, which is
    less than what the arms of so many nodes are allowed for here.

    Args:
        squared: greatest squared distance or height from the start, in the units that the kernel sums.
        order: symmetries that are used.

    Raises:
        InputError: a slice would be too short to be useful.
    """
    greatest = (top + 2) ** 2 * max(squared, 1) if series.moments else 1
    most = (2**63 - 1) // (greatest * order * (width(series.lattice) + 1)) - 1
    if most < LEAST_SLICE:
        raise InputError(
            f"moments of length {top} are too large for 64-bit slices",
            where=f"lattice {series.lattice.name}",
            mend="ask for a smaller length",
        )
    return min(SLICE_NODES, most)


class RefinedSearch(Slices):
    """The subtree below a prefix of at least one arm, on a ground."""

    def __init__(self, ground: RefinedGround, arms: tuple[int, ...]) -> None:
        traits = traits_of(ground.series)
        self._own = RefinedStack.of(ground.top, traits.dimension, ground.shape)
        super().__init__(arms, self._own, bound(ground))
        self.ground = ground
        self._traits = traits
        self._marks = RefinedMarks.of(ground.patch.sites, ground.edges)
        self._sums: dict[tuple[int, int, int], tuple[int, ...]] = {}
        self._begin()
        self._walk_to_base()

    def tally(self) -> Tally:
        """The sums by place, with the moments that were asked for."""
        tally = Tally(self.ground.series.width)
        for (n, first, second), values in self._sums.items():
            place: Place = (n,)
            for measure, value in zip(self.ground.measures, (first, second), strict=False):
                place += measure.decoded(value)
            if n >= self.ground.series.rule.least_length(self.ground.series.lattice):
                tally.add(Tally(tally.width, {place: (values[0], *self._moments(values))}))
        return tally

    def _moments(self, values: tuple[int, ...]) -> list[int]:
        """The series' moments times its denominator, from the kernel's columns."""
        series, traits = self.ground.series, self._traits
        unit = Fraction(series.denominator, series.lattice.scale**2 * series.lattice.metric_scale)
        names = set(series.moments)
        columns = iter(values[1:])
        found: dict[str, Fraction] = {}
        if {"end2", "along2"} & names:
            found["end2"] = next(columns) * unit
        if {"height2", "along2"} & names:
            found["height2"] = next(columns) * series.denominator * moments.height_unit(series.lattice)
            found["along2"] = found.get("end2", Fraction(0)) - found["height2"]
        if traits.monomers:
            found["monomer2"] = next(columns) * unit
        if traits.pairs:
            found["gyration2"] = next(columns) * unit
        wanted = [found[name] for name in series.moments]
        assert all(x.denominator == 1 for x in wanted), "the denominator of a series makes its moments whole"
        return [int(x) for x in wanted]

    def _begin(self) -> None:
        """The start alone."""
        stack, marks, ground = self._own, self._marks, self.ground
        stack.path[0] = rk.START
        stack.state[0] = ground.states.first
        stack.weight[0] = 1
        stack.reg[TOP] = ground.top
        stack.last_way[0] = -1
        stack.crest[0] = ground.tables.height[rk.START]
        for place, measure in enumerate(ground.measures):
            stack.level[0, place] = measure.first
            if measure.value is not None:
                stack.most[0, place] = stack.least[0, place] = measure.value[rk.START]
        if self._traits.avoids == rk.EDGES:
            marks.seen[rk.START] = 1
        else:
            marks.near[rk.START] += rk.VISITED
        if self._traits.adjacent:
            beside = ground.tables.beside[rk.START]
            marks.near[beside[beside > 0]] += 1

    def _walk_to_base(self) -> None:
        """Step along the prefix with the kernel itself; what the last step counts belongs to this unit."""
        stack = self._own
        for depth, arm in enumerate(self.arms):
            stack.arm[depth] = arm
            stack.reg[FLOOR] = depth
            stack.weight[depth] = 1
            stack.sums[...] = 0
            self._call(1)
            whole = self._reg(DEPTH) == depth  # the kernel has counted all that is below, and marked nothing
            if (
                int(stack.arm[depth]) != arm + 1
                or self._reg(NODES) == 0
                or (self._reg(NODES) > 1 and not whole)
            ):
                if (
                    self._traits.closed or self._traits.ends == rk.AT_TARGET
                ):  # too far away to come there in time
                    stack.sums[...] = 0
                    self.done = True
                    return
                raise InputError(
                    "a prefix that the object cannot begin with", where=".".join(map(str, self.arms))
                )
            self.nodes, stack.reg[NODES] = self._reg(NODES), 0
            if whole:
                self.done = True
                if depth + 1 < self.base:
                    raise InputError("a prefix that leads nowhere", where=".".join(map(str, self.arms)))
        times = self._images(self.base - 1, self.arms[-1])
        self._collect()
        self._sums = {place: tuple(v // times for v in values) for place, values in self._sums.items()}
        stack.weight[self.base] = 1
        stack.reg[FLOOR] = self.base

    def _call(self, limit: int) -> bool:
        ground = self.ground
        return bool(ground.run(*ground.tables, *self._marks.arrays(), *self._own.arrays(), limit))

    def _collect(self) -> None:
        sums = self._own.sums
        for n, first, second in zip(*np.nonzero(sums[..., 0]), strict=True):
            place = (int(n), int(first), int(second))
            new = tuple(map(int, sums[place]))
            old = self._sums.get(place)
            self._sums[place] = new if old is None else tuple(map(int.__add__, old, new))
        sums[...] = 0

    def _columns(self) -> int:
        return self.ground.arms

    def _images(self, depth: int, arm: int) -> int:
        ground, stack = self.ground, self._own
        return int(
            ground.tables.images[int(stack.state[depth]), ground.patch.kind[int(stack.path[depth])], arm]
        )

    def _can_go(self, path: list[int], depth: int, arm: int) -> bool:
        ground = self.ground
        there = int(ground.patch.next[int(self._own.path[depth]), arm])
        if there == 0:
            return False
        if (self._traits.closed or self._traits.ends == rk.AT_TARGET) and depth + 1 + int(
            ground.tables.home[there]
        ) > ground.top:
            return False
        prefix = ground.root._replace(arms=(*path[:depth], arm))
        sites = twin.sites_along(ground.series.lattice, prefix)
        return sites is not None and twin.begins(ground.series, prefix, sites)
