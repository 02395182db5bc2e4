"""The cache of compiled kernels, and the lock under which it is filled.

Numba's own cache looks at the file of the outer function only: after an edit of an inner kernel in another module
the old machine code would run. So the cache lies in a folder named by the engine digest and the versions, and the
next process after any edit finds an empty one.
"""

from __future__ import annotations

import contextlib
import platform
import threading
import time
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

from filelock import FileLock
from numba.core import config as _numba_config

from fleetcount.errors import FleetcountError
from fleetcount.host import cache_directory
from fleetcount.methods.engine import engine_digest, versions

_lock = threading.Lock()
_ready: dict[tuple[object, ...], Callable[..., Any]] = {}
seconds_compiling: dict[str, float] = {}
"""Seconds that making or loading each kernel took in this process, by name; for start-up screens and benchmarks."""


def folder(method: str) -> Path:
    """Where the compiled kernels of this engine lie on this machine."""
    known = versions()
    name = "-".join([engine_digest(method)[:16], platform.machine(), *(known[k] for k in sorted(known))])
    return cache_directory() / "kernels" / name


def kernel(
    method: str,
    name: str,
    factory: Callable[..., Callable[..., Any]],
    traits: tuple[object, ...],
    example: Callable[[Callable[..., Any]], None],
) -> Callable[..., Any]:
    """The compiled kernel `factory(*traits)`, from memory, from the cache on disk, or compiled now.

    One thread of one process compiles at a time; the others wait and load the result.

    Args:
        example: runs the kernel once on tiny arrays of the types it will get.
    """
    key = (method, name, *traits)
    with _lock:
        if key not in _ready:
            began = time.perf_counter()
            with _filling(method):
                made = factory(*traits)
                example(made)
                marker = folder(method) / _marker(name, traits)
                if not marker.exists():
                    marker.touch()
            _ready[key] = made
            seconds_compiling[f"{name}{traits}"] = time.perf_counter() - began
        return _ready[key]


@contextlib.contextmanager
def _filling(method: str) -> Iterator[None]:
    place = folder(method)
    config: Any = _numba_config  # its settings are not declared
    old = config.CACHE_DIR
    try:
        place.mkdir(parents=True, exist_ok=True)
        with FileLock(place / "filling.lock"):
            config.CACHE_DIR = str(place)
            yield
    except OSError as error:
        raise FleetcountError(
            f"compiled kernels cannot be kept ({error.strerror or error})",
            where=str(place),
            mend="set FLEETCOUNT_CACHE to a folder that can be written to and has room",
        ) from error
    finally:
        config.CACHE_DIR = old


def is_warm(method: str, name: str, traits: tuple[object, ...]) -> bool:
    """Whether that kernel was compiled before on this machine, by this engine."""
    return (folder(method) / _marker(name, traits)).exists()


def _marker(name: str, traits: tuple[object, ...]) -> str:
    return ".".join([name, *map(str, traits), "ready"])
