"""The identity of a series: what its digest covers, and what it does not."""

from __future__ import annotations

import json
from collections.abc import Mapping
from typing import Any

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from fleetcount.errors import InputError, SeriesError
from fleetcount.lattice import catalogue, definition
from fleetcount.lattice.model import Lattice
from fleetcount.lattice.symmetry import all_alike
from fleetcount.series import canonical
from fleetcount.series.defining import define
from fleetcount.series.definition import Series, from_canonical
from tests.series.digests import DIGESTS
from tests.strategies import small_lattices

HONEYCOMB = """
name = "honeycomb"
title = "honeycomb lattice"
dimension = 2
metric = [["3", "3/2"], ["3/2", "3"]]
[[sites]]
name = "a"
at = ["0", "0"]
[[sites]]
name = "b"
at = ["1/3", "1/3"]
[[edges]]
from = "a"
to = "b"
cell = [0, 0]
[[edges]]
from = "a"
to = "b"
cell = [-1, 0]
[[edges]]
from = "a"
to = "b"
cell = [0, -1]
"""

THE_SAME = """
# another file with other words for the same lattice
name = "graphene"
title = "carbon, one layer"
dimension = 2
periods = 2
metric = [["6/2", "6/4"], ["6/4", "3"]]
[[sites]]
name = "right"
at = ["2/6", "1/3"]
[[sites]]
name = "left"
at = ["0", "0"]
[[edges]]
from = "right"
to = "left"
cell = [0, 1]
[[edges]]
from = "left"
to = "right"
cell = [0, 0]
[[edges]]
from = "right"
to = "left"
cell = [1, 0]
"""


def test_digests_of_the_catalogue() -> None:
    """The series of every built-in lattice keep the identity they have in ledgers."""
    found = {key: define(catalogue.find(key[0]), *key[1:]).digest for key in DIGESTS}
    assert found == DIGESTS
    assert {key[0] for key in DIGESTS} == set(catalogue.names())
    assert len(set(DIGESTS.values())) == len(DIGESTS)


@pytest.mark.parametrize("kind", ("walk", "polygon"))
def test_words_and_order_are_no_part_of_it(kind: str) -> None:
    """Names, titles, comments, the order of sites and edges and the end an edge is written from do not matter."""
    one, other = (define(definition.parse(text, "a file"), kind) for text in (HONEYCOMB, THE_SAME))
    assert one.digest == other.digest == DIGESTS["honeycomb", kind]
    assert one.text == other.text


@pytest.mark.parametrize(
    ("old", "new"),
    (
        ('"3/2"], ["3/2"', '"1"], ["1"'),
        ('at = ["1/3", "1/3"]', 'at = ["1/4", "1/3"]'),
        ("cell = [-1, 0]", "cell = [-1, -1]"),
        ("[[edges]]", "[[arcs]]"),
    ),
)
def test_the_lattice_itself_is_part_of_it(old: str, new: str) -> None:
    """Another metric, position, edge or sense is another series."""
    text = HONEYCOMB.replace(old, new)
    if new == "[[arcs]]":
        text = text + '[[arcs]]\nfrom = "b"\nto = "a"\ncell = [0, 0]\n'
    assert text != HONEYCOMB
    changed = define(definition.parse(text, "a file"), "polygon")
    assert changed.digest != DIGESTS["honeycomb", "polygon"]


def test_the_start_is_part_of_it_only_where_sites_differ() -> None:
    """Where all sites are alike every start means the same series; elsewhere each is one, and so is their sum."""
    honeycomb, dice = catalogue.find("honeycomb"), catalogue.find("dice")
    assert len({define(honeycomb, "walk", start).digest for start in (None, "a", "b")}) == 1
    assert define(honeycomb, "walk", "b").start == 0
    assert len({define(dice, "walk", start).digest for start in (None, "hub", "rim1", "rim2")}) == 4
    assert define(dice, "walk").start is None


def test_titles() -> None:
    """One line says what is counted, and names the start only where it makes a difference."""
    dice = catalogue.find("dice")
    assert define(catalogue.find("honeycomb"), "walk", "b").title() == "honeycomb walk"
    assert define(dice, "walk", "hub").title() == "dice walk from hub"
    assert define(dice, "walk").title() == "dice walk"
    assert define(dice, "polygon").title() == "dice polygon"


@pytest.mark.parametrize(
    ("kind", "start", "reason", "mend"),
    (
        ("wakl", None, "unknown object 'wakl'", "did you mean walk?"),
        ("polgon", None, "unknown object 'polgon'", "did you mean polygon?"),
        ("", None, "unknown object ''", "walk"),
        ("polygon", "hub", "has no start", "leave it out"),
        ("walk", "rim", "no site named 'rim'", "its sites: hub, rim1, rim2"),
        ("walk", "", "no site named ''", "hub"),
    ),
)
def test_series_that_make_no_sense(kind: str, start: str | None, reason: str, mend: str) -> None:
    """An unknown object or site, or a start where there is none, is refused in one line that says what there is."""
    with pytest.raises(SeriesError) as error:
        define(catalogue.find("dice"), kind, start)
    text = str(error.value)
    assert reason in text and mend in text and "\n" not in text


def carried(series: Series) -> Series:
    """The series as a ledger or a hand-out carries it: as text."""
    return from_canonical(json.loads(series.text), json.loads(canonical.text(series.written())))


@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.too_slow])
@given(small_lattices(), st.sampled_from(("walk", "polygon")), st.data())
def test_a_series_comes_back_from_its_text(lattice: Lattice, kind: str, data: st.DataObject) -> None:
    """From the canonical form and the words beside it the same series is made again: identity, arms and title."""
    names = [site.name for site in lattice.sites]
    start = data.draw(st.sampled_from([None, *names])) if kind == "walk" else None
    series = define(lattice, kind, start)
    back = carried(series)
    assert (back.digest, back.title(), back.divisor) == (series.digest, series.title(), series.divisor)
    assert back.written() == series.written()
    assert back.lattice.arms == lattice.arms
    assert all_alike(back.lattice) == all_alike(lattice)


@pytest.mark.parametrize("name", catalogue.names())
def test_the_catalogue_comes_back_from_its_text(name: str) -> None:
    """The same for the built-in lattices."""
    for kind in ("walk", "polygon"):
        assert carried(define(catalogue.find(name), kind)).digest == DIGESTS[name, kind]


def _changed(change: Mapping[str, Any]) -> dict[str, Any]:
    form = define(catalogue.find("square"), "walk").canonical()
    return {**form, **change, "lattice": {**form["lattice"], **change.get("lattice", {})}}


@pytest.mark.parametrize(
    "change",
    (
        {"format": 2},
        {"format": None},
        {"object": ["walk", 99]},
        {"object": ["stroll", 1]},
        {"object": "walk"},
        {"object": []},
        {"lattice": {"metric": [["1/0"]]}},
        {"lattice": {"arcs": [[0, 0]]}},
        {"lattice": {"positions": [["x"]]}},
        {"lattice": {"dimension": "two"}},
    ),
)
def test_forms_that_are_none(change: dict[str, Any]) -> None:
    """A form of another format or version, or a broken one, is refused in one line, not half understood."""
    with pytest.raises(SeriesError) as error:
        from_canonical(_changed(change), {"lattice": "square"})
    assert str(error.value).startswith("square: ")
    assert "\n" not in str(error.value)


@pytest.mark.parametrize("form", ({}, {"format": 1}, {"format": 1, "lattice": None}))
def test_forms_that_lack_something(form: dict[str, Any]) -> None:
    """So is one that lacks a part."""
    with pytest.raises(InputError):
        from_canonical(form, {})
