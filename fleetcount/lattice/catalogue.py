"""The built-in lattices by name, and a user's own by the path of a file."""

from __future__ import annotations

import difflib
import os
from functools import lru_cache
from pathlib import Path

from fleetcount.errors import InputError
from fleetcount.lattice import definition
from fleetcount.lattice.model import Lattice

_FOLDER = Path(__file__).parent / "catalog"

_OTHER_NAMES = {"hexagonal": ("honeycomb", "triangular"), "sc": ("cubic",)}
"""Names that people try and that stand for no lattice here, or for more than one."""


@lru_cache(maxsize=1)
def names() -> tuple[str, ...]:
    """The names of the built-in lattices, sorted."""
    return tuple(sorted(path.name.removesuffix(".toml") for path in _FOLDER.glob("*.toml")))


def find(name_or_path: str | os.PathLike[str]) -> Lattice:
    """The built-in lattice of that name, or the one in a file.

    Anything with a path separator in it, or ending in `.toml`, is a path.

    Raises:
        InputError: no such lattice or file.
        LatticeError: the file is not a valid definition.
    """
    text = os.fspath(name_or_path)
    if isinstance(name_or_path, os.PathLike) or text.endswith(".toml") or "/" in text or os.sep in text:
        return definition.load(text)
    if text not in names():
        near = _OTHER_NAMES.get(text.lower()) or difflib.get_close_matches(text.lower(), names(), 3, 0.5)
        mend = f"did you mean {' or '.join(near)}?" if near else f"known are {', '.join(names())}"
        if len(text) <= 60 and Path(text + ".toml").is_file():
            mend = f"for the file write ./{text}.toml"
        raise InputError(f"no lattice called {text[:60]!r}", mend=mend)
    return _built_in(text)


@lru_cache(maxsize=64)
def _built_in(name: str) -> Lattice:
    return definition.parse((_FOLDER / f"{name}.toml").read_text(encoding="utf-8"), f"{name}.toml")
