"""One entry of a definition file: typed access, with errors that name file, entry and mend."""

from __future__ import annotations

import difflib
import re
from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import Any

from fleetcount.errors import LatticeError

_IDENTIFIER = re.compile(r"[A-Za-z0-9][A-Za-z0-9._-]{0,39}")
_RATIONAL = re.compile(r"[+-]?[0-9]{1,18}(/[0-9]{1,18})?")


def short(value: object) -> str:
    """A value for an error line: one short line without control characters."""
    text = repr(value)
    return text if len(text) <= 40 else f"{text[:37]}..."


class Entry:
    """A value of the file at a place.

    Attributes:
        source: the file, as errors name it.
        label: the place in the file, such as `[[edges]] 3`; empty for the whole file.
        value: what stands there.
        kind: for an entry of a list of tables, the key of the list.
    """

    def __init__(self, source: str, label: str, value: Any, kind: str = "") -> None:
        self.source, self.label, self.value, self.kind = source, label, value, kind

    def error(self, what: str, mend: str, key: str = "") -> LatticeError:
        """An error about this entry, or about `key` in it."""
        where = ", ".join(x for x in (self.source, self.label, key) if x)
        return LatticeError(what, where=where, mend=mend)

    def only(self, keys: frozenset[str]) -> None:
        """Refuse keys that mean nothing here."""
        for key in self.value:
            if key not in keys:
                near = difflib.get_close_matches(key, keys, 1)
                mend = f"did you mean {near[0]!r}?" if near else f"known here are {', '.join(sorted(keys))}"
                raise self.error(f"unknown key {short(key)}", mend)

    def has(self, key: str) -> bool:
        return key in self.value

    def sub(self, key: str) -> Entry:
        """The value under a key that must be there."""
        if key not in self.value:
            raise self.error(f"no {key!r}", f"add a line {key} = ...")
        label = f"{self.label}, {key}" if self.label else key
        return Entry(self.source, label, self.value[key])

    def integer(self, key: str, least: int, greatest: int, default: int | None = None) -> int:
        if default is not None and key not in self.value:
            return default
        return self.sub(key)._integer(least, greatest, f"give an integer from {least} to {greatest}")

    def _integer(self, least: int, greatest: int, mend: str) -> int:
        if type(self.value) is not int or not least <= self.value <= greatest:
            raise self.error(f"{short(self.value)} is not an integer from {least} to {greatest}", mend)
        return self.value

    def identifier(self, key: str) -> str:
        entry = self.sub(key)
        if not isinstance(entry.value, str) or not _IDENTIFIER.fullmatch(entry.value):
            mend = "use up to 40 letters, digits, dots, hyphens and underscores, first a letter or digit"
            raise entry.error(f"{short(entry.value)} is not a simple name", mend)
        return entry.value

    def line(self, key: str, default: str) -> str:
        """One line of printable text."""
        value = self.value.get(key, default)
        if not isinstance(value, str) or not value.isprintable() or not 0 < len(value) <= 100:
            raise self.error(
                f"{short(value)} is not a line of text", "write up to 100 printable characters", key
            )
        return value

    def choice(self, key: str, choices: Sequence[str], default: str) -> str:
        value = self.value.get(key, default)
        if not isinstance(value, str) or value not in choices:
            allowed = " or ".join(f'"{c}"' for c in choices)
            raise self.error(f"{short(value)} is not known", f"write {allowed}", key)
        return value

    def known(self, key: str, numbers: Mapping[str, int], noun: str) -> int:
        """The number of a name that must be known."""
        entry = self.sub(key)
        if not isinstance(entry.value, str) or entry.value not in numbers:
            mend = f"the {noun}s are {', '.join(list(numbers)[:8])}{', ...' if len(numbers) > 8 else ''}"
            raise entry.error(f"no {noun} called {short(entry.value)}", mend)
        return numbers[entry.value]

    def items(self, length: int, meaning: str) -> list[Entry]:
        """The items of a list of known length."""
        if not isinstance(self.value, list) or len(self.value) != length:
            found = f"{len(self.value)} entries" if isinstance(self.value, list) else short(self.value)
            raise self.error(f"a list of {length} expected, found {found}", f"give {length}, {meaning}")
        return [Entry(self.source, f"{self.label}[{i + 1}]", item) for i, item in enumerate(self.value)]

    def integers(self, length: int, greatest: int, meaning: str) -> tuple[int, ...]:
        mend = f"give integers from {-greatest} to {greatest}"
        return tuple(item._integer(-greatest, greatest, mend) for item in self.items(length, meaning))

    def rationals(self, length: int, meaning: str) -> tuple[Fraction, ...]:
        return tuple(item._rational() for item in self.items(length, meaning))

    def _rational(self) -> Fraction:
        value = self.value
        if isinstance(value, float):
            raise self.error(f"{value} is a float", 'write an exact number, such as "3/2" or 1')
        text = str(value) if type(value) is int else value
        if not isinstance(text, str) or not _RATIONAL.fullmatch(text):
            raise self.error(f"{short(value)} is not an exact rational", 'write a number such as "3/2" or 1')
        numerator, _, denominator = text.partition("/")
        if denominator and int(denominator) == 0:
            raise self.error(f"{short(value)} divides by zero", 'write a number such as "3/2" or 1')
        return Fraction(int(numerator), int(denominator or 1))

    def tables(self, key: str) -> list[Entry]:
        """The entries of a list of tables; none if the key is missing."""
        value = self.value.get(key, [])
        if not isinstance(value, list) or not all(isinstance(item, dict) for item in value):
            raise self.error("not a list of tables", f"begin each entry with a line [[{key}]]", key)
        return [Entry(self.source, f"[[{key}]] {i + 1}", item, key) for i, item in enumerate(value)]
