"""From words to a series: what is refused and why, and what makes two questions the same series."""

from __future__ import annotations

import json
from itertools import permutations
from typing import Any

import pytest
from hypothesis import HealthCheck, assume, given, settings
from hypothesis import strategies as st

from fleetcount.errors import SeriesError
from fleetcount.lattice import catalogue
from fleetcount.lattice.model import Lattice
from fleetcount.series import canonical
from fleetcount.series.defining import define
from fleetcount.series.definition import Series, from_canonical
from fleetcount.series.region import wall
from tests.methods.refined import refined_series
from tests.strategies import small_lattices

quick = settings(max_examples=100, deadline=None, suppress_health_check=[HealthCheck.too_slow])


def carried(series: Series) -> Series:
    """The series as a ledger or a hand-out carries it: as text."""
    return from_canonical(json.loads(series.text), json.loads(canonical.text(series.written())))


@quick
@given(refined_series(small_lattices()))
def test_a_refined_series_comes_back_from_its_text(series: Series) -> None:
    """From the canonical form and the words beside it the same series is made again, with all that is measured."""
    back = carried(series)
    assert back.digest == series.digest and back.text == series.text
    assert (back.statistics, back.moments, back.walls, back.end) == (
        series.statistics,
        series.moments,
        series.walls,
        series.end,
    )
    assert (back.title(), back.columns, back.denominator, back.divisor, back.width) == (
        series.title(),
        series.columns,
        series.denominator,
        series.divisor,
        series.width,
    )
    assert back.written() == series.written()


SQUARE_WORDS: tuple[dict[str, Any], ...] = (
    {},
    {"by": ["contacts"]},
    {"by": ["contacts", "turns"]},
    {"by": ["end"]},
    {"by": ["steps:1,0"]},
    {"by": ["steps:0,1"]},
    {"by": ["span:1,0"]},
    {"by": ["height"]},
    {"moment": ["end2"]},
    {"moment": ["gyration2"]},
    {"moment": ["end2", "gyration2"]},
    {"moment": ["height2"]},
    {"end": "1,0"},
    {"end": "0,1"},
    {"region_name": "half"},
    {"region_name": "half", "start": "0,1"},
    {"region_name": "half", "by": ["visits"]},
    {"region_name": "quarter"},
    {"region_name": "slab:1"},
    {"region_name": "slab:2"},
    {"region_name": "slab:1", "by": ["visits"]},
    {"region_name": "slab:1", "by": ["visits:2"]},
    {"region_name": "slab:1", "by": ["visits:any"]},
)


def test_whatever_is_asked_for_is_part_of_the_identity() -> None:
    """Another statistic, direction, moment, end, region or start is another series; and so is another object."""
    square = catalogue.find("square")
    series = [define(square, "walk", **words) for words in SQUARE_WORDS]
    series += [
        define(square, kind) for kind in ("trail", "closed-trail", "bridge", "trapped", "neighbour-avoiding")
    ]
    assert len({s.digest for s in series}) == len(series)


@pytest.mark.parametrize("by", (("contacts", "turns"), ("steps:1,0", "steps:0,1"), ("visits", "height")))
def test_the_order_of_words_does_not_matter(by: tuple[str, ...]) -> None:
    """Statistics, moments and walls are sets: their order, and a repetition, changes nothing."""
    square = catalogue.find("square")
    walls = [wall(square, (0, 1), 0), wall(square, (1, 0), -2), wall(square, (-1, -1), -7)]
    names = ["end2", "gyration2", "height2"]
    digests = {
        define(
            square, "walk", by=[*some, some[0]], moment=[*more, more[0]], walls=[*bounds, bounds[0]]
        ).digest
        for some in permutations(by)
        for more in permutations(names)
        for bounds in permutations(walls)
    }
    assert len(digests) == 1


@pytest.mark.parametrize(
    ("one", "other"),
    (
        ({"by": ["steps:1,0"]}, {"by": ["steps:-1,0"]}),
        ({"by": ["span:1,-1"]}, {"by": ["span:-1,1"]}),
        ({"region_name": "quarter"}, {"region_name": "orthant"}),
    ),
)
def test_two_names_of_one_thing(one: dict[str, Any], other: dict[str, Any]) -> None:
    """A direction and its opposite, and regions with the same walls, are the same series."""
    square = catalogue.find("square")
    assert define(square, "walk", **one).digest == define(square, "walk", **other).digest


def test_shorthands_have_the_digest_of_their_walls() -> None:
    """A shorthand is nothing but its walls; multiples of an inequality and walls behind another are the same."""
    square = catalogue.find("square")
    half = define(square, "walk", region_name="half").digest
    for walls in ([((0, 1), 0)], [((0, 3), 0)], [((0, 2), -1)], [((0, 1), 0), ((0, 1), -4)]):
        assert define(square, "walk", walls=[wall(square, *w) for w in walls]).digest == half
    assert define(square, "walk", walls=[wall(square, (0, 1), 1)], start="0,1").digest == half


@quick
@given(small_lattices(), st.sampled_from(("walk", "trail", "bridge", "polygon")), st.data())
def test_it_does_not_matter_where_a_region_is_written(
    lattice: Lattice, kind: str, data: st.DataObject
) -> None:
    """Region, start and end moved together by some periods are the same series; a closed object needs no start."""
    numbers = st.integers(-3, 3)
    form = st.tuples(*[st.integers(-2, 2)] * lattice.dimension).filter(lambda f: any(f[: lattice.periods]))
    asked = data.draw(st.lists(st.tuples(form, st.integers(-3, 0)), min_size=1, max_size=2))
    shift = data.draw(st.tuples(*[numbers] * lattice.periods))
    site = data.draw(st.sampled_from(lattice.sites)).name
    digests = []
    for by in ((0,) * lattice.periods, shift):
        walls = [
            wall(lattice, f, least + sum(x * c for x, c in zip(f, by, strict=False))) for f, least in asked
        ]
        words: dict[str, Any] = {"start": f"{','.join(map(str, by))}:{site}"}
        try:
            series = define(lattice, kind, walls=walls, **words)
        except SeriesError:
            try:
                series = define(lattice, kind, walls=walls)
            except SeriesError:
                assume(False)
        digests.append(series.digest)
    assert digests[0] == digests[1]


