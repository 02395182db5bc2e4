"""The records of a series' chain as text: what is hashed, sent and stored is the same string.

A series' chain is a sequence of records: the opening of a reading, which names its roots, and the tallies of
its units. A record's text is canonical JSON, an array of a format name, a format number and the fields, with
exact integers as decimal strings. Its checksum is the SHA-256 of that text; its link is the SHA-256 of the
link before it, the checksum, the token it was handed out under and the time it was accepted.
"""

from __future__ import annotations

import json
import zlib
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from itertools import pairwise
from typing import Any, ClassVar, Self, TypeVar

from fleetcount.errors import TrustError
from fleetcount.series import canonical
from fleetcount.series.tally import Tally

PACK_ABOVE = 4096
"""Texts of more bytes than this are stored compressed."""

Record = TypeVar("Record")
Part = tuple[str, int]
"""A unit's key and its factor."""


@dataclass(frozen=True)
class OpeningRecord:
    """The opening of a reading: what is going to be counted, and the roots it begins with.

    Attributes:
        series: digest of the series.
        reading: random id of the reading.
        purpose: "count", or why else the reading exists.
        method, method_version: how it counts.
        lengths: the lengths it covers, as `series.lengths.format_lengths` writes them.
        width: sums a row of its tallies: the count and one a moment.
        roots: key and factor of the first units, sorted by key; a root's factor is its weight.
        opened: microseconds since 1970, UTC.
    """

    series: str
    reading: str
    purpose: str
    method: str
    method_version: int
    lengths: str
    roots: tuple[Part, ...]
    opened: int
    width: int = 1

    NAME: ClassVar = "fleetcount opening"
    FORMAT: ClassVar = 1

    def text(self) -> str:
        """Canonical text."""
        return _write(self.NAME, self.FORMAT, {
            "series": self.series,
            "reading": self.reading,
            "purpose": self.purpose,
            "method": self.method,
            "method_version": self.method_version,
            "lengths": self.lengths,
            "width": self.width,
            "roots": _write_parts(self.roots),
            "opened": str(self.opened),
        })  # fmt: skip

    @classmethod
    def parse(cls, text: str) -> Self:
        """The record of such a text; TrustError if it is none."""
        return _read(cls.NAME, cls.FORMAT, text, lambda fields: cls(
            series=_string(fields["series"]),
            reading=_string(fields["reading"]),
            purpose=_string(fields["purpose"]),
            method=_string(fields["method"]),
            method_version=_small(fields["method_version"]),
            lengths=_string(fields["lengths"]),
            width=_small(fields["width"]),
            roots=_read_parts(fields["roots"]),
            opened=_integer(fields["opened"]),
        ))  # fmt: skip


@dataclass(frozen=True)
class TallyRecord:
    """What counting (or dividing) one unit gave, and who counted it with what.

    Attributes:
        series: digest of the series.
        reading: id of the reading.
        method, method_version: how it was counted.
        lengths: the lengths the reading covers, as text.
        key, factor: the unit.
        children: key and factor of each unit left over, sorted by key.
        rows: the explored part.
        engine: digest of the sources that counted.
        versions: versions of Python, numba, llvmlite and numpy, by name.
        machine: name of the machine that counted.
        nodes: nodes of the enumeration tree that were visited.
        started, finished: microseconds since 1970, UTC.
    """

    series: str
    reading: str
    method: str
    method_version: int
    lengths: str
    key: str
    factor: int
    children: tuple[Part, ...]
    rows: Tally
    engine: str
    versions: Mapping[str, str] = field(hash=False)
    machine: str
    nodes: int
    started: int
    finished: int

    NAME: ClassVar = "fleetcount tally"
    FORMAT: ClassVar = 1

    def text(self) -> str:
        """Canonical text."""
        return _write(self.NAME, self.FORMAT, {
            "series": self.series,
            "reading": self.reading,
            "method": self.method,
            "method_version": self.method_version,
            "lengths": self.lengths,
            "key": self.key,
            "factor": str(self.factor),
            "children": _write_parts(self.children),
            "width": self.rows.width,
            "rows": self.rows.canonical(),
            "engine": self.engine,
            "versions": dict(self.versions),
            "machine": self.machine,
            "nodes": str(self.nodes),
            "started": str(self.started),
            "finished": str(self.finished),
        })  # fmt: skip

    @classmethod
    def parse(cls, text: str) -> Self:
        """The record of such a text; TrustError if it is none."""
        return _read(cls.NAME, cls.FORMAT, text, lambda fields: cls(
            series=_string(fields["series"]),
            reading=_string(fields["reading"]),
            method=_string(fields["method"]),
            method_version=_small(fields["method_version"]),
            lengths=_string(fields["lengths"]),
            key=_string(fields["key"]),
            factor=_integer(fields["factor"]),
            children=_read_parts(fields["children"]),
            rows=_read_rows(fields["rows"], _small(fields["width"])),
            engine=_string(fields["engine"]),
            versions={_string(k): _string(v) for k, v in fields["versions"].items()},
            machine=_string(fields["machine"]),
            nodes=_integer(fields["nodes"]),
            started=_integer(fields["started"]),
            finished=_integer(fields["finished"]),
        ))  # fmt: skip


