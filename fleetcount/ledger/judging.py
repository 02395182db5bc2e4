"""What is to be thought of an answer: the rules that every store applies, as functions of values alone."""

from __future__ import annotations

import math
from collections.abc import Sequence

from fleetcount.errors import TrustError
from fleetcount.ledger import record
from fleetcount.ledger.record import OpeningRecord, TallyRecord
from fleetcount.ledger.states import SETTLED, State
from fleetcount.ledger.store import Answer, ReadingRow, UnitRow, Verdict
from fleetcount.series import canonical

MOST_NODES = 2**63 - 1
"""The ledger keeps the nodes of one unit in 64 bits."""


def read(answer: Answer) -> TallyRecord:
    """The record of an answer whose checksum is that of its text; TrustError if it is none."""
    if record.checksum(answer.text) != answer.checksum:
        raise TrustError("the checksum of the answer is not that of its text")
    tally = TallyRecord.parse(answer.text)
    if tally.text() != answer.text:
        raise TrustError("the text of the answer is not canonical")
    _check_characters(answer.text)
    if not 0 <= tally.nodes <= MOST_NODES:
        raise TrustError(f"{tally.nodes} is no number of nodes")
    check_expected(answer.expected, len(tally.children))
    if not (math.isfinite(answer.seconds) and answer.seconds >= 0):
        raise TrustError(f"{answer.seconds} is no core time")
    return tally


def check_definition(digest: str, text: str) -> None:
    """A series is known by the digest of its canonical definition; TrustError if this is not it."""
    if canonical.digest(text) != digest:
        raise TrustError("the digest is not that of the definition", where=f"series {digest[:12]}")


def read_opening(text: str, series: str, expected: Sequence[float]) -> OpeningRecord:
    """The record of an opening of this series; TrustError if it is none."""
    opening = OpeningRecord.parse(text)
    if opening.text() != text:
        raise TrustError("the text of the opening is not canonical")
    _check_characters(text)
    if opening.series != series:
        raise TrustError(f"a reading of series {opening.series[:12]} is no part of {series[:12]}")
    if opening.width < 1:
        raise TrustError("a reading has at least one sum a row")
    check_expected(expected, len(opening.roots))
    return opening


def opened_row(opening: OpeningRecord) -> ReadingRow:
    """The reading that an opening opens."""
    return ReadingRow(
        series=opening.series,
        reading=opening.reading,
        purpose=opening.purpose,
        method=opening.method,
        method_version=opening.method_version,
        lengths=opening.lengths,
        width=opening.width,
        opened=opening.opened,
        finished=None,
    )


def check_expected(expected: Sequence[float], number: int) -> None:
    """Expected work: one finite number that is not negative for each of `number` units."""
    if len(expected) != number:
        raise TrustError(f"{number} units, but expected work for {len(expected)}")
    if not all(math.isfinite(nodes) and nodes >= 0 for nodes in expected):
        raise TrustError("expected work that is negative or no number")


def check_fit(tally: TallyRecord, reading: ReadingRow, factor: int) -> None:
    """A tally must be one of its unit, known by its reading and factor; TrustError if not."""
    wanted = {
        "series": reading.series,
        "method": reading.method,
        "method_version": reading.method_version,
        "lengths": reading.lengths,
        "factor": factor,
    }
    for name, value in wanted.items():
        if getattr(tally, name) != value:
            raise TrustError(f"its {name} is {getattr(tally, name)}, not {value}", where=unit_name(tally))
    if tally.rows.width != reading.width:
        raise TrustError(f"it has {tally.rows.width} sums a row, not {reading.width}", where=unit_name(tally))


def check_new(tally: TallyRecord, known: Sequence[str]) -> None:
    """The children of a tally must be new; TrustError names those that are `known` already."""
    if known:
        raise TrustError(f"its child {known[0]} is a unit already", where=unit_name(tally))


def contradicts(stored: TallyRecord, other: TallyRecord) -> bool:
    """Whether two tallies of one unit cannot both be right.

    whole = explored + sum over children of factor * whole(child), so tallies that left different children
    say nothing about each other; where the children are the same, factors and explored parts must be.
    """
    if [key for key, _ in stored.children] != [key for key, _ in other.children]:
        return False
    return stored.children != other.children or stored.rows != other.rows


def verdict(
    state: State, token: str | None, answered: str, stored: TallyRecord | None, other: TallyRecord
) -> Verdict:
    """The verdict on a tally that fits its unit.

    Args:
        state, token: the unit's.
        answered: token of the answer.
        stored: the tally that the unit has, if it is settled.
        other: the tally of the answer.
    """
    if state in SETTLED and stored is not None:
        return Verdict.DISPUTED if contradicts(stored, other) else Verdict.DOUBLE
    if state is not State.OUT or token != answered:
        return Verdict.LATE
    return Verdict.ACCEPTED


def unit_name(tally: TallyRecord) -> str:
    """How messages name a unit."""
    return name_unit(tally.key, tally.reading)


def name_unit(key: str, reading: str) -> str:
    """How messages name a unit."""
    return f"unit {key} of reading {reading[:12]}"


def refused_text(answer: Answer, error: TrustError) -> str:
    """The event of an answer that was refused."""
    return clean(f"answer under token {answer.token[:12]}: {error}")


def dispute_text(tally: TallyRecord) -> str:
    """The event of an answer that contradicts the tally its unit has."""
    return clean(
        f"{unit_name(tally)}: machine {tally.machine} has other numbers than the tally that is stored"
    )


def barred_text(unit: UnitRow) -> str:
    """The event of a unit that is barred."""
    return clean(f"{name_unit(unit.key, unit.reading)}: failed {unit.attempts} times; {unit.last_error}")


def clean(text: str) -> str:
    """A text that every database takes: no zero character, no half characters, not endless."""
    return text.replace("\0", "").encode("utf-8", "replace").decode("utf-8")[:4000]


def _check_characters(text: str) -> None:
    if "\\u0000" in text:
        raise TrustError("the text of a record holds a zero character")
