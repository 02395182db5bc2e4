"""Symmetries that are used keep whatever a series names; and each of these laws is needed."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import pytest

from fleetcount.errors import TrustError
from fleetcount.lattice import catalogue
from fleetcount.lattice.symmetry import stabilizer
from fleetcount.methods.direct import end_orbits, symmetry_states
from fleetcount.methods.direct.kept import kept_symmetries
from fleetcount.series.defining import define
from fleetcount.series.definition import Series
from tests.methods.refined import by_kernel, by_twin, forget, interpreted

NAMING: list[tuple[str, str, int, dict[str, Any], int]] = [
    # lattice, object, length, what is named, how many symmetries are left
    ("square", "walk", 5, {"region_name": "half"}, 2),
    ("square", "walk", 5, {"region_name": "quarter"}, 1),
    ("square", "walk", 5, {"region_name": "slab:1"}, 2),
    ("square", "walk", 5, {"region_name": "half", "by": ["visits"]}, 2),
    ("square", "trail", 4, {"region_name": "wedge"}, 1),
    ("square", "polygon", 8, {"region_name": "quarter", "start": "0,1"}, 1),
    ("square", "walk", 5, {"end": "2,1"}, 1),
    ("square", "walk", 4, {"end": "1,1"}, 2),
    ("square", "walk", 4, {"by": ["steps:1,0"]}, 4),
    ("square", "walk", 4, {"by": ["steps:1,0", "steps:0,1"]}, 4),
    ("square", "walk", 4, {"by": ["span:1,0"]}, 4),
    ("square", "walk", 4, {"by": ["span:1,1"]}, 4),
    ("square", "walk", 4, {"by": ["span:2,1"]}, 2),
    ("square", "walk", 4, {"by": ["height"]}, 2),
    ("square", "walk", 4, {"moment": ["height2"]}, 4),
    ("square", "walk", 4, {"moment": ["along2"]}, 4),
    ("square", "bridge", 4, {}, 2),
    ("square", "trapped", 7, {"by": ["height"]}, 2),
    ("square", "closed-trail", 6, {"by": ["steps:1,0"]}, 4),
    ("triangular", "walk", 3, {"by": ["steps:1,0"]}, 4),
    ("triangular", "walk", 3, {"by": ["span:1,0"]}, 4),
    ("triangular", "walk", 5, {"region_name": "half"}, 2),
    ("honeycomb", "walk", 5, {"by": ["height"]}, 2),
    ("honeycomb", "neighbour-avoiding", 5, {"moment": ["along2"]}, 2),
    ("dice", "walk", 3, {"by": ["height"], "start": "hub"}, 2),
    ("cubic", "walk", 5, {"region_name": "half"}, 8),
    ("cubic", "walk", 3, {"by": ["steps:0,1,0"]}, 16),
    ("cubic", "walk", 3, {"region_name": "half", "by": ["steps:1,0,0"]}, 4),
    ("cubic", "bridge", 3, {}, 8),
]

FREE: list[tuple[str, str, dict[str, Any], int]] = [
    ("square", "walk", {"by": ["contacts", "turns"], "moment": ["end2", "gyration2", "monomer2"]}, 8),
    ("square", "walk", {"by": ["end"]}, 8),
    ("square", "polygon", {"by": ["area", "turns"]}, 8),
    ("square", "trail", {"by": ["revisits"]}, 8),
    ("square", "trapped", {}, 8),
    ("cubic", "neighbour-avoiding", {"moment": ["end2"]}, 48),
    ("triangular", "walk", {"by": ["contacts"]}, 12),
]


@pytest.fixture(scope="module", autouse=True)
def as_python() -> Iterator[None]:
    with interpreted():
        yield


def named(name: str, kind: str, options: dict[str, Any]) -> Series:
    return define(catalogue.find(name), kind, **options)


def order(series: Series) -> int:
    return len(kept_symmetries(series, series.start or 0))


@pytest.mark.parametrize(("name", "kind", "top", "options", "left"), NAMING)
def test_no_more_symmetry_than_is_kept(
    name: str, kind: str, top: int, options: dict[str, Any], left: int, monkeypatch: pytest.MonkeyPatch
) -> None:
    """What names a wall, a site, a direction or a form keeps so many symmetries, with which the sums are those of
    the definitions; with all that fix the start they would not be."""
    series = named(name, kind, options)
    expected = by_twin(series, top)
    assert order(series) == left
    assert by_kernel(series, top) == expected

    def all_that_fix(series: Series, start: int) -> object:
        return stabilizer(series.lattice, start)

    for module in (symmetry_states, end_orbits):
        monkeypatch.setattr(module, "kept_symmetries", all_that_fix)
    forget()
    assert left < len(stabilizer(series.lattice, series.start or 0))
    try:
        assert by_kernel(series, top) != expected
    except TrustError:
        pass  # found out by a remainder
    finally:
        forget()


@pytest.mark.parametrize(("name", "kind", "options", "left"), FREE)
def test_all_symmetry_where_nothing_is_named(
    name: str, kind: str, options: dict[str, Any], left: int
) -> None:
    """Statistics and moments that look the same from every side cost no symmetry."""
    series = named(name, kind, options)
    assert order(series) == left == len(stabilizer(series.lattice, 0))
