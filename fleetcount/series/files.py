"""A series as its user writes it: by options or in a TOML file. Both go through here, so both mean the same series."""

from __future__ import annotations

import json
import os
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from fleetcount.errors import InputError, LatticeError, SeriesError
from fleetcount.lattice import catalogue, files
from fleetcount.lattice.entries import Entry, short
from fleetcount.lattice.model import Lattice
from fleetcount.series import lengths
from fleetcount.series.defining import define
from fleetcount.series.definition import Series
from fleetcount.series.forms import GREATEST, check_vector
from fleetcount.series.objects import OBJECTS
from fleetcount.series.region import Wall, wall

METHODS = ("direct",)
_KEYS = frozenset(("lattice", "object", "to", "by", "moment", "region", "walls", "start", "end", "method"))
_WALL_KEYS = frozenset(("form", "least"))
_FARTHEST = 10**9


@dataclass(frozen=True)
class WrittenWall:
    """`form >= least` on cell coordinates."""

    form: tuple[int, ...]
    least: int


@dataclass(frozen=True)
class WrittenSeries:
    """A definition in its user's words, not yet checked against the lattice.

    Attributes:
        lattice: a name from the catalogue, or the path of a lattice file as seen from the current folder.
        to: greatest length; no part of the series' identity.
        by, moment: names of statistics and moments.
        region: a shorthand for walls; `walls` are added to it.
        source: the file it comes from, for errors; empty for a command line.
    """

    lattice: str
    object: str
    to: int | None = None
    by: tuple[str, ...] = ()
    moment: tuple[str, ...] = ()
    region: str | None = None
    walls: tuple[WrittenWall, ...] = ()
    start: str | None = None
    end: str | None = None
    method: str = METHODS[0]
    source: str = ""

    def series(self, lattice: Lattice | None = None) -> Series:
        """The series it defines.

        Args:
            lattice: where it has been read already.

        Raises:
            InputError: no such lattice; a definition that makes no sense, with the file it stands in.
        """
        found = lattice or catalogue.find(self.lattice)
        try:
            return define(
                found,
                self.object,
                self.start,
                end=self.end,
                by=self.by,
                moment=self.moment,
                region_name=self.region,
                walls=[_wall(found, one, i + 1) for i, one in enumerate(self.walls)],
            )
        except SeriesError as error:
            where = ", ".join(part for part in (self.source, error.where) if part)
            raise SeriesError(error.what, where=where, mend=error.mend) from None


def _wall(lattice: Lattice, one: WrittenWall, number: int) -> Wall:
    return wall(lattice, check_vector(one.form, lattice, f"[[walls]] {number}, form"), one.least)


def asked(
    lattice: str | os.PathLike[str],
    object_name: str | None,
    to: int | None,
    *,
    start: str | None = None,
    end: str | None = None,
    by: Sequence[str] | None = None,
    moment: Sequence[str] | None = None,
    region: str | None = None,
) -> WrittenSeries:
    """The definition that options give, or, without an object, the series file that stands in the lattice's place.

    Raises:
        InputError: options beside a file; a file that is none.
    """
    place = os.fspath(lattice)
    if object_name is not None:
        if isinstance(lattice, os.PathLike) and not _is_path(place):
            place = f"{os.curdir}/{place}"
        return WrittenSeries(
            place, object_name, to, tuple(by or ()), tuple(moment or ()), region, (), start, end
        )
    if not is_file(place):
        mend = f"give an OBJECT: {', '.join(OBJECTS)}"
        raise InputError(f"{place[:60]!r} alone is no series", where="OBJECT", mend=mend)
    given = {"--start": start, "--end": end, "--by": by, "--moment": moment, "--region": region}
    twice = [option for option, value in given.items() if value not in (None, [], ())]
    if twice:
        mend = "write it into the file, or give an OBJECT"
        raise InputError(f"{' and '.join(twice)} beside a series file", where=place, mend=mend)
    found = load(place)
    return found if to is None else replace(found, to=to)


def is_file(text: str) -> bool:
    """Whether a text that stands where a lattice could is rather meant as a series file."""
    return text.endswith(".toml")


def load(path: str | os.PathLike[str]) -> WrittenSeries:
    """The definition in a series file.

    Raises:
        InputError: it cannot be read, or is no series file; with file, entry and mend.
    """
    place = Path(path)
    try:
        return _parse(files.document(files.read_text(place, "series"), str(place)), place)
    except LatticeError as error:
        raise SeriesError(error.what, where=error.where, mend=error.mend) from None


