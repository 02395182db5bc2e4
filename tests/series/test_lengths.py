"""Sets of lengths as text."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from fleetcount.errors import InputError
from fleetcount.series.lengths import GREATEST, format_lengths, parse_lengths


@given(st.sets(st.integers(0, GREATEST), min_size=1, max_size=50))
def test_text_gives_the_lengths_back(lengths: set[int]) -> None:
    """Whatever set, its text stands for it, in order."""
    assert list(parse_lengths(format_lengths(lengths))) == sorted(lengths)


@pytest.mark.parametrize(
    ("lengths", "text"),
    ((range(23), "0-22"), ((7, 3, 5, 6), "3,5-7"), ((25, 26), "25-26"), ((0,), "0"), ((4, 4), "4")),
)
def test_text_is_as_short_as_can_be(lengths: tuple[int, ...], text: str) -> None:
    """Runs are written with their ends, single lengths alone."""
    assert format_lengths(lengths) == text


@given(st.one_of(st.text(max_size=12), st.from_regex(r"\A[0-9,\- ]{0,10}\Z")))
def test_rubbish_is_refused_in_one_line(text: str) -> None:
    """What is no set of lengths is refused; what is accepted is a set of plain lengths in order."""
    try:
        lengths = parse_lengths(text)
    except InputError as error:
        assert "\n" not in str(error)
    else:
        assert list(lengths) == sorted(set(lengths)) and lengths and set(text) <= set("0123456789,-")


@pytest.mark.parametrize(
    "text", ("", "-3", "5-3", "3-", "1_0", " 3", "٣", "0-99999999999999", "1" * 40, "3;4")
)
def test_lengths_that_are_none(text: str) -> None:
    """Empty, negative, reversed and absurd sets fill no memory and are refused."""
    with pytest.raises(InputError):
        parse_lengths(text)
