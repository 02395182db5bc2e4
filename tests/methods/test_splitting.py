"""Any splitting and any early stopping equals none."""

from __future__ import annotations

from random import Random

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from fleetcount.errors import InputError
from fleetcount.lattice import catalogue
from fleetcount.lattice.model import Lattice
from fleetcount.methods.direct import keys, twin
from fleetcount.methods.direct.method import DirectMethod, Endless
from fleetcount.methods.direct.search import Search
from fleetcount.methods.face import Counted, Word
from fleetcount.series.defining import define
from fleetcount.series.definition import Series
from fleetcount.series.tally import Tally
from tests.methods.splitting import METHOD, After, Fickle, in_pieces, keys_of, slices_of, whole
from tests.strategies import small_lattices

many = settings(max_examples=50, deadline=None, suppress_health_check=[HealthCheck.too_slow])
objects = st.sampled_from(("walk", "polygon"))
seeds = st.integers(0, 2**32 - 1)

SHORT = {
    ("square", "walk", 14): 8,
    ("cubic", "walk", 10): 6,
    ("manhattan", "walk", 20): 12,
    ("dice", "walk", 12): 7,
    ("square", "polygon", 18): 8,
    ("cubic", "polygon", 12): 6,
    ("manhattan", "polygon", 24): 12,
}
FURTHER = tuple(SHORT)
"""Far enough that a search has many sites behind it, in slices of a few hundred nodes. With a length that
the twin can reach."""


@many
@given(small_lattices(), objects, st.integers(0, 9), st.sampled_from((1, 5, 40, 300)), seeds)
def test_any_splitting_equals_none(lattice: Lattice, kind: str, top: int, nodes: int, seed: int) -> None:
    """Units divided, stopped at any slice and handed back in any order add up to the count in one piece."""
    series = define(lattice, kind)
    expected = whole(series, top)
    with slices_of(nodes):
        assert in_pieces(series, top, Random(seed)) == expected


@pytest.mark.parametrize("least", (False, True))
@many
@given(small_lattices(), st.integers(4, 11), seeds)
def test_any_splitting_of_polygons_equals_none(least: bool, lattice: Lattice, top: int, seed: int) -> None:
    """The same for either rooting of polygons."""
    with pytest.MonkeyPatch.context() as patch, slices_of(20):
        patch.setattr(DirectMethod, "_rooted_at_least", lambda *_: least)
        series = define(lattice, "polygon")
        assert in_pieces(series, top, Random(seed)) == whole(series, top)


@pytest.mark.parametrize("seed", range(4))
@pytest.mark.parametrize(("name", "kind", "top"), FURTHER)
def test_any_splitting_equals_none_further(name: str, kind: str, top: int, seed: int) -> None:
    """The same at a reach where walks turn back upon themselves and symmetry is used."""
    series = define(catalogue.find(name), kind)
    expected = whole(series, top)
    with slices_of(100):
        assert in_pieces(series, top, Random(seed), pieces=150, patience=20) == expected


@pytest.mark.parametrize("word", (Word.TIME_UP, Word.STOP_NOW))
@pytest.mark.parametrize(("name", "kind", "top"), FURTHER)
def test_every_moment_of_stopping(name: str, kind: str, top: int, word: Word) -> None:
    """Stopped after any number of slices, the explored part and the children are the whole, by the twin.

    The children are completed to a shorter length only, which the plain twin can do.
    """
    series, short = define(catalogue.find(name), kind), SHORT[name, kind, top]
    root = METHOD.roots(series, range(top + 1))[-1]
    prefix = keys.parse(root.key)
    expected = up_to(METHOD.count(series, range(short + 1), root.key, Endless()).explored, short)
    with slices_of(100):
        for slices in range(1, 40, 3):
            got = METHOD.count(series, range(top + 1), root.key, After(slices, word))
            sums = up_to(got.explored, short)
            for child in got.children:
                sums.add(twin.whole(series, keys.parse(child.key), short), child.factor)
            assert sums == expected, (slices, prefix)


def up_to(tally: Tally, top: int) -> Tally:
    return Tally.of_counts({n: count for n, count in tally.counts().items() if n <= top})


