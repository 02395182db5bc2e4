"""The methods by name."""

from __future__ import annotations

from fleetcount.errors import InputError
from fleetcount.methods.face import Method

METHODS = ("direct",)


def get(name: str) -> Method:
    """The method of that name; its compiled parts are imported now."""
    if name == "direct":
        from fleetcount.methods.direct.method import DirectMethod

        return DirectMethod()
    raise InputError(f"unknown method {name!r}", mend=f"known methods: {', '.join(METHODS)}")
