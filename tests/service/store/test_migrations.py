from __future__ import annotations

import pytest
from sqlalchemy import inspect, select, update

from service.store.database import attach_database, open_database
from service.store.migrations import STEPS, NewerSchema, migrate
from service.store.records import Quota, Sets
from service.store.tables import KEYS, SCHEMA
from tests.service.store.made import content, keep

AMPLE = Quota(10, 10**9)


def version(database):
    with database.reading() as connection:
        return connection.execute(select(SCHEMA.c.version)).scalar_one()


def test_a_new_database_has_the_newest_schema(database):
    assert version(database) == len(STEPS)


def test_an_older_database_is_brought_up_to_date_and_keeps_its_sets(address):
    folder, url = address
    folder.mkdir()
    old = attach_database(folder, url)
    with old.writing() as connection:
        assert migrate(connection, to=1) == 0
    kept, _ = keep(Sets(old, AMPLE))
    with old.reading() as connection:
        assert not inspect(connection).has_table(KEYS.name)
    old.close()
    new = open_database(folder, url)
    assert version(new) == len(STEPS)
    with new.reading() as connection:
        assert inspect(connection).has_table(KEYS.name)
    assert Sets(new, AMPLE).content(kept.id) == content()
    new.close()


def test_migrating_twice_changes_nothing(database):
    with database.writing() as connection:
        assert migrate(connection) == len(STEPS)
    assert version(database) == len(STEPS)


def test_a_database_of_a_later_release_is_left_alone(address, database):
    with database.writing() as connection:
        connection.execute(update(SCHEMA).values(version=len(STEPS) + 1))
    with pytest.raises(NewerSchema), database.writing() as connection:
        migrate(connection)
    with pytest.raises(ValueError, match=f"schema {len(STEPS) + 1}.*newer release"):
        open_database(*address)
    assert version(database) == len(STEPS) + 1


def test_a_step_that_fails_leaves_the_old_schema(address, monkeypatch):
    folder, url = address
    folder.mkdir()
    database = attach_database(folder, url)
    with database.writing() as connection:
        migrate(connection, to=1)

    def failing(connection):
        KEYS.create(connection)
        raise RuntimeError("half way")

    monkeypatch.setattr("service.store.migrations.STEPS", (STEPS[0], failing))
    with pytest.raises(RuntimeError, match="half way"), database.writing() as connection:
        migrate(connection, to=2)
    assert version(database) == 1
    with database.reading() as connection:
        assert not inspect(connection).has_table(KEYS.name)
    database.close()