def _parse(document: dict[str, Any], path: Path) -> WrittenSeries:
    top = Entry(str(path), "", document)
    if top.has("sites"):
        raise top.error("this is a lattice, not a series", "say what to count on it: give an OBJECT")
    top.only(_KEYS)
    return WrittenSeries(
        lattice=_from(path.parent, _text(top.sub("lattice"))),
        object=_text(top.sub("object")),
        to=top.integer("to", 0, lengths.GREATEST) if top.has("to") else None,
        by=_texts(top, "by"),
        moment=_texts(top, "moment"),
        region=_text(top.sub("region")) if top.has("region") else None,
        walls=tuple(_written_wall(entry) for entry in top.tables("walls")),
        start=_text(top.sub("start")) if top.has("start") else None,
        end=_text(top.sub("end")) if top.has("end") else None,
        method=top.choice("method", METHODS, METHODS[0]),
        source=str(path),
    )


def _written_wall(entry: Entry) -> WrittenWall:
    entry.only(_WALL_KEYS)
    form = entry.sub("form")
    size = len(form.value) if isinstance(form.value, list) else 2
    numbers = form.integers(size, GREATEST, "one for each coordinate")
    return WrittenWall(numbers, entry.integer("least", -_FARTHEST, _FARTHEST))


def _text(entry: Entry) -> str:
    value = entry.value
    if not isinstance(value, str) or not value or not value.isprintable():
        raise entry.error(f"{short(value)} is not a line of text", 'write text in quotes, such as "square"')
    return value


def _texts(top: Entry, key: str) -> tuple[str, ...]:
    """The texts of a list, or one text for a list of one."""
    if not top.has(key):
        return ()
    entry = top.sub(key)
    if isinstance(entry.value, str):
        return (_text(entry),)
    if not isinstance(entry.value, list):
        raise entry.error(f"{short(entry.value)} is not a list of names", f'write {key} = ["...", "..."]')
    items = [Entry(entry.source, f"{entry.label}[{i + 1}]", item) for i, item in enumerate(entry.value)]
    return tuple(_text(item) for item in items)


def save(written: WrittenSeries, path: str | os.PathLike[str]) -> None:
    """Write a series file. Where the same definition stands already, nothing is changed.

    Raises:
        InputError: it cannot be written, or another file stands there, which is left as it is.
    """
    place = Path(path)
    if not is_file(place.name):
        raise InputError("a series file ends in .toml", where=str(place), mend=f"write {place}.toml")
    try:
        with place.open("x", encoding="utf-8") as file:
            file.write(_dumped(written, place.parent))
    except FileExistsError:
        if not _holds(place, written):
            mend = "take another name, or remove it first"
            raise InputError(
                "another file stands there; it is left as it is", where=str(place), mend=mend
            ) from None
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise InputError(
            f"cannot be written: {reason}", where=str(place), mend="give another place"
        ) from None


def _holds(path: Path, written: WrittenSeries) -> bool:
    """Whether a file says just this."""
    try:
        found = load(path)
    except InputError:
        return False
    here = os.curdir
    ours, theirs = (_seen_from(Path(here), one.lattice) for one in (written, found))
    return replace(found, lattice="", source="") == replace(written, lattice="", source="") and ours == theirs


def _dumped(written: WrittenSeries, folder: Path) -> str:
    """The text of a file in that folder."""
    lines = [
        f"lattice = {_quoted(_seen_from(folder, written.lattice))}",
        f"object = {_quoted(written.object)}",
    ]
    if written.to is not None:
        lines.append(f"to = {written.to}")
    for key, names in (("by", written.by), ("moment", written.moment)):
        if names:
            lines.append(f"{key} = {_list(names)}")
    for key, value in (("region", written.region), ("start", written.start), ("end", written.end)):
        if value is not None:
            lines.append(f"{key} = {_quoted(value)}")
    lines.append(f"method = {_quoted(written.method)}")
    for one in written.walls:
        lines += ["", "[[walls]]", f"form = [{', '.join(map(str, one.form))}]", f"least = {one.least}"]
    return "\n".join(lines) + "\n"


def _quoted(text: str) -> str:
    """A TOML string; its escapes are those of JSON."""
    return json.dumps(text, ensure_ascii=False)


def _list(texts: Sequence[str]) -> str:
    return f"[{', '.join(map(_quoted, texts))}]"


def _is_path(lattice: str) -> bool:
    return is_file(lattice) or "/" in lattice or os.sep in lattice


def _from(folder: Path, lattice: str) -> str:
    """A lattice as a file in that folder names it, as seen from the current folder."""
    if not _is_path(lattice) or Path(lattice).is_absolute() or folder == Path():
        return lattice
    return f"{folder.as_posix()}/{lattice}"


def _seen_from(folder: Path, lattice: str) -> str:
    """A lattice as a file in that folder names it; an absolute path stays one."""
    if not _is_path(lattice) or Path(lattice).is_absolute():
        return lattice
    relative = Path(os.path.relpath(lattice, folder)).as_posix()
    return relative if "/" in relative else f"./{relative}"
