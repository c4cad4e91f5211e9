from __future__ import annotations

import asyncio

import pytest

from service.problems import Problem
from service.settings import Settings
from service.store import store as module
from service.store.store import Store
from tests.service.store.made import keep


def test_an_opened_store_keeps_sets(address):
    folder, url = address
    store = Store(Settings(data_dir=folder, database_url=url))
    assert store.open()
    assert keep(store.sets)[1]
    assert ("PostgreSQL" if url else "SQLite") in store.told()
    store.close()


def blocked(tmp_path):
    (tmp_path / "file").write_text("")
    return Store(Settings(data_dir=tmp_path / "file" / "x"))


def test_a_store_that_cannot_be_opened_costs_nothing_but_itself(tmp_path, caplog):
    store = blocked(tmp_path)
    assert not store.open()
    assert store.told().startswith("not available: ")
    with pytest.raises(Problem) as caught:
        _ = store.sets
    assert caught.value.status == 503
    # Where it is, is for the log alone.
    assert str(tmp_path) not in store.told()
    assert str(tmp_path) in caplog.text
    store.close()


def test_it_is_opened_as_soon_as_it_can_be(tmp_path, monkeypatch):
    monkeypatch.setattr(module, "RETRY_SECONDS", 0.01)
    store = blocked(tmp_path)

    async def scenario():
        assert not store.open()
        trying = asyncio.create_task(store.keep_trying())
        await asyncio.sleep(0.05)
        assert store.database is None
        (tmp_path / "file").unlink()
        await asyncio.wait_for(trying, 10)

    asyncio.run(scenario())
    assert keep(store.sets)[1]
    assert store.told().startswith("SQLite")
    store.close()


def test_limits_come_from_the_settings(tmp_path):
    store = Store(Settings(data_dir=tmp_path, max_sets=0))
    store.open()
    with pytest.raises(Problem) as caught:
        keep(store.sets)
    assert caught.value.status == 507
    store.close()
