"""Canonical JSON: the one text that stands for a value, and its digest."""

from __future__ import annotations

import hashlib
import json

_ENCODER = json.JSONEncoder(sort_keys=True, separators=(",", ":"), ensure_ascii=False, allow_nan=False)


def text(value: object) -> str:
    """Canonical JSON: sorted keys, no spaces, no floats. Exact integers that may be big go in as text."""
    return _ENCODER.encode(value)


def digest(value: str) -> str:
    """SHA-256 of a text in UTF-8, as 64 hexadecimal digits."""
    return hashlib.sha256(value.encode("utf-8")).hexdigest()
