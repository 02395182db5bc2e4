"""The documentation does what it says: its examples are run."""

from __future__ import annotations

import re
import subprocess
import sys
from pathlib import Path

import pytest
import typer

from fleetcount.cli.main import answer, build
from fleetcount.series import moments, statistics
from fleetcount.series.objects import OBJECTS
from fleetcount.series.region import SHORTHANDS

ROOT = Path(__file__).resolve().parents[1]
README = (ROOT / "README.md").read_text(encoding="utf-8")
BLOCKS = re.findall(r"^```(\w+)\n(.*?)^```", README, flags=re.MULTILINE | re.DOTALL)


def _blocks(language: str) -> list[str]:
    return [body for kind, body in BLOCKS if kind == language]


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """An empty folder with the lattice file and the series file that the README shows."""
    place = tmp_path_factory.mktemp("readme")
    for name, text in zip(("adsorbed.toml", "my-lattice.toml"), _blocks("toml"), strict=True):
        assert f"`{name}`" in README
        (place / name).write_text(text, encoding="utf-8")
    return place


def test_the_console_examples_run_in_their_order(
    folder: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    """Each command line of the README ends with exit status 0 in an empty folder, and prints what is shown of it."""
    monkeypatch.chdir(folder)
    monkeypatch.delenv("FLEETCOUNT_LEDGER", raising=False)
    polynomials = next(body for body in _blocks("text") if body.startswith("#"))
    lines = [line[2:] for body in _blocks("console") for line in body.splitlines() if line.startswith("$ ")]
    assert len(lines) >= 12
    for line in lines:
        words = line.split()
        assert words[0] == "fleetcount"
        status, said = answer(build(), words[1:]), capsys.readouterr()
        assert status == 0, (line, said.err)
        assert said.out.strip(), line
        if "--polynomials" in words:
            assert said.out.startswith(polynomials)


def test_the_lattice_example_is_the_honeycomb(folder: Path) -> None:
    """The brick wall of the README has the walks of the honeycomb lattice (OEIS A001668 to n=12)."""
    from fleetcount import count

    table = count(folder / "my-lattice.toml", "walk", to=12)
    assert list(table.counts().values()) == [1, 3, 6, 12, 24, 48, 90, 174, 336, 648, 1218, 2328, 4416]


def test_the_python_example_prints_what_it_says(folder: Path) -> None:
    """The Python example runs as a plain script and prints what its comments say, but for those that break off."""
    (script,) = _blocks("python")
    done = subprocess.run(
        [sys.executable, "-c", script], cwd=folder, capture_output=True, text=True, timeout=120, check=True
    )
    said = re.findall(r"^print\(.*?\) +# (.*)$", script, flags=re.MULTILINE)
    printed = done.stdout.splitlines()
    assert len(said) == len(printed) >= 6
    for promise, line in zip(said, printed, strict=True):
        if "..." not in promise:
            assert line == promise.partition(", all ")[0]


def test_objects_statistics_moments_and_regions_are_in_the_readme() -> None:
    """Whatever can be counted is named in the README."""
    named = [*OBJECTS, *statistics.MEANINGS, *moments.MEANINGS, *re.findall(r"[a-z]+", SHORTHANDS)]
    for name in named:
        assert re.search(rf"`{name}[`:]", README), name


def test_every_command_is_in_the_readme() -> None:
    """No command is without a word in the README and a help text."""
    program = typer.main.get_command(build())
    for name, command in program.commands.items():  # type: ignore[attr-defined]
        assert f"fleetcount {name}" in README, name
        assert command.help, name


def test_every_option_of_count_is_in_the_readme() -> None:
    """The table of options in the README is complete."""
    program = typer.main.get_command(build())
    for option in program.commands["count"].params:  # type: ignore[attr-defined]
        if option.param_type_name == "option" and option.name != "help":
            assert option.opts[0] in README, option.opts


def test_the_readme_opens_with_the_job_and_two_lines() -> None:
    """The README begins with a paragraph and the two lines that run the main job and the tests."""
    first = README.split("\n\n")[1]
    assert first.startswith("fleetcount counts") and "```" not in first
    lines = [body.strip() for body in _blocks("sh")]
    assert len(lines) == 2 and all("\n" not in line for line in lines)
    assert "fleetcount count square walk --to 22" in lines[0] and "pytest" in lines[1]
