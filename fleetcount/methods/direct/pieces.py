"""Splitting a unit without counting it: its children, and what is left when given subtrees are taken out."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from fleetcount.errors import InputError
from fleetcount.methods.direct import twin
from fleetcount.methods.direct.keys import Prefix
from fleetcount.methods.direct.symmetry_states import SymmetryStates
from fleetcount.series.definition import Series


@dataclass(frozen=True)
class Piece:
    """A prefix to be searched whole, and its images under the symmetries that keep the unit's own prefix."""

    prefix: Prefix
    factor: int


def possible(series: Series, prefix: Prefix, top: int) -> list[list[int]]:
    """Before each step of a prefix and after its last: the arms by which the object can go on.

    Raises:
        InputError: no object begins with the prefix.
    """
    lattice = series.lattice
    path = twin.sites_along(lattice, prefix)
    if path is None or not twin.begins(series, prefix, path):
        raise InputError("a prefix that the object cannot begin with", where=prefix.key())
    if series.rule.closed and series.plain:
        from fleetcount.methods.direct.ground import ground  # compiled code is imported late

        return ground(series, prefix.root(), top).returning(prefix.arms)
    found = []
    aims = series.rule.closed or series.end is not None
    if aims:
        from fleetcount.methods.direct.refined_ground import homeward  # compiled code is imported late

        near = homeward(series, prefix, top)
    for depth, here in enumerate(path):
        before = path[: depth + 1]
        arms = sorted(near[depth]) if aims else list(range(len(lattice.arms[here[0]])))
        found.append(
            [arm for arm in arms if twin.begins(series, prefix, [*before, twin.step(lattice, here, arm)])]
        )
    return found


def children(series: Series, states: SymmetryStates, prefix: Prefix, top: int) -> Iterator[Piece]:
    """The children of a prefix, whatever their length, each standing for `factor` of them."""
    ways = possible(series, prefix, top)[-1]
    state, kind = state_after(series, states, prefix)
    for arm in ways:
        factor = states.images[state][kind][arm]
        if factor:
            yield Piece(prefix.child(arm), factor)


def share(series: Series, states: SymmetryStates, prefix: Prefix, top: int) -> float:
    """The share of a start's nodes that is expected below a prefix.

    Every step that was possible takes an equal part of what lies below (D. E. Knuth, Math. Comp. 29 (1975) 121), so
    the shares of a prefix's children, each times its factor, add up to its own.
    """
    ways = possible(series, prefix, top)
    if any(arm not in arms for arm, arms in zip(prefix.arms, ways, strict=False)):
        return 0.0  # it cannot come home in time
    order = states.orders[state_after(series, states, prefix)[0]]
    return states.orders[states.first] / order / math.prod(map(len, ways[:-1]))


def state_after(series: Series, states: SymmetryStates, prefix: Prefix) -> tuple[int, int]:
    """The symmetry state after a prefix, and the kind of its last site."""
    state, kind = states.first, prefix.start
    for arm in prefix.arms:
        if states.images[state][kind][arm] == 0:
            raise InputError("a prefix that another one stands for", where=prefix.key())
        state, kind = states.onward[state][kind][arm], series.lattice.arms[kind][arm].target
    return state, kind


def taken_out(
    series: Series, states: SymmetryStates, prefix: Prefix, top: int, without: Sequence[Prefix]
) -> tuple[list[Piece], list[Piece]]:
    """What remains of a unit without some subtrees: pieces to search whole, and prefixes that were passed through."""
    if not without:
        return [Piece(prefix, 1)], []
    for cut in without:
        if cut[:2] != prefix[:2]:
            raise _stranger(cut)
    cuts = {cut.arms for cut in without}
    passed_through = {arms[:i] for arms in cuts for i in range(len(prefix.arms), len(arms))}
    whole, passed, todo = [], [], [Piece(prefix, 1)]
    while todo:
        piece = todo.pop()
        if piece.prefix.arms in cuts:
            cuts.discard(piece.prefix.arms)
        elif piece.prefix.arms in passed_through:
            passed.append(piece)
            for child in children(series, states, piece.prefix, top):
                todo.append(Piece(child.prefix, piece.factor * child.factor))
        else:
            whole.append(piece)
    if cuts:
        raise _stranger(prefix._replace(arms=min(cuts)))
    return whole, passed


def _stranger(cut: Prefix) -> InputError:
    return InputError("a subtree to leave out is not part of the unit", where=cut.key())
