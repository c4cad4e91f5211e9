"""The same store over SQLite and over a real PostgreSQL server."""

from __future__ import annotations

import os
import secrets
from collections.abc import Iterator
from contextlib import contextmanager

import pytest
from sqlalchemy import create_engine, make_url, text

SERVER = "TEST_POSTGRESQL_URL"
"""Variable with the URL of a server on which the tests may make databases; `.ci/run` starts one."""
KINDS = ("sqlite", "postgresql")


@contextmanager
def fresh_postgresql() -> Iterator[str]:
    """URL of a new, empty database, which is dropped afterwards."""
    server = os.environ.get(SERVER)
    if server is None:
        assert os.environ.get("CI") != "true", f"CI must name a PostgreSQL server in {SERVER}"
        pytest.skip(f"no PostgreSQL server: name one in {SERVER}, such as .ci/postgresql starts")
    name = f"densityloom_{secrets.token_hex(6)}"
    engine = create_engine(make_url(server).set(drivername="postgresql+psycopg"), isolation_level="AUTOCOMMIT")
    with engine.connect() as connection:
        connection.execute(text(f"CREATE DATABASE {name}"))
    try:
        yield make_url(server).set(database=name).render_as_string(hide_password=False)
    finally:
        with engine.connect() as connection:
            connection.execute(text(f"DROP DATABASE {name} WITH (FORCE)"))
        engine.dispose()
