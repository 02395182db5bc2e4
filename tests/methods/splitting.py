"""Taking a count to pieces at random, and putting it together again."""

from __future__ import annotations

import itertools
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from random import Random
from types import SimpleNamespace

import pytest

from fleetcount.methods.direct import slices
from fleetcount.methods.direct.method import DirectMethod, Endless
from fleetcount.methods.face import Child, Counted, Word
from fleetcount.series.definition import Series
from fleetcount.series.tally import Tally

METHOD = DirectMethod()


class Fickle:
    """A clock that lets a few slices pass, and then says anything."""

    def __init__(self, random: Random, patience: int) -> None:
        self._random, self._left = random, random.randrange(patience + 1)

    def word(self) -> Word:
        self._left -= 1
        return Word.GO if self._left >= 0 else self._random.choice((Word.TIME_UP, Word.STOP_NOW))


class After:
    """A clock that says one word after some slices, and ever after."""

    def __init__(self, slices: int, word: Word) -> None:
        self._left, self._word = slices, word

    def word(self) -> Word:
        self._left -= 1
        return Word.GO if self._left > 0 else self._word


@contextmanager
def slices_of(nodes: int) -> Iterator[None]:
    """Slices of about so many nodes, each of one second by their clock: nothing depends on how fast it goes."""
    with pytest.MonkeyPatch.context() as patch:
        for name in ("FIRST_SLICE", "LEAST_SLICE"):
            patch.setattr(slices, name, nodes)
        patch.setattr(slices, "time", SimpleNamespace(thread_time=itertools.count().__next__))
        yield


def whole(series: Series, top: int) -> Tally:
    """The weighted sum over the roots, each counted in one piece."""
    sums = Tally(series.width)
    for root in METHOD.roots(series, range(top + 1)):
        counted = METHOD.count(series, range(top + 1), root.key, Endless())
        assert not counted.children
        sums.add(counted.explored, root.factor)
    return sums


def table(series: Series, top: int) -> dict[int, int]:
    """Counts by length."""
    return METHOD.assemble(series, whole(series, top)).counts()


def in_pieces(series: Series, top: int, random: Random, pieces: int = 60, patience: int = 3) -> Tally:
    """The same sum, by units that are divided, stopped early and handed back at random.

    Args:
        pieces: after so many units the rest are counted whole, so that it ends.
    """
    lengths = range(top + 1)
    todo: list[tuple[Child, int]] = [(root, root.factor) for root in METHOD.roots(series, lengths)]
    sums, taken, seen = Tally(series.width), 0, {root.key for root, _ in todo}
    while todo:
        unit, weight = todo.pop(random.randrange(len(todo)))
        taken += 1
        if taken > pieces:
            counted = METHOD.count(series, lengths, unit.key, Endless())
        elif random.random() < 0.3:
            counted = METHOD.divide(series, lengths, unit.key)
        else:
            counted = METHOD.count(series, lengths, unit.key, Fickle(random, patience))
        check_children(unit.key, counted, seen)
        sums.add(counted.explored, weight)
        todo += [(child, weight * child.factor) for child in counted.children]
    return sums


def check_children(key: str, counted: Counted, seen: set[str]) -> None:
    """Children lie below their parent, are sorted, and never come twice."""
    keys = [child.key for child in counted.children]
    assert keys == sorted(set(keys))
    assert not seen.intersection(keys)
    seen.update(keys)
    start = key if key.endswith(":") else key + "."
    assert all(child.key.startswith(start) and child.factor >= 1 for child in counted.children)


def keys_of(children: Sequence[Child]) -> list[str]:
    return [child.key for child in children]
