"""Keys of direct units, and what is refused as one."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from fleetcount.errors import InputError
from fleetcount.lattice import catalogue
from fleetcount.methods.direct import keys
from fleetcount.methods.direct.keys import Prefix
from fleetcount.methods.direct.method import Endless
from fleetcount.series.defining import define
from tests.methods.splitting import METHOD

prefixes = st.builds(
    Prefix,
    st.integers(0, 999_999),
    st.booleans(),
    st.lists(st.integers(0, 999), max_size=60).map(tuple),
    st.lists(st.integers(-999_999_999, 999_999_999), max_size=5).map(tuple),
)


@given(prefixes)
def test_a_key_gives_its_prefix_back(prefix: Prefix) -> None:
    """Text and prefix say the same."""
    assert keys.parse(prefix.key()) == prefix


@given(st.one_of(st.text(max_size=30), st.from_regex(r"\A[0-9:./least@,-]{0,12}\Z")))
def test_a_unit_has_one_key(text: str) -> None:
    """Whatever is accepted is the one spelling of its prefix; all else is refused in one line."""
    try:
        assert keys.parse(text).key() == text
    except InputError as error:
        assert "\n" not in str(error)


@pytest.mark.parametrize(
    "text",
    (
        "",
        "0",
        ":",
        "0:0.",
        "0:.1",
        "0:-1",
        "00:1",
        "0:01",
        "0:1..2",
        " 0:1",
        "0:1\n",
        "0/most:1",
        "0@:1",
        "0@01:1",
        "0@-0:1",
        "0@1,:1",
        "0/least@1:1",
        "0@1000000000:1",
        "٣:1",
        "0:" + "1" * 99,
    ),
)
def test_rubbish_is_no_key(text: str) -> None:
    """What is not written exactly as keys are is refused, and the line shows how one looks."""
    with pytest.raises(InputError, match=r"a key looks like 0:0\.3\.1"):
        keys.parse(text)


@pytest.mark.parametrize(
    ("kind", "key", "reason"),
    (
        ("walk", "7:", "no unit of square walk"),
        ("walk", "0:4", "no unit of square walk"),
        ("walk", "0/least:", "no unit of square walk"),
        ("walk", "0:0.0.0.0.0.0.0", "no unit of square walk up to length 6"),
        ("walk", "0:0.3", "cannot begin with"),
        ("walk", "0:1", "another one stands for"),
        ("polygon", "0:9", "no unit of square polygon"),
        ("polygon", "0/least:0", "cannot begin with"),
        ("polygon", "0:0.3", "cannot begin with"),
    ),
)
def test_keys_that_name_no_unit(kind: str, key: str, reason: str) -> None:
    """A key that is none on this lattice, or beyond this length, is refused by counting and dividing alike."""
    series = define(catalogue.find("square"), kind)
    with pytest.raises(InputError, match=reason) as counting:
        METHOD.count(series, range(7), key, Endless())
    with pytest.raises(InputError, match=reason) as dividing:
        METHOD.divide(series, range(7), key)
    assert str(counting.value) == str(dividing.value)
    assert str(counting.value).startswith(f"{key}: ")


def test_a_unit_too_far_to_come_home_holds_nothing() -> None:
    """A prefix that no polygon of the reach begins with counts as nothing, and its parent does not hand it out."""
    series = define(catalogue.find("square"), "polygon")
    counted = METHOD.count(series, range(7), "0:0.0.0.0", Endless())
    assert (counted.explored.counts(), counted.children) == ({}, ())
    assert METHOD.divide(series, range(7), "0:0.0.0.0").children == ()
    assert METHOD.divide(series, range(7), "0:0.0.0").children == ()
    assert [c.key for c in METHOD.divide(series, range(9), "0:0.0.0").children] == ["0:0.0.0.0", "0:0.0.0.1"]
