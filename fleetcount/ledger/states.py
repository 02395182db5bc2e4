"""The states of a unit and the moves between them: one table, which every store obeys.

waiting
    Nobody is counting the unit. Where every unit begins: a root when its reading is opened, a child when the
    tally that left it over is accepted. Units are handed out from here, the largest expected work first.
out
    The unit has been handed out under a token and is being counted, or lost on the way: the ledger cannot
    know. Only an answer that carries this very token settles it. When the coordinator hands it back, or a new
    coordinator takes the series over, it waits again.
counted
    A tally was accepted that left nothing over: the whole subtree has been seen. Final.
divided
    A tally was accepted that left children over: what it explored is final, the rest are units of their own.
    Final.
barred
    The unit has failed as often as `fleetcount.ledger.states.bars` allows. It is shown and its terms are not
    final; it is handed out again only after someone asked for it.

             hand out            count, divide
    waiting ---------->   out  ------------------>  counted, divided
       ^  ^--hand back-----|
       |                   | bar
       '----readmit----- barred
"""

from __future__ import annotations

from collections.abc import Sequence
from enum import StrEnum
from typing import NamedTuple

from fleetcount.errors import InternalError


class State(StrEnum):
    """Where a unit stands."""

    WAITING = "waiting"
    OUT = "out"
    COUNTED = "counted"
    DIVIDED = "divided"
    BARRED = "barred"


class Move(StrEnum):
    """What can happen to a unit."""

    HAND_OUT = "hand out"
    HAND_BACK = "hand back"
    COUNT = "count"
    DIVIDE = "divide"
    BAR = "bar"
    READMIT = "readmit"


class Step(NamedTuple):
    """The state before a move and the one after."""

    before: State
    after: State


MOVES: dict[Move, Step] = {
    Move.HAND_OUT: Step(State.WAITING, State.OUT),
    Move.HAND_BACK: Step(State.OUT, State.WAITING),
    Move.COUNT: Step(State.OUT, State.COUNTED),
    Move.DIVIDE: Step(State.OUT, State.DIVIDED),
    Move.BAR: Step(State.OUT, State.BARRED),
    Move.READMIT: Step(State.BARRED, State.WAITING),
}
"""The transition table."""

SETTLED = (State.COUNTED, State.DIVIDED)
"""The states of a unit that has a tally."""

OPEN = (State.WAITING, State.OUT, State.BARRED)
"""The states of a unit that has none."""

FAILURES = 3
"""Failures after which a unit may be barred, and the number of machines that must have seen one."""


def after(state: State, move: Move) -> State:
    """The state that a move leads to."""
    step = MOVES[move]
    if state is not step.before:
        raise InternalError(f"a unit that is {state} cannot be moved by '{move}'")
    return step.after


def settling(children: int) -> Move:
    """The move that accepting a tally with so many children makes."""
    return Move.DIVIDE if children else Move.COUNT


def bars(failed_on: Sequence[str], machines: int) -> bool:
    """Whether a unit that failed on these machines, one entry a failure, is barred.

    Three failures on three machines; where only one or two machines are counting, three failures that each
    of them had a part in.
    """
    return len(failed_on) >= FAILURES and len(set(failed_on)) >= min(FAILURES, max(1, machines))
