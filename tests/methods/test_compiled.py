"""The cache of compiled kernels: never stale, filled by one process at a time, and plain about its troubles."""

from __future__ import annotations

import json
import os
import shutil
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest

import fleetcount
from fleetcount.errors import FleetcountError
from fleetcount.lattice import catalogue
from fleetcount.methods import compiled
from fleetcount.methods.direct.ground import WIDTHS, kernel_of
from fleetcount.series.defining import define

COUNT = """
import json
from fleetcount.lattice import catalogue
from fleetcount.methods import compiled
from fleetcount.methods.direct.method import DirectMethod, Endless
from fleetcount.series.defining import define

series = define(catalogue.find("ladder"), "polygon")
counts = DirectMethod().count(series, range(9), "0:", Endless()).explored.counts()
kernel, = compiled._ready.values()
loaded = sum(kernel.stats.cache_hits.values())
print(json.dumps({"counts": counts, "folder": str(compiled.folder("direct")), "loaded": loaded}))
"""

FOLDER = "from fleetcount.methods import compiled; print(compiled.folder('direct'))"

LADDER = {"4": 4, "6": 6, "8": 8}
"""Closed walks: a polygon of length n has n / 2 sites in the leg of the start, and can be run through in two senses."""


def start(package: Path, cache: Path, program: str) -> subprocess.Popen[str]:
    """A new process that imports the package from a folder of its own."""
    settings = {"FLEETCOUNT_CACHE": str(cache), "PYTHONPATH": str(package), "PYTHONDONTWRITEBYTECODE": "1"}
    return subprocess.Popen(
        [sys.executable, "-c", program],
        env={**os.environ, **settings},
        cwd=package,
        text=True,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
    )


def answer(process: subprocess.Popen[str]) -> str:
    out, err = process.communicate(timeout=120)
    assert process.returncode == 0, err
    return out.strip()


def count(package: Path, cache: Path) -> dict[str, Any]:
    found: dict[str, Any] = json.loads(answer(start(package, cache, COUNT)))
    return found


@pytest.fixture
def package(tmp_path: Path) -> Path:
    """A folder with a copy of the package in it."""
    source = Path(fleetcount.__file__).parent
    ignored = shutil.ignore_patterns("__pycache__")
    shutil.copytree(source, tmp_path / "copy" / "fleetcount", ignore=ignored)
    return tmp_path / "copy"


def edit(path: Path, old: str, new: str) -> None:
    """Change a file such that neither its size nor its times tell."""
    text, times = path.read_text(encoding="utf-8"), path.stat()
    assert text.count(old) == 1 and len(old) == len(new)
    path.write_text(text.replace(old, new), encoding="utf-8")
    os.utime(path, ns=(times.st_atime_ns, times.st_mtime_ns))


def test_an_edited_kernel_is_seen_by_the_next_process(package: Path, tmp_path: Path) -> None:
    """After an edit that file times and sizes do not show, the next process runs the new code, not the machine
    code kept of the old; and the old is loaded again when the edit is taken back."""
    kernels, cache = package / "fleetcount" / "methods" / "direct" / "kernels.py", tmp_path / "cache"
    old, new = "sums[top] += factor * two", "sums[top] += factor * top"
    first = count(package, cache)
    edit(kernels, old, new)
    second = count(package, cache)
    edit(kernels, new, old)
    third = count(package, cache)
    assert (first["counts"], third["counts"]) == (LADDER, LADDER)
    assert second["counts"] != LADDER
    assert second["folder"] != first["folder"] == third["folder"]
    assert [found["loaded"] for found in (first, second, third)] == [0, 0, 1]


def test_an_edit_in_any_room_below_names_another_folder(package: Path, tmp_path: Path) -> None:
    """Machine code is not shared between versions of lattice/, series/ or the method; other rooms do not matter."""
    folders = []
    for name in ("cli/main.py", "lattice/keys.py", "series/tally.py", "methods/direct/ground.py"):
        with (package / "fleetcount" / name).open("a", encoding="utf-8") as file:
            file.write("# edited\n")
        folders.append(answer(start(package, tmp_path, FOLDER)))
    (package / "fleetcount" / "lattice" / "catalog" / "square.toml").unlink()
    folders.append(answer(start(package, tmp_path, FOLDER)))
    assert len(set(folders)) == 5
    original = answer(start(Path(fleetcount.__file__).parents[1], tmp_path, FOLDER))
    assert original == folders[0]


def test_two_processes_fill_the_cache_at_once(tmp_path: Path) -> None:
    """Started together on an empty cache both count right; one compiles, the other waits and loads."""
    package = Path(fleetcount.__file__).parents[1]
    processes = [start(package, tmp_path / "cache", COUNT) for _ in range(2)]
    found = [json.loads(answer(process)) for process in processes]
    assert [f["counts"] for f in found] == [LADDER, LADDER]
    assert sorted(f["loaded"] for f in found) == [0, 1]
    folder = Path(found[0]["folder"])
    assert [path.name for path in folder.glob("*.ready")] == ["polygon.3.ready"]


def test_a_cache_that_cannot_be_written(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """An unusable cache folder is one line that names it and says what to set."""
    (tmp_path / "kernels").write_text("in the way", encoding="utf-8")
    monkeypatch.setenv("FLEETCOUNT_CACHE", str(tmp_path))

    def never(*_: object) -> Any:
        raise AssertionError("made all the same")

    with pytest.raises(FleetcountError, match="set FLEETCOUNT_CACHE") as error:
        compiled.kernel("direct", "none", never, (99,), never)
    assert str(tmp_path) in str(error.value)
    assert "\n" not in str(error.value)


def test_few_kernels_serve_all_lattices() -> None:
    """All series on the built-in lattices together need no more than 24 kernels, none of them padded."""
    kernels = set()
    for name in catalogue.names():
        lattice = catalogue.find(name)
        for kind in ("walk", "polygon"):
            kernels.add(kernel_of(define(lattice, kind)))
            assert kernel_of(define(lattice, kind))[1][0] == max(map(len, (*lattice.arms, *lattice.arms_in)))
    assert len(kernels) <= 24
    assert {traits[0] for _, traits in kernels} <= set(WIDTHS)