REFUSED: tuple[tuple[str, str, dict[str, Any], str], ...] = (
    ("square", "walk", {"by": ["contcts"]}, "unknown statistic 'contcts'; did you mean contacts?"),
    ("square", "walk", {"by": ["contacts:1"]}, "contacts takes no argument"),
    ("square", "walk", {"by": ["contacts", "turns", "height"]}, "3 statistics; at most 2 at a time"),
    ("square", "walk", {"by": ["visits"]}, "visits need a wall: give a --region"),
    ("square", "walk", {"by": ["visits:2"], "region_name": "half"}, "there are only 1 walls"),
    ("square", "walk", {"by": ["visits:x"], "region_name": "half"}, "'x' is no wall"),
    ("square", "walk", {"by": ["visits:0"], "region_name": "half"}, "'0' is no wall"),
    ("square", "walk", {"by": ["visits:-1"], "region_name": "half"}, "'-1' is no wall"),
    ("square", "walk", {"by": ["revisits"]}, "a walk passes no site twice"),
    ("square", "polygon", {"by": ["height"]}, "a polygon has no end"),
    ("square", "closed-trail", {"by": ["end"]}, "a closed-trail has no end"),
    ("square", "walk", {"by": ["area"]}, "only polygons enclose an area"),
    ("square", "closed-trail", {"by": ["area"]}, "only polygons enclose an area"),
    ("cubic", "polygon", {"by": ["area"]}, "area needs two dimensions"),
    ("king", "polygon", {"by": ["area"]}, "edges of this lattice cross each other"),
    ("4.8.8", "polygon", {"by": ["area"]}, "drawing"),
    ("honeycomb", "walk", {"by": ["turns"]}, "every step turns on this lattice"),
    ("l-lattice", "walk", {"by": ["turns"]}, "every step turns on this lattice"),
    ("square", "walk", {"by": ["steps"]}, "no list of whole numbers"),
    ("square", "walk", {"by": ["steps:1"]}, "1 numbers, but the lattice square has 2 coordinates"),
    ("square", "walk", {"by": ["steps:1,x"]}, "no list of whole numbers"),
    ("square", "walk", {"by": ["span:0,0"]}, "all zero, or too large"),
    ("square", "walk", {"by": ["span:99999,1"]}, "all zero, or too large"),
    ("square", "walk", {"moment": ["end3"]}, "unknown moment 'end3'; did you mean end2"),
    ("square", "polygon", {"moment": ["end2"]}, "a polygon has no end for end2"),
    ("square", "polygon", {"moment": ["monomer2"]}, "a polygon has no start for monomer2"),
    ("square", "closed-trail", {"moment": ["height2"]}, "a closed-trail has no end for height2"),
    ("3.12.12", "walk", {"moment": ["end2"]}, "given as a drawing, in which distances mean nothing"),
    ("square", "walk", {"region_name": "half", "start": "0,-1"}, "the region does not hold the start"),
    ("square", "walk", {"region_name": "half", "end": "0,-1"}, "the region does not hold the end"),
    ("square", "walk", {"end": "0,0"}, "the end is the start"),
    ("square", "walk", {"end": "1"}, "'1' is no cell; give 2 whole numbers like 0,3"),
    ("square", "walk", {"end": "1,99999999"}, "is no cell"),
    ("square", "walk", {"end": "a,b"}, "no site named 'a,b'"),
    ("honeycomb", "walk", {"end": "1,0"}, "which site of that cell?; write 1,0:SITE, one of a, b"),
    ("honeycomb", "walk", {"end": "1,0:c"}, "no site named 'c'; its sites: a, b"),
    ("square", "trail", {"end": "1,0"}, "a trail with a given end cannot be counted"),
    ("square", "polygon", {"end": "1,0"}, "a polygon with a given end cannot be counted"),
    (
        "square",
        "polygon",
        {"region_name": "half", "start": "0,0"},
        "a polygon has no start here; leave it out",
    ),
    ("square", "walk", {"region_name": "hal"}, "unknown region 'hal'"),
    ("dice", "walk", {"region_name": "half"}, "the sites are not all alike; --start one of hub, rim1, rim2"),
    ("dice", "walk", {"by": ["height"]}, "the sites are not all alike"),
    ("dice", "bridge", {}, "the sites are not all alike"),
)


@pytest.mark.parametrize(("name", "kind", "words", "reason"), REFUSED)
def test_what_makes_no_sense_is_refused(name: str, kind: str, words: dict[str, Any], reason: str) -> None:
    """Words that contradict each other or mean nothing here: one line that says why."""
    with pytest.raises(SeriesError) as error:
        define(catalogue.find(name), kind, **words)
    assert reason in str(error.value)
    assert "\n" not in str(error.value)


def test_walls_are_numbered_as_people_expect() -> None:
    """Wall 1 of a slab is the lower one, and the first walls of a box are those at 0."""
    square = catalogue.find("square")
    slab = define(square, "walk", region_name="slab:3").walls
    assert [(w.form, w.bound) for w in slab] == [((0, 1), 0), ((0, -1), -3)]
    box = define(square, "walk", region_name="box:2,5").walls
    assert [w.form for w in box] == [(1, 0), (0, 1), (0, -1), (-1, 0)]
