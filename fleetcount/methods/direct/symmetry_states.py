"""Symmetry by factors: which steps stand for others, given the symmetries that keep the prefix so far.

A state is the subgroup that fixes every site of a prefix. From a state, the arms at the end of the prefix fall into
orbits; the least arm of each orbit stands for all of it, and the subgroup that keeps that step too is the next
state. State 0 is the trivial group. For walks on the square lattice this gives the full factor 8, on the cubic
lattice 48.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from functools import lru_cache
from typing import TYPE_CHECKING, Any

from fleetcount.lattice.model import Lattice
from fleetcount.lattice.symmetry import Symmetry, arm_map
from fleetcount.methods.direct.kept import kept_symmetries
from fleetcount.series.definition import Series

if TYPE_CHECKING:
    import numpy as np

Subgroup = frozenset[int]


@dataclass
class SymmetryStates:
    """States reached from a start site, numbered in the order of a breadth-first search over arms.

    Attributes:
        first: the state of the empty prefix.
        images: `images[state][kind][arm]`, the size of the arm's orbit, 0 where another arm stands for it.
        onward: `onward[state][kind][arm]`, the state after the step.
        orders: the order of each state's subgroup.
    """

    first: int = 0
    images: list[list[list[int]]] = field(default_factory=list)
    onward: list[list[list[int]]] = field(default_factory=list)
    orders: list[int] = field(default_factory=list)

    def tables(self, columns: int) -> tuple[np.ndarray[Any, Any], np.ndarray[Any, Any]]:
        """`images` as int32 and `onward` as uint32 [states, kinds, columns], for kernels."""
        import numpy as np

        shape = (len(self.orders), len(self.images[0]), columns)
        images, onward = np.ones(shape, dtype=np.int32), np.zeros(shape, dtype=np.uint32)
        for table, known in ((images, self.images), (onward, self.onward)):
            table[:, :, : len(known[0][0])] = known
        return images, onward


@lru_cache(maxsize=64)
def states_of(series: Series, start: int, least: bool) -> SymmetryStates:
    """The states of a series' prefixes from a start site; nobody may change them.

    Args:
        least: all other sites are greater than the start in a total order that translations keep. No symmetry but
            the identity keeps that order.
    """
    if least:
        return without_symmetry(series.lattice)
    return symmetry_states(series.lattice, start, kept_symmetries(series, start))


def without_symmetry(lattice: Lattice) -> SymmetryStates:
    """Every arm stands for itself."""
    states = SymmetryStates()
    _append(states, lattice, 1)
    return states


def symmetry_states(lattice: Lattice, start: int, group: Sequence[Symmetry]) -> SymmetryStates:
    """The states of prefixes that begin at site `start` of a cell.

    Args:
        group: the symmetries to be used, which fix the start; the identity first.
    """
    kinds = range(len(lattice.sites))
    # images of arms, only where the element maps the kind of site to itself: it does wherever it fixes the site
    maps = [{kind: arm_map(lattice, g, kind) for kind in kinds if g.images[kind] == kind} for g in group]
    states = without_symmetry(lattice)
    numbers: dict[Subgroup, int] = {frozenset({0}): 0}  # the identity comes first
    seen: set[tuple[Subgroup, int]] = set()
    whole = frozenset(range(len(group)))
    todo: list[tuple[Subgroup, int]] = [(whole, start)]
    states.first = _number(whole, numbers, states, lattice)
    while todo:
        subgroup, kind = todo.pop(0)
        state = _number(subgroup, numbers, states, lattice)
        if state == 0 or (subgroup, kind) in seen:
            continue
        seen.add((subgroup, kind))
        for arm, arc in enumerate(lattice.arms[kind]):
            orbit = {maps[g][kind][arm] for g in subgroup}
            states.images[state][kind][arm] = len(orbit) if arm == min(orbit) else 0
            if arm == min(orbit):
                keeping = frozenset(g for g in subgroup if maps[g][kind][arm] == arm)
                states.onward[state][kind][arm] = _number(keeping, numbers, states, lattice)
                todo.append((keeping, arc.target))
    return states


def _number(
    subgroup: Subgroup, numbers: dict[Subgroup, int], states: SymmetryStates, lattice: Lattice
) -> int:
    if subgroup not in numbers:
        numbers[subgroup] = len(states.orders)
        _append(states, lattice, len(subgroup))
    return numbers[subgroup]


def _append(states: SymmetryStates, lattice: Lattice, order: int) -> None:
    width = max(len(arms) for arms in lattice.arms)
    states.images.append([[1] * width for _ in lattice.sites])
    states.onward.append([[0] * width for _ in lattice.sites])
    states.orders.append(order)
