"""Pictures of what is counted: classes of images that add up to the count, and a sheet that shows them."""

from __future__ import annotations

import json
import xml.etree.ElementTree as ElementTree
from pathlib import Path

import pytest
import typer
from hypothesis import given, settings
from hypothesis import strategies as st
from typer.testing import CliRunner

from fleetcount.cli import lattices
from fleetcount.errors import InputError, SeriesError
from fleetcount.lattice import catalogue
from fleetcount.lattice.model import Lattice
from fleetcount.lattice.symmetry import all_alike, group
from fleetcount.methods.direct import gallery, twin
from fleetcount.methods.direct.gallery import GREATEST_LENGTH, MOST_DRAWN, picture, specimens
from fleetcount.methods.direct.keys import Prefix
from fleetcount.methods.direct.rooting import ways
from fleetcount.series.defining import define
from fleetcount.series.definition import Series
from fleetcount.series.objects import OBJECTS
from fleetcount.trust.matching import for_series
from tests.strategies import small_lattices

SVG = "{http://www.w3.org/2000/svg}"

app = typer.Typer(rich_markup_mode=None)
lattices.register(app)


@app.callback()
def main() -> None:
    """An app with this command alone."""


def run(*arguments: str) -> str:
    result = CliRunner(env={"COLUMNS": "80"}).invoke(app, ["lattices", *arguments])
    if result.exception:
        raise result.exception
    return result.stdout


def total(series: Series, length: int) -> int:
    return sum(one.number for one in specimens(series, length))


@pytest.mark.parametrize(
    ("name", "kind", "length"),
    [
        ("square", "walk", 5),
        ("square", "polygon", 8),
        ("square", "polygon", 14),
        ("square", "trail", 5),
        ("square", "trapped", 7),
        ("square", "neighbour-avoiding", 6),
        ("square", "bridge", 6),
        ("triangular", "walk", 4),
        ("triangular", "polygon", 7),
        ("honeycomb", "walk", 9),
        ("honeycomb", "polygon", 14),
        ("king", "walk", 3),
        ("manhattan", "walk", 8),
        ("manhattan", "trail", 8),
        ("manhattan", "polygon", 12),
        ("ladder", "walk", 7),
    ],
)
def test_numbers_of_images_add_up_to_the_published_count(name: str, kind: str, length: int) -> None:
    """All images together are as many as the published tables say (sources: the data files)."""
    series = define(catalogue.find(name), kind)
    published = next(terms for terms in for_series(series) if terms.column == 0)
    assert total(series, length) == published.terms[length,] > 0


def test_known_classes() -> None:
    """Square: the 28 walks of 3 steps without a corner back and the 8 around a face, and the polyominoes of 8 edges.

    Counted by hand: straight, one turn early or late, two turns the same or the other way. Of the seven polygons of
    length 8 one is the square of side 2, two are straight and four bent.
    """
    square = catalogue.find("square")
    walks = specimens(define(square, "walk"), 3)
    assert sorted(one.number for one in walks) == [4, 8, 8, 8, 8]
    polygons = specimens(define(square, "polygon"), 8)
    assert sorted(one.number for one in polygons) == [1, 2, 4]


def test_closed_trails_by_hand() -> None:
    """Square, 8 edges: the seven polygons, and two faces that meet in a corner, in two places, crossing or touching."""
    found = specimens(define(catalogue.find("square"), "closed-trail"), 8)
    assert sorted(one.number for one in found) == [1, 2, 2, 2, 4]


def test_each_kind_of_start_site_has_its_walks() -> None:
    """Where sites are not alike the sum over a cell is shown, or the walks from the site that is named."""
    dice = catalogue.find("dice")
    kinds = specimens(define(dice, "walk"), 1)
    assert [(len(one.images), one.times) for one in kinds] == [(6, 1), (3, 2)]
    assert total(define(dice, "walk", "hub"), 1) == 6
    assert total(define(dice, "walk", "rim1"), 1) == 3


def _expected(series: Series, length: int) -> int:
    """The term by the plain definition, without any symmetry."""
    sites = [series.start] if series.start is not None else range(len(series.lattice.sites))
    walks = sum(twin.whole(series, Prefix(site, False, ()), length).counts().get(length, 0) for site in sites)
    if not series.rule.closed:
        return walks
    assert walks % ways(series, length) == 0
    return walks // ways(series, length)


@settings(max_examples=25, deadline=None)
@given(small_lattices(), st.sampled_from(sorted(OBJECTS)), st.integers(2, 4))
def test_numbers_add_up_on_any_lattice(lattice: Lattice, kind: str, length: int) -> None:
    """On random lattices the images of all classes are disjoint and together are the count, for every object."""
    directed = kind == "bridge" and not all_alike(lattice)
    series = define(lattice, kind, lattice.sites[0].name if directed else None)
    if length < series.rule.least_length(lattice):
        return
    found = specimens(series, length)
    assert sum(one.number for one in found) == _expected(series, length)
    paths = [path for one in found for path in one.images]
    assert len(set(paths)) == len(paths)
    if series.rule.closed:
        assert all(len(group(lattice)) % len(one.images) == 0 for one in found)


