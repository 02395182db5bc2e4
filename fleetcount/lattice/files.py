"""Reading a file from the user: to text, and from text to a TOML document, with errors that name the place."""

from __future__ import annotations

import re
import tomllib
from pathlib import Path
from typing import Any

from fleetcount.errors import InputError, LatticeError

GREATEST_FILE = 8_000_000
"""Bytes; the largest cell that the checks accept fits in about half of it."""


def read_text(path: Path, noun: str) -> str:
    """The text of a file.

    Args:
        noun: what kind of file is wanted, for errors: "lattice" or "series".

    Raises:
        InputError: it cannot be read, or is no text.
    """
    mend = f"give the path of a {noun} definition in TOML"
    try:
        if path.is_dir():
            raise InputError(f"is a folder, not a {noun} file", where=str(path), mend=mend)
        if not path.exists():
            raise InputError(f"no such {noun} file", where=str(path), mend=mend)
        if not path.is_file() or path.stat().st_size > GREATEST_FILE:
            what = f"is no plain file of at most {GREATEST_FILE // 1_000_000} MB"
            raise InputError(what, where=str(path), mend=mend)
        return path.read_bytes().decode("utf-8")
    except UnicodeDecodeError:
        raise LatticeError("is not text in UTF-8", where=str(path), mend=mend) from None
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise InputError(f"cannot be read: {reason}", where=repr(str(path)), mend=mend) from None


def document(text: str, source: str) -> dict[str, Any]:
    """The TOML document of a text; `source` names it in errors.

    Raises:
        LatticeError: it is broken, with the line.
    """
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        found = re.search(r"^(.*) \(at (line \d+, column \d+|end of document)\)$", str(error), re.DOTALL)
        what, place = found.groups() if found else (str(error), "")
        if place == "end of document":
            place = f"line {text.count(chr(10)) + 1}"
        where = f"{source}, {place}" if place else source
        raise LatticeError(f"broken TOML: {what}", where=where, mend="correct the file there") from None
    except (RecursionError, ValueError):
        mend = "write a plain definition with small numbers"
        raise LatticeError("nested too deeply, or a number too long", where=source, mend=mend) from None
