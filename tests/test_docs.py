"""The documentation does what it says: its examples are run."""

from __future__ import annotations

import re
import subprocess
import sys
from pathlib import Path

import pytest
import typer

from fleetcount.cli.main import build

ROOT = Path(__file__).resolve().parents[1]
README = (ROOT / "README.md").read_text(encoding="utf-8")
BLOCKS = re.findall(r"^```(\w+)\n(.*?)^```", README, flags=re.MULTILINE | re.DOTALL)


def _blocks(language: str) -> list[str]:
    return [body for kind, body in BLOCKS if kind == language]


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """An empty folder with the lattice file that the README shows."""
    place = tmp_path_factory.mktemp("readme")
    (lattice,) = _blocks("toml")
    (place / "my-lattice.toml").write_text(lattice, encoding="utf-8")
    return place


def test_the_console_examples_run_in_their_order(folder: Path) -> None:
    """Each command line of the README ends with exit status 0 in an empty folder."""
    lines = [line[2:] for body in _blocks("console") for line in body.splitlines() if line.startswith("$ ")]
    assert len(lines) >= 8
    for line in lines:
        words = line.split()
        assert words[0] == "fleetcount"
        command = [sys.executable, "-c", "from fleetcount.cli.main import run; run()", *words[1:]]
        done = subprocess.run(command, cwd=folder, capture_output=True, text=True, timeout=120, check=False)
        assert done.returncode == 0, (line, done.stderr)
        assert done.stdout.strip(), line


def test_the_lattice_example_is_the_honeycomb(folder: Path) -> None:
    """The brick wall of the README has the walks of the honeycomb lattice (OEIS A001668 to n=12)."""
    from fleetcount import count

    table = count(folder / "my-lattice.toml", "walk", to=12)
    assert list(table.counts().values()) == [1, 3, 6, 12, 24, 48, 90, 174, 336, 648, 1218, 2328, 4416]


def test_the_python_example_prints_what_it_says(folder: Path) -> None:
    """The Python example runs as a plain script and prints the number in its comment."""
    (script,) = _blocks("python")
    said = re.search(r"print\(table\[16\]\)\s+# (\d+)", script)
    assert said is not None
    command = [sys.executable, "-c", script]
    done = subprocess.run(command, cwd=folder, capture_output=True, text=True, timeout=120, check=True)
    assert done.stdout.splitlines()[0] == said.group(1)


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