def checksum(text: str) -> str:
    """SHA-256 of a record's text, as 64 hexadecimal digits."""
    try:
        return canonical.digest(text)
    except UnicodeEncodeError:
        raise TrustError("a record holds characters that no text has") from None


def link(previous: str, checksum: str, token: str, accepted: int) -> str:
    """The link of a record: SHA-256 over the link before it and how it came in.

    Args:
        previous: link of the record before; of a series' first record the digest of the series.
        checksum: of the record's text.
        token: the hand-out it answers; for an opening the token of the lease.
        accepted: microseconds since 1970, UTC.
    """
    return canonical.digest(canonical.text([previous, checksum, token, str(accepted)]))


def pack(text: str) -> bytes:
    """A record's text as it is stored: UTF-8, compressed if it is long."""
    plain = text.encode("utf-8")
    return zlib.compress(plain, 6) if len(plain) > PACK_ABOVE else plain


def unpack(stored: bytes) -> str:
    """The text of `pack`; TrustError if the bytes are damaged. A record's text begins with a bracket."""
    try:
        return (stored if stored[:1] == b"[" else zlib.decompress(stored)).decode("utf-8")
    except (zlib.error, UnicodeDecodeError):
        raise TrustError("the stored text of a record is damaged") from None


def _write(name: str, number: int, fields: dict[str, object]) -> str:
    return canonical.text([name, number, fields])


def fields(text: str, name: str, number: int) -> dict[str, Any]:
    """The fields of a record's text as JSON has them, unchecked; TrustError if it is of another format."""
    try:
        found_name, found_number, found = json.loads(text)
        if (found_name, found_number) != (name, number):
            raise ValueError(f"its format is {found_name!r} {found_number!r}")
        if not isinstance(found, dict):
            raise TypeError("its fields have no names")
    except (ValueError, TypeError, RecursionError) as error:
        raise _not_a_record(name, number, error) from None
    return found


def _read(name: str, number: int, text: str, build: Callable[[dict[str, Any]], Record]) -> Record:
    found = fields(text, name, number)
    try:
        return build(found)
    except (ValueError, TypeError, KeyError, AttributeError) as error:
        raise _not_a_record(name, number, error) from None


def _not_a_record(name: str, number: int, error: Exception) -> TrustError:
    found = f"{type(error).__name__}: {error}"
    return TrustError(f"not a record of format '{name}' {number} ({found[:200]})")


def _string(value: object) -> str:
    if not isinstance(value, str):
        raise TypeError(f"{value!r} is no text")
    return value


def _small(value: object) -> int:
    if not isinstance(value, int) or isinstance(value, bool) or value < 0:
        raise TypeError(f"{value!r} is no whole number")
    return value


def _integer(value: object) -> int:
    return int(_string(value))


def _write_parts(parts: Sequence[Part]) -> list[list[str]]:
    return [[key, str(factor)] for key, factor in parts]


def _read_parts(value: Sequence[Sequence[str]]) -> tuple[Part, ...]:
    parts = tuple((_string(key), _integer(factor)) for key, factor in value)
    if any(a[0] >= b[0] for a, b in pairwise(parts)):
        raise ValueError("keys not sorted, or one twice")
    if any(factor == 0 for _, factor in parts):
        raise ValueError("a factor of zero")
    return parts


def _read_rows(value: Sequence[Sequence[str]], width: int) -> Tally:
    if width < 1 or any(len(row) <= width for row in value):
        raise ValueError(f"rows that do not hold a length and {width} sums")
    return Tally.from_canonical(value, width)
