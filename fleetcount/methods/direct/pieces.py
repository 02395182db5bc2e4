"""Splitting a unit without counting it: its children, and what is left when given subtrees are taken out."""

from __future__ import annotations

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


def children(series: Series, states: SymmetryStates, prefix: Prefix) -> Iterator[Piece]:
    """The children of a prefix, whatever their length, each standing for `factor` of them."""
    lattice = series.lattice
    path = twin.sites_along(lattice, prefix)
    if path is None:
        raise InputError("no such prefix on this lattice", where=prefix.key())
    state = state_after(states, prefix, [site for site, _ in path])
    kind = path[-1][0]
    for arm in range(len(lattice.arms[kind])):
        factor = states.images[state][kind][arm]
        if factor and twin.allowed(lattice, prefix, [*path, twin.step(lattice, path[-1], arm)]):
            yield Piece(prefix.child(arm), factor)


def state_after(states: SymmetryStates, prefix: Prefix, kinds: Sequence[int]) -> int:
    """The symmetry state of a prefix whose sites are of these kinds."""
    state = states.first
    for arm, kind in zip(prefix.arms, kinds, strict=False):
        if states.images[state][kind][arm] == 0:
            raise InputError("a prefix that another one stands for", where=prefix.key())
        state = states.onward[state][kind][arm]
    return state


def taken_out(
    series: Series, states: SymmetryStates, prefix: Prefix, without: Sequence[Prefix]
) -> tuple[list[Piece], list[Piece]]:
    """What remains of a unit without some subtrees: pieces to search whole, and prefixes that were passed through."""
    if not without:
        return [Piece(prefix, 1)], []
    cuts = {cut.arms for cut in without}
    passed_through = {arms[:i] for arms in cuts for i in range(len(prefix.arms), len(arms))}
    whole, passed, todo = [], [], [Piece(prefix, 1)]
    while todo:
        piece = todo.pop()
        if piece.prefix.arms in cuts:
            cuts.discard(piece.prefix.arms)
        elif piece.prefix.arms in passed_through:
            passed.append(piece)
            todo += [Piece(c.prefix, piece.factor * c.factor) for c in children(series, states, piece.prefix)]
        else:
            whole.append(piece)
    if cuts:
        arms = min(cuts)
        raise InputError(
            "a subtree to leave out is not part of the unit", where=prefix._replace(arms=arms).key()
        )
    return whole, passed
