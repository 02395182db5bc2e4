"""Sets of lengths: the reach of a reading, as numbers and as text (`0-22`, `25,26`)."""

from __future__ import annotations

import re
from collections.abc import Iterable, Sequence

from fleetcount.errors import InputError

GREATEST = 1_000_000
"""No method reaches as far; it keeps a broken text from filling the memory."""

_RUN = re.compile(r"(\d{1,18})(?:-(\d{1,18}))?", re.ASCII)


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
    for run in text.split(","):
        match = _RUN.fullmatch(run)
        first, last = (int(match[1]), int(match[2] or match[1])) if match else (1, 0)
        if first > last:
            raise InputError(
                "not a set of lengths", where=repr(text[:80]), mend="write for example 0-22 or 3,5-7"
            )
        if last > GREATEST:
            raise InputError(
                f"length {last} is absurd", where=repr(text[:80]), mend=f"at most {GREATEST} is possible"
            )
        lengths.update(range(first, last + 1))
    return tuple(sorted(lengths))
