"""Canonical JSON: the one text that stands for a value, and its digest."""

from __future__ import annotations

import hashlib
import json


def text(value: object) -> str:
    """Canonical JSON: sorted keys, no spaces, no floats. Exact integers that may be big go in as decimal strings."""
    return json.dumps(value, sort_keys=True, separators=(",", ":"), ensure_ascii=False, allow_nan=False)


def digest(value: str) -> str:
    """SHA-256 of a text in UTF-8, as 64 hexadecimal digits."""
    return hashlib.sha256(value.encode("utf-8")).hexdigest()
