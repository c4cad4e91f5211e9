from __future__ import annotations

import pytest

from service.store.database import open_database
from tests.service.store.databases import KINDS, fresh_postgresql


@pytest.fixture(params=KINDS)
def address(request, tmp_path):
    """Arguments of `open_database`, for each kind of database."""
    if request.param == "sqlite":
        yield tmp_path / "data", None
    else:
        with fresh_postgresql() as url:
            yield tmp_path / "data", url


@pytest.fixture
def database(address):
    made = open_database(*address)
    yield made
    made.close()
