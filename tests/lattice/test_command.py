"""The command `lattices`: lists, shows and draws; errors are one line."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest
import typer
from typer.testing import CliRunner

from fleetcount.cli import lattices
from fleetcount.errors import InputError
from fleetcount.lattice import catalogue

app = typer.Typer(rich_markup_mode=None)
lattices.register(app)


@app.callback()
def main() -> None:
    """An app with this command alone."""


def run(*arguments: str, columns: int = 80) -> str:
    result = CliRunner(env={"COLUMNS": str(columns)}).invoke(app, ["lattices", *arguments])
    if result.exception:
        raise result.exception
    assert result.exit_code == 0
    return result.stdout


def test_list() -> None:
    """The list has a row for each lattice: dimension, sites, coordination, one-way or not, symmetries."""
    rows = [line.split("  ") for line in run().splitlines()]
    table = {row[0]: [cell.strip() for cell in row[1:] if cell.strip()] for row in rows}
    assert set(table) == {"name", *catalogue.names()}
    assert table["dice"] == ["2", "3", "3, 6", "no", "12"]
    assert table["manhattan"] == ["2", "4", "2", "yes", "8"]
    assert table["hypercubic5"] == ["5", "1", "10", "no", "3840"]


def test_list_as_json() -> None:
    """The list as JSON is one document with the same facts."""
    document: dict[str, Any] = json.loads(run("--json"))
    assert document["format"] == 1
    by_name = {entry["name"]: entry for entry in document["lattices"]}
    assert by_name["honeycomb"] == {
        "name": "honeycomb",
        "title": "honeycomb lattice",
        "dimension": 2,
        "periods": 2,
        "sites_a_cell": 2,
        "coordination": [3],
        "one_way": False,
        "symmetries": 12,
    }


def test_the_list_needs_no_numpy() -> None:
    """Listing all lattices loads no heavy package, so it answers at once."""
    code = (
        "import sys, typer\nfrom fleetcount.cli import lattices\n"
        "app = typer.Typer(rich_markup_mode=None)\nlattices.register(app)\n"
        "app([], standalone_mode=False)\n"
        "assert not {'numpy', 'numba', 'dask', 'sqlalchemy'} & set(sys.modules), 'heavy'\n"
    )
    subprocess.run([sys.executable, "-c", code], check=True, stdout=subprocess.DEVNULL, timeout=60)


@pytest.mark.parametrize("name", catalogue.names())
@pytest.mark.parametrize("columns", [40, 80])
def test_show(name: str, columns: int) -> None:
    """Each lattice shows title, sites, arms with numbers and symmetries, also on a narrow terminal."""
    lattice = catalogue.find(name)
    text = run(name, columns=columns)
    flat = " ".join(text.split())
    assert f"{name}: {lattice.title}" in flat
    for number, site in enumerate(lattice.sites):
        assert f"site {number}, {site.name}, at " in flat
        for arm in range(len(lattice.arms[number])):
            assert f" {arm}: " in flat
    assert "fix site" in flat and ("all sites alike" in flat or "kinds of sites: hub; rim1, rim2" in flat)
    assert ("@" in text) == (lattice.dimension <= 2)
    assert max(map(len, text.splitlines())) <= columns


def test_narrow_list() -> None:
    """On forty columns the list still fits."""
    lines = run(columns=40).splitlines()
    assert max(map(len, lines)) <= 40
    assert "hypercubic5" in lines


def test_show_as_json() -> None:
    """One lattice as JSON has sites and arms in the order of their numbers, and exact numbers as text."""
    lattice = json.loads(run("honeycomb", "--json"))["lattice"]
    assert lattice["metric"] == [["3", "3/2"], ["3/2", "3"]]
    assert lattice["sites"][1] == {
        "name": "b",
        "at": ["1/3", "1/3"],
        "arms": [{"to": "a", "cell": [0, 0]}, {"to": "a", "cell": [0, 1]}, {"to": "a", "cell": [1, 0]}],
    }
    assert lattice["alike"] == [["a", "b"]]


def test_a_file_of_ones_own_shows_its_warnings(tmp_path: Path) -> None:
    """A user's file works in place of a name, and a cell that is not primitive is said to be so."""
    path = tmp_path / "two.toml"
    text = 'name = "two"\ndimension = 1\nmetric = [[4]]\n'
    text += '[[sites]]\nname = "a"\nat = [0]\n[[sites]]\nname = "b"\nat = ["1/2"]\n'
    text += '[[edges]]\nfrom = "a"\nto = "b"\ncell = [0]\n[[edges]]\nfrom = "b"\nto = "a"\ncell = [1]\n'
    path.write_text(text)
    assert "not primitive" in run(str(path))


def test_picture(tmp_path: Path) -> None:
    """--picture writes an SVG and says so; with --json nothing but the document is printed."""
    path = tmp_path / "kagome.svg"
    assert f"drawn into {path}" in run("kagome", "--picture", str(path))
    assert path.read_text().startswith("<svg ")
    path.unlink()
    json.loads(run("kagome", "--picture", str(path), "--json"))
    assert path.exists()


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["squar"], "did you mean square"),
        (["--picture", "x.svg"], "give a name"),
        (["square", "--picture", "x.png"], "ending in .svg"),
        (["hypercubic4", "--picture", "x.svg"], "no picture in 4 dimensions"),
        (["square", "--picture", "/nowhere/at/all/x.svg"], "cannot be written"),
        (["./none.toml"], "no such lattice file"),
    ],
)
def test_bad_input(arguments: list[str], message: str) -> None:
    """Bad input raises the error that the program prints as one line, and nothing is drawn."""
    with pytest.raises(InputError) as caught:
        run(*arguments)
    assert message in str(caught.value) and "\n" not in str(caught.value)
    assert not Path("x.svg").exists() and not Path("x.png").exists()
