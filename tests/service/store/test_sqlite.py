from __future__ import annotations

import sqlite3
import types

import pytest
from sqlalchemy import text

from service.store import sqlite as module
from service.store.sqlite import Library, is_sound, library, open_engine

FAULTY = Library(sqlite3, (3, 40, 1), "sqlite3")


@pytest.mark.parametrize(
    ("version", "sound"),
    [
        ((3, 6, 23), True),
        ((3, 7, 0), False),
        ((3, 40, 1), False),
        ((3, 44, 5), False),
        ((3, 44, 6), True),
        ((3, 45, 0), False),
        ((3, 50, 6), False),
        ((3, 50, 7), True),
        ((3, 51, 2), False),
        ((3, 51, 3), True),
        ((3, 53, 4), True),
        ((4, 0, 0), True),
    ],
)
def test_versions_with_the_fault_are_known(version, sound):
    assert is_sound(version) is sound
    used = Library(sqlite3, version, "sqlite3")
    assert used.journal == ("WAL" if sound else "DELETE")
    assert ".".join(map(str, version)) in used.told()


def pretend(monkeypatch, own, bundled):
    monkeypatch.setattr(module, "sqlite3", types.SimpleNamespace(sqlite_version_info=own))

    def load(name):
        assert name == "pysqlite3"
        if bundled is None:
            raise ImportError(name)
        return types.SimpleNamespace(sqlite_version_info=bundled)

    monkeypatch.setattr(module, "import_module", load)
    return library()


def test_the_interpreters_own_library_is_used_where_it_is_sound(monkeypatch):
    assert pretend(monkeypatch, (3, 51, 3), (3, 53, 4)).name == "sqlite3"


def test_a_sound_bundled_library_is_preferred_to_a_faulty_one(monkeypatch):
    found = pretend(monkeypatch, (3, 40, 1), (3, 53, 4))
    assert (found.name, found.journal) == ("pysqlite3", "WAL")


@pytest.mark.parametrize("bundled", [None, (3, 45, 1)])
def test_without_a_sound_library_the_journal_is_not_a_write_ahead_log(monkeypatch, bundled):
    found = pretend(monkeypatch, (3, 40, 1), bundled)
    assert (found.name, found.journal) == ("sqlite3", "DELETE")
    assert "rollback journal" in found.told()


def pragmas(engine):
    names = ("journal_mode", "synchronous", "foreign_keys")
    with engine.begin() as connection:
        return tuple(connection.exec_driver_sql(f"PRAGMA {name}").scalar_one() for name in names)


def test_every_commit_is_synchronised(tmp_path):
    used = library()
    engine = open_engine(str(tmp_path / "a"), used)
    assert pragmas(engine) == (used.journal.lower(), 2 if used.sound else 3, 1)
    engine.dispose()
    engine = open_engine(str(tmp_path / "b"), FAULTY)
    assert pragmas(engine) == ("delete", 3, 1)
    engine.dispose()


def test_a_log_left_by_a_sound_library_is_given_up_by_a_faulty_one(tmp_path):
    used = library()
    if not used.sound:
        pytest.skip("no SQLite library here is free of the fault")
    first = open_engine(str(tmp_path / "a"), used)
    with first.begin() as connection:
        connection.execute(text("CREATE TABLE t (x)"))
        connection.execute(text("INSERT INTO t VALUES (7)"))
    first.dispose()
    second = open_engine(str(tmp_path / "a"), FAULTY)
    assert pragmas(second)[0] == "delete"
    with second.begin() as connection:
        assert connection.execute(text("SELECT x FROM t")).scalar_one() == 7
    second.dispose()


def test_writers_take_turns_from_the_start_of_their_transactions(tmp_path):
    engine = open_engine(str(tmp_path / "a"), library())
    writer = engine.execution_options(**{module.WRITING: True})
    begun = []
    from sqlalchemy import event

    event.listen(engine, "before_cursor_execute", lambda c, cur, statement, *rest: begun.append(statement))
    with writer.begin() as connection:
        connection.execute(text("CREATE TABLE t (x)"))
    with engine.begin() as connection:
        connection.execute(text("SELECT * FROM t"))
    assert [one for one in begun if one.startswith("BEGIN")] == ["BEGIN IMMEDIATE", "BEGIN"]
    engine.dispose()
