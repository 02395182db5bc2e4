"""The table of moves."""

from __future__ import annotations

import itertools

import pytest

from fleetcount.errors import InternalError
from fleetcount.ledger import states
from fleetcount.ledger.states import MOVES, OPEN, SETTLED, Move, State


def test_only_the_moves_of_the_table() -> None:
    """A move leads where the table says, from the state it names, and from no other."""
    for state, move in itertools.product(State, Move):
        if MOVES[move].before is state:
            assert states.after(state, move) is MOVES[move].after
        else:
            with pytest.raises(InternalError):
                states.after(state, move)


def test_the_shape_of_the_table() -> None:
    """Every state can be reached from waiting; settled units never move again; all others can be settled."""
    reached, steps = {State.WAITING}, {(step.before, step.after) for step in MOVES.values()}
    for _ in State:
        reached |= {after for before, after in steps if before in reached}
    assert reached == set(State) == {*OPEN, *SETTLED}
    assert not any(before in SETTLED for before, _ in steps)
    assert {before for before, after in steps if after in SETTLED} == {State.OUT}


def test_every_state_has_its_paragraph() -> None:
    """The module's documentation tells what each state means."""
    for state in State:
        assert f"\n{state}\n    " in (states.__doc__ or "")
