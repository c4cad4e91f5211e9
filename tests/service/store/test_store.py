from __future__ import annotations

import pytest

from service.problems import Problem
from service.settings import Settings
from service.store.store import open_store
from tests.service.store.made import keep


def test_an_opened_store_keeps_sets(address):
    folder, url = address
    store = open_store(Settings(data_dir=folder, database_url=url))
    assert keep(store.sets)[1]
    assert ("PostgreSQL" if url else "SQLite") in store.told()
    store.close()


def test_a_store_that_cannot_be_opened_costs_nothing_but_itself(tmp_path):
    (tmp_path / "file").write_text("")
    store = open_store(Settings(data_dir=tmp_path / "file" / "x"))
    assert store.told().startswith("not available: ")
    with pytest.raises(Problem) as caught:
        _ = store.sets
    assert caught.value.status == 503
    store.close()


def test_limits_come_from_the_settings(tmp_path):
    store = open_store(Settings(data_dir=tmp_path, max_sets=0))
    with pytest.raises(Problem) as caught:
        keep(store.sets)
    assert caught.value.status == 507
    store.close()
