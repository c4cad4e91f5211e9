from __future__ import annotations

import asyncio

import pytest

from service.store import known as module
from service.store.known import Known
from service.store.records import Quota, Sets
from tests.service.store.made import keep


@pytest.fixture
def sets(database):
    return Sets(database, Quota(10, 10**9))


def test_a_set_that_is_not_there(sets):
    assert not asyncio.run(Known().has(sets, "0" * 64))


def test_a_set_is_asked_for_once_a_moment(sets, monkeypatch):
    record, _ = keep(sets)
    asked = []
    original = sets.holds
    monkeypatch.setattr(sets, "holds", lambda identity: asked.append(identity) or original(identity))

    async def scenario():
        known = Known()
        assert all([await known.has(sets, record.id) for _ in range(5)])
        assert len(asked) == 1
        sets.delete(record.id)
        assert await known.has(sets, record.id), "as another process's deletion is, for a moment"
        known.forget(record.id)
        assert not await known.has(sets, record.id)

    asyncio.run(scenario())


def test_a_moment_later_it_is_asked_again(sets, monkeypatch):
    record, _ = keep(sets)
    monkeypatch.setattr(module, "SECONDS", 0.0)

    async def scenario():
        known = Known()
        assert await known.has(sets, record.id)
        sets.delete(record.id)
        assert not await known.has(sets, record.id)

    asyncio.run(scenario())


def test_no_more_than_so_many_are_remembered(sets, monkeypatch):
    monkeypatch.setattr(module, "MOST", 2)
    records = [keep(sets, seed)[0] for seed in range(3)]

    async def scenario():
        known = Known()
        for record in records:
            assert await known.has(sets, record.id)
        assert len(known._seen) == 2

    asyncio.run(scenario())


def test_a_deletion_while_it_is_asked_is_not_missed(sets, monkeypatch):
    record, _ = keep(sets)

    async def scenario():
        known = Known()
        original = sets.holds

        def slow(identity):
            found = original(identity)
            if found:
                sets.delete(identity)
                known.forget(identity)
            return found

        monkeypatch.setattr(sets, "holds", slow)
        assert not await known.has(sets, record.id)

    asyncio.run(scenario())
