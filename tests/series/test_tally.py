"""Tallies: exact sums, whatever their size, and the one text that stands for them."""

from __future__ import annotations

import json

import pytest
from hypothesis import given
from hypothesis import strategies as st

from fleetcount.errors import TrustError
from fleetcount.series import canonical
from fleetcount.series.tally import Tally

HUGE = 10**60
counts = st.integers(-HUGE, HUGE)


@st.composite
def tallies(draw: st.DrawFn, width: int = 2, places: int = 2) -> Tally:
    place = st.tuples(*[st.integers(0, 30)] * places)
    return Tally(width, draw(st.dictionaries(place, st.tuples(*[counts] * width), max_size=8)))


@given(tallies(), tallies(), tallies(), counts, counts)
def test_tallies_add_and_scale_like_integers(a: Tally, b: Tally, c: Tally, j: int, k: int) -> None:
    """Addition has no order, factors distribute, and nothing is ever rounded."""
    assert a + b == b + a
    assert (a + b) + c == a + (b + c)
    assert (a + b) * k == a * k + b * k
    assert a * (j + k) == a * j + a * k
    assert a * j * k == a * (j * k)
    assert a + a * -1 == Tally(2)


@given(tallies(), tallies(), counts)
def test_adding_in_place(a: Tally, b: Tally, factor: int) -> None:
    """`add` is the same sum in place, and leaves the other tally alone."""
    total, before = Tally(2, dict(a.rows)), b.text()
    total.add(b, factor)
    assert total == a + b * factor
    assert b.text() == before


@given(tallies(), tallies())
def test_text_is_one_to_one(a: Tally, b: Tally) -> None:
    """Two tallies have the same text and digest exactly when they are equal; rows of zeros are no rows."""
    assert (a == b) == (a.text() == b.text()) == (a.digest() == b.digest())
    zeros = Tally(2, {**a.rows, (99, 99): (0, 0)})
    assert zeros == a and zeros.text() == a.text()


@given(tallies())
def test_a_tally_comes_back_from_its_text(a: Tally) -> None:
    """Canonical text, decimal and sorted, gives the tally back."""
    rows = json.loads(a.text())
    assert Tally.from_canonical(rows, width=2) == a
    assert all(isinstance(x, str) for row in rows for x in row)
    assert a.text() == canonical.text(rows)


def test_the_text_itself() -> None:
    """Rows sorted by place as numbers, each number as decimal text, no spaces, hashed as UTF-8."""
    tally = Tally.of_counts({10: 2**80, 9: 4, 2: 0})
    assert tally.text() == '[["9","4"],["10","1208925819614629174706176"]]'
    # `printf '%s' '[["9","4"],["10","1208925819614629174706176"]]' | sha256sum`
    assert tally.digest() == "5f5a033ceb6d95ea03ef0d77c66e80a3690911e042ee87edcf1e31c5ef987fb2"


def test_counts_sum_the_statistics_out() -> None:
    """Counts by length add the first column over all values of the statistics."""
    assert Tally(2, {(3, 0): (5, 9), (3, 1): (7, 9), (4, 0): (1, 0)}).counts() == {3: 12, 4: 1}


def test_tallies_of_different_widths_do_not_add() -> None:
    """Sums of different moments are not mixed up."""
    with pytest.raises(TrustError, match="do not add up"):
        Tally(1).add(Tally(2))


def test_a_tally_is_no_key() -> None:
    """A tally is added to in place, so it has no hash."""
    with pytest.raises(TypeError):
        hash(Tally())