@pytest.mark.parametrize(
    ("name", "kind", "length", "figures"),
    [
        ("square", "walk", 5, 36),
        ("square", "walk", 0, 1),
        ("kagome", "polygon", 6, 1),
        ("square", "walk", 7, 60),
    ],
)
def test_the_sheet_has_a_figure_for_each_class(name: str, kind: str, length: int, figures: int) -> None:
    """The SVG parses and has one figure a class, at most the first sixty, each with its number below."""
    series = define(catalogue.find(name), kind)
    text, line = picture(series, length)
    drawn = [g for g in ElementTree.fromstring(text).iter(f"{SVG}g") if g.get("class") == "figure"]
    found = specimens(series, length)
    assert len(drawn) == figures == min(len(found), MOST_DRAWN)
    captions = [g.findtext(f"{SVG}text") for g in drawn]
    assert captions == [one.caption() for one in found[:MOST_DRAWN]]
    assert f"{sum(one.number for one in found)} in all, {len(found)} inequivalent" in line
    assert ("the first 60 drawn" in line) == (len(found) > MOST_DRAWN)


def test_a_figure_has_its_steps() -> None:
    """A walk is drawn with its start and a bend at each site between its ends; a polygon closes, with one at each."""
    for kind, length, bends, starts in (("walk", 4, 3, 1), ("polygon", 8, 8, 0)):
        text, _ = picture(define(catalogue.find("square"), kind), length)
        figures = [g for g in ElementTree.fromstring(text).iter(f"{SVG}g") if g.get("class") == "figure"]
        for figure in figures:
            (path,) = (p.get("d", "") for p in figure.iter(f"{SVG}path") if p.get("class") == "path")
            assert path.count("Q") == bends
            assert path.endswith("Z") == (kind == "polygon")
            assert len(list(figure.iter(f"{SVG}circle"))) == starts


@settings(max_examples=15, deadline=None)
@given(small_lattices())
def test_any_lattice_of_two_dimensions_has_a_sheet(lattice: Lattice) -> None:
    """On random lattices, however crooked, every figure lies on the sheet."""
    if lattice.dimension > 2:
        with pytest.raises(InputError, match="no picture in 3 dimensions"):
            picture(define(lattice, "walk"), 2)
        return
    text, _ = picture(define(lattice, "walk"), 2)
    sheet = ElementTree.fromstring(text)
    width, height = float(sheet.get("width", 0)), float(sheet.get("height", 0))
    for figure in sheet.iter(f"{SVG}g"):
        x, y = map(float, figure.get("transform", "").removeprefix("translate(").rstrip(")").split())
        assert 0 < x < width and 0 < y < height


def test_command(tmp_path: Path) -> None:
    """The command draws and sums up, for a built-in lattice and for the user's own file; JSON stays one document."""
    path = tmp_path / "walks.svg"
    out = run("square", "--object", "walk", "--length", "5", "--picture", str(path))
    assert f"square walk, length 5: 284 in all, 36 inequivalent\ndrawn into {path}" in out
    own = tmp_path / "own.toml"
    own.write_text(
        'name = "mine"\ndimension = 2\nmetric = [[1, 0], [0, 4]]\n[[sites]]\nname = "o"\nat = [0, 0]\n'
        '[[edges]]\nfrom = "o"\nto = "o"\ncell = [1, 0]\n[[edges]]\nfrom = "o"\nto = "o"\ncell = [0, 1]\n'
    )
    drawn = run(str(own), "--object", "polygon", "--length", "8", "--picture", str(path))
    assert "mine polygon, length 8: 7 in all, 4 inequivalent" in drawn
    assert "dice walk from hub, length 1: 6 in all" in run(
        "dice", "--object", "walk", "--length", "1", "--start", "hub", "--picture", str(path)
    )
    json.loads(run("square", "--object", "walk", "--length", "2", "--picture", str(path), "--json"))


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["square", "--object", "walk", "--length", "5"], "add --picture"),
        (["square", "--length", "5", "--picture", "x.svg"], "give --object and --length together"),
        (["square", "--object", "walk", "--picture", "x.svg"], "give --object and --length together"),
        (["square", "--start", "a", "--picture", "x.svg"], "give --object and --length together"),
        (["--object", "walk", "--length", "5", "--picture", "x.svg"], "give a name"),
        (["square", "--object", "walk", "--length", "5", "--picture", "x.png"], "ending in .svg"),
        (["square", "--object", "wlak", "--length", "5", "--picture", "x.svg"], "did you mean walk"),
        (["cubic", "--object", "walk", "--length", "3", "--picture", "x.svg"], "no picture in 3 dimensions"),
        (["square", "--object", "walk", "--length", "-1", "--picture", "x.svg"], "give a number from 0"),
        (
            ["square", "--object", "walk", "--length", str(10**30), "--picture", "x.svg"],
            f"to {GREATEST_LENGTH}",
        ),
        (["square", "--object", "polygon", "--length", "2", "--picture", "x.svg"], "give a number from 3"),
        (["square", "--object", "polygon", "--length", "5", "--picture", "x.svg"], "no polygon of length 5"),
        (["square", "--object", "walk", "--length", "30", "--picture", "x.svg"], "give a smaller --length"),
        (["dice", "--object", "bridge", "--length", "3", "--picture", "x.svg"], "--start one of"),
        (
            ["square", "--object", "polygon", "--length", "4", "--start", "a", "--picture", "x.svg"],
            "no start",
        ),
        (["square", "--object", "walk", "--length", "1", "--picture", "/nowhere/x.svg"], "cannot be written"),
    ],
)
def test_bad_input(
    arguments: list[str], message: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Bad input raises the error that the program prints as one line, and nothing is drawn."""
    monkeypatch.chdir(tmp_path)
    monkeypatch.setattr(gallery, "MOST_POINTS", 5000)
    with pytest.raises((InputError, SeriesError)) as caught:
        run(*arguments)
    assert message in str(caught.value) and "\n" not in str(caught.value)
    assert not list(tmp_path.iterdir())
