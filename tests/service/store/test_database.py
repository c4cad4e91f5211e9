from __future__ import annotations

import os
import stat

import pytest
from sqlalchemy import insert, select

from service.problems import Problem
from service.store import database as module
from service.store.database import FILE, attach_database, open_database
from service.store.tables import KEYS

ROW = {"id": "k", "name": "n", "digest": "d", "scopes": "read", "created": 0.0}


def keys(database):
    with database.reading() as connection:
        return connection.execute(select(KEYS.c.id)).scalars().all()


def test_what_is_written_stays(address, database):
    with database.writing() as connection:
        connection.execute(insert(KEYS).values(ROW))
    other = attach_database(*address)
    assert keys(other) == ["k"]
    other.close()


def test_a_transaction_that_fails_leaves_nothing(database):
    def fail():
        with database.writing() as connection:
            connection.execute(insert(KEYS).values(ROW))
            raise RuntimeError

    with pytest.raises(RuntimeError):
        fail()
    assert keys(database) == []


def test_the_folder_is_made_for_its_owner_alone(tmp_path):
    folder = tmp_path / "a" / "b"
    open_database(folder, None).close()
    assert (folder / FILE).is_file()
    assert stat.S_IMODE(folder.stat().st_mode) == 0o700


def test_a_folder_that_cannot_be_made_is_a_problem(tmp_path):
    (tmp_path / "file").write_text("")
    with pytest.raises(Problem) as caught:
        open_database(tmp_path / "file" / "data", None)
    assert caught.value.status == 503
    assert "DENSITYLOOM_DATA_DIR" in caught.value.detail
    assert str(tmp_path) not in caught.value.detail


@pytest.fixture
def nobody(tmp_path):
    """Without root's rights, under which every folder can be written."""
    for folder in (tmp_path, *tmp_path.parents):
        if folder.owner() == "root" and not folder.stat().st_mode & 0o005:
            folder.chmod(0o755)
    if os.geteuid() != 0:
        yield None
        return
    os.seteuid(65534)
    yield 65534
    os.seteuid(0)


def test_a_folder_that_can_only_be_read_is_a_problem_and_loses_nothing(tmp_path, nobody):
    if nobody is not None:
        os.seteuid(0)
    folder = tmp_path / "data"
    made = open_database(folder, None)
    with made.writing() as connection:
        connection.execute(insert(KEYS).values(ROW))
    made.close()
    for file in folder.iterdir():
        file.chmod(0o444)
    folder.chmod(0o555)
    if nobody is not None:
        os.seteuid(nobody)
    with pytest.raises(Problem) as caught:
        open_database(folder, None)
    assert caught.value.status == 503
    if nobody is not None:
        os.seteuid(0)
    folder.chmod(0o755)
    for file in folder.iterdir():
        file.chmod(0o644)
    again = open_database(folder, None)
    assert keys(again) == ["k"]
    again.close()


@pytest.mark.parametrize(
    ("url", "words"),
    [
        ("mysql://localhost/x", "give postgresql://"),
        ("sqlite:///x.db", "give postgresql://"),
        ("nonsense", "cannot be read"),
    ],
)
def test_other_databases_are_refused(tmp_path, url, words):
    with pytest.raises(ValueError, match=words):
        open_database(tmp_path, url)


def test_a_server_that_does_not_answer_is_a_problem(tmp_path):
    with pytest.raises(Problem) as caught:
        open_database(tmp_path, "postgresql://nobody@127.0.0.1:9/none")
    assert caught.value.status == 503
    assert caught.value.headers["Retry-After"]


def test_more_questions_than_connections_are_a_problem_and_no_fault(address, monkeypatch):
    if address[1] is None:
        pytest.skip("every thread has its connection to the embedded database")
    monkeypatch.setattr(module, "PATIENCE", 1)
    monkeypatch.setattr(module, "CONNECTIONS", 1)
    database = attach_database(*address)
    with database.reading(), pytest.raises(Problem) as caught, database.reading():
        pass
    assert caught.value.status == 503
    database.close()