def test_a_known_mistake_is_found(monkeypatch: pytest.MonkeyPatch) -> None:
    """Taking sites further down the path for obstacles to what is handed back shows in these tests."""

    def only_the_marks(search: Search, _: list[int], depth: int, arm: int) -> bool:
        there = search.ground.patch.next[int(search._own.path[depth]), arm]
        return bool(search._marks[there] >= 0)

    monkeypatch.setattr(Search, "_can_go", only_the_marks)
    with pytest.raises(AssertionError):
        test_any_splitting_equals_none_further("square", "walk", 14, 0)
    with pytest.raises(AssertionError):
        test_every_moment_of_stopping("square", "walk", 14, Word.STOP_NOW)


def stopped(series: Series, top: int, random: Random) -> tuple[str, Counted]:
    """A unit of some depth that was stopped early, and what it gave."""
    lengths = range(top + 1)
    unit = random.choice(METHOD.roots(series, lengths)).key
    for _ in range(random.randrange(3)):
        children = METHOD.divide(series, lengths, unit).children
        unit = random.choice(children).key if children else unit
    with slices_of(random.choice((1, 7, 50))):
        return unit, METHOD.count(series, lengths, unit, Fickle(random, 5))


@many
@given(small_lattices(), objects, st.integers(3, 9), seeds)
def test_recount_of_exactly_the_explored_part(lattice: Lattice, kind: str, top: int, seed: int) -> None:
    """Counting a unit without the children that it left gives the same rows again, and leaves nothing."""
    series, lengths = define(lattice, kind), range(top + 1)
    unit, first = stopped(series, top, Random(seed))
    again = METHOD.count(series, lengths, unit, Endless(), without=keys_of(first.children))
    assert again.explored == first.explored
    assert not again.children


@pytest.mark.parametrize("seed", range(3))
@pytest.mark.parametrize(("name", "kind", "top"), FURTHER)
def test_recount_further(name: str, kind: str, top: int, seed: int) -> None:
    """The same at a reach where symmetry is used and a tally has many children."""
    series, lengths = define(catalogue.find(name), kind), range(top + 1)
    unit = METHOD.roots(series, lengths)[0].key
    with slices_of(50):
        first = METHOD.count(series, lengths, unit, After(3 + 10 * seed, Word.STOP_NOW))
    assert first.children
    again = METHOD.count(series, lengths, unit, Endless(), without=keys_of(first.children))
    assert again.explored == first.explored


@pytest.mark.parametrize("cut", ("0:1", "0:3.3", "1:0", "0/least:0", "0:2"))
def test_only_parts_of_a_unit_can_be_left_out(cut: str) -> None:
    """A subtree that is no part of the unit, or not counted in it, is refused in one line."""
    series = define(catalogue.find("square"), "walk")
    with pytest.raises(InputError, match="not part of the unit"):
        METHOD.count(series, range(9), "0:0", Endless(), without=[cut])


def test_stopping_hands_back_few_keys() -> None:
    """A search that is stopped hands back at most depth times (arms - 1) keys."""
    series = define(catalogue.find("square"), "walk")
    with slices_of(500):
        for slices in range(1, 30):
            got = METHOD.count(series, range(15), "0:", After(slices, Word.STOP_NOW))
            deepest = max(len(keys.parse(child.key).arms) for child in got.children)
            assert len(got.children) <= deepest * 3


@pytest.mark.parametrize(("name", "kind", "top"), (("square", "walk", 22), ("square", "polygon", 24)))
def test_time_up_leaves_a_handful(name: str, kind: str, top: int) -> None:
    """When time is up, a search goes on for at most a tenth, and what it hands back lies near its own prefix."""
    series, lengths = define(catalogue.find(name), kind), range(top + 1)
    unit = METHOD.roots(series, lengths)[0].key
    for slices in (40, 60, 80):
        with slices_of(2000):
            now, up = (
                METHOD.count(series, lengths, unit, After(slices, word))
                for word in (Word.STOP_NOW, Word.TIME_UP)
            )
        assert now.seconds == slices
        assert now.seconds <= up.seconds <= 1.1 * now.seconds + 1
        assert max(depths(up)) <= max(depths(now)) - 5
        assert len(up.children) <= 0.75 * len(now.children)


def depths(counted: Counted) -> list[int]:
    return [len(keys.parse(child.key).arms) for child in counted.children]
