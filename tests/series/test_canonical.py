"""Canonical JSON: one text for one value."""

from __future__ import annotations

import json

import pytest
from hypothesis import given
from hypothesis import strategies as st

from fleetcount.series import canonical

values = st.recursive(
    st.one_of(st.none(), st.booleans(), st.integers(), st.text()),
    lambda inner: st.one_of(st.lists(inner, max_size=4), st.dictionaries(st.text(), inner, max_size=4)),
    max_leaves=12,
)


@given(values)
def test_text_gives_the_value_back(value: object) -> None:
    """The text is JSON of the value, and the text of what is read from it is the same again."""
    text = canonical.text(value)
    assert json.loads(text) == value
    assert canonical.text(json.loads(text)) == text


def test_no_freedom_of_writing() -> None:
    """Keys are sorted, there are no spaces, and letters beyond ASCII stand for themselves."""
    assert canonical.text({"b": [1, "ü"], "a": None}) == '{"a":null,"b":[1,"ü"]}'


def test_no_number_that_is_none() -> None:
    """Infinities and the like have no text in JSON."""
    with pytest.raises(ValueError, match="JSON"):
        canonical.text(float("nan"))


def test_the_digest_is_of_the_text_in_utf8() -> None:
    """SHA-256, as hexadecimal digits. The value for "abc" is that of the standard (FIPS 180-2, appendix B.1)."""
    assert canonical.digest("abc") == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
    assert canonical.digest("ü") != canonical.digest("u")
