"""Sets of lengths: the reach of a reading, as numbers and as text (`0-22`, `25,26`)."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

from fleetcount.errors import InputError


def format_lengths(lengths: Iterable[int]) -> str:
    """Shortest text of a set of lengths: `0-22`, `3,5-7`."""
    runs: list[list[int]] = []
    for n in sorted(set(lengths)):
        if runs and n == runs[-1][1] + 1:
            runs[-1][1] = n
        else:
            runs.append([n, n])
    return ",".join(str(a) if a == b else f"{a}-{b}" for a, b in runs)


def parse_lengths(text: str) -> Sequence[int]:
    """The lengths of such a text, sorted."""
    lengths: set[int] = set()
    try:
        for run in text.split(","):
            first, _, last = run.partition("-")
            lengths.update(range(int(first), int(last or first) + 1))
    except ValueError:
        raise InputError(
            "not a set of lengths", where=repr(text), mend="write for example 0-22 or 3,5-7"
        ) from None
    return tuple(sorted(lengths))
