"""Where a ledger is: a path or a URL, and how it is called in messages, without passwords."""

from __future__ import annotations

import os
import re
from dataclasses import dataclass, field, replace
from pathlib import Path
from urllib.parse import unquote

from fleetcount.errors import LedgerError

DEFAULT = "fleetcount.sqlite"
VARIABLE = "FLEETCOUNT_LEDGER"

_POSTGRES = re.compile(r"^postgres(?:ql)?(?:\+psycopg[0-9]?)?://", re.IGNORECASE)
_IN_URL = re.compile(r"(://[^:/@\s]*):([^\s]*)@")
_IN_QUERY = re.compile(r"(password\s*=\s*)('[^']*'|[^&\s]+)", re.IGNORECASE)


@dataclass(frozen=True)
class Place:
    """A ledger's place: memory, a file (`path`) or a server (`url`, as libpq reads it)."""

    shown: str
    path: Path | None = None
    url: str = ""
    secrets: tuple[str, ...] = field(default=(), repr=False)

    @property
    def in_memory(self) -> bool:
        return self.path is None and not self.url

    def mask(self, message: str) -> str:
        """A message without any password that is known or looks like one."""
        for secret in self.secrets:
            message = message.replace(secret, "***")
        return _IN_QUERY.sub(r"\1***", _IN_URL.sub(r"\1:***@", message))


def find(where: str | None) -> Place:
    """The place that a `--ledger` option, or else the environment, or else the default names."""
    if where is None:
        where = os.environ.get(VARIABLE) or DEFAULT
    if not where or "\0" in where:
        raise LedgerError("not the name of a ledger", where=repr(where), mend="give a path or a URL")
    if where in (":memory:", "sqlite://", "sqlite:///:memory:"):
        return Place(":memory:")
    if _POSTGRES.match(where):
        return _server(_POSTGRES.sub("postgresql://", where))
    scheme, mark, rest = where.partition("://")
    if not mark:
        return _file(where)
    if scheme.lower() in ("sqlite", "sqlite+pysqlite") and rest.startswith("/") and "?" not in rest:
        return _file(rest[1:])
    raise LedgerError(
        "not a ledger that can be used",
        where=Place("").mask(where),
        mend="give a path, sqlite:///PATH or postgresql://HOST/NAME",
    )


def _file(name: str) -> Place:
    try:
        path = Path(name).expanduser()
    except RuntimeError:
        path = Path(name)
    return Place(str(path), path=path)


def _server(url: str) -> Place:
    """Passwords are masked in the URL, and searched for in every message."""
    secrets = {os.environ.get("PGPASSWORD", "")}
    for found in _IN_URL.finditer(url):
        secrets |= {found.group(2), unquote(found.group(2))}
    for found in _IN_QUERY.finditer(url):
        secrets |= {found.group(2), unquote(found.group(2))}
    shown = _IN_QUERY.sub(r"\1***", _IN_URL.sub(r"\1:***@", url))
    longest_first = tuple(sorted(secrets - {""}, key=lambda secret: -len(secret)))
    place = Place(shown, url=url, secrets=longest_first)
    place = replace(place, shown=place.mask(shown))
    if re.split(r"[/?#]", url.partition("://")[2])[0].count("@") > 1:
        raise LedgerError(
            "the address holds two @", where=place.shown, mend="write an @ in a password as %40"
        )
    return place
