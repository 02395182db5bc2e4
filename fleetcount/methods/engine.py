"""Which code counted: a digest over the sources that a tally depends on, and the versions beside it."""

from __future__ import annotations

import hashlib
import platform
from functools import cache
from importlib.metadata import version
from pathlib import Path

PACKAGE = Path(__file__).resolve().parents[1]

_ROOMS = ("lattice", "series")


@cache
def engine_digest(method: str) -> str:
    """SHA-256 over the sources of lattice/, series/ and one method, as 64 hexadecimal digits."""
    folders = [PACKAGE / room for room in _ROOMS] + [PACKAGE / "methods" / method]
    files = [path for folder in folders for path in folder.rglob("*") if path.suffix in (".py", ".toml")]
    files += [PACKAGE / "methods" / "compiled.py"]
    total = hashlib.sha256()
    for path in sorted(files):
        total.update(path.relative_to(PACKAGE).as_posix().encode() + b"\0")
        total.update(hashlib.sha256(path.read_bytes()).digest())
    return total.hexdigest()


@cache
def versions() -> dict[str, str]:
    """Versions that may differ between machines and are recorded with each tally."""
    libraries = {name: version(name) for name in ("numba", "llvmlite", "numpy")}
    return {"python": platform.python_version(), **libraries}
