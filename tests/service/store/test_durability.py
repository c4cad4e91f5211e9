"""Acknowledged sets survive the death of the process, at any instant, whatever the database.

Every round starts a service, has several clients send sets as fast as they can, and kills it without
warning; then all that was ever acknowledged is read back from the database and compared with its
hash, and nothing else may be there but whole sets.
"""

from __future__ import annotations

import signal
import threading
import time

import httpx
import pytest
from sqlalchemy import func, select

from service.store import sqlite
from service.store.database import open_database
from service.store.records import Quota, Sets
from service.store.sqlite import library
from service.store.tables import CONTENTS, SETS
from tests.service.conftest import alone
from tests.service.databases import KINDS, fresh_postgresql

ROUNDS = 4
CLIENTS = 4
SECONDS = 0.6
ROWS = 1500
"""So that a set spans many pages of the database."""


def body(number):
    return {
        "set": {
            "cell": {"period": 10.0},
            "values": "structure_factor",
            "l": list(range(1, ROWS + 1)),
            "amplitude": [float(number)] * ROWS,
            "phase_deg": [0] * ROWS,
        },
        "name": f"set {number}",
        "tags": ["a", "b"],
    }


def send(address, numbers, acknowledged):
    """Send until the service is gone."""
    with httpx.Client(base_url=address, timeout=30) as client:
        try:
            for number in numbers:
                answer = client.post("/v1/sets", json=body(number))
                if answer.status_code == 201:
                    acknowledged.append((answer.json()["id"], number))
        except httpx.TransportError:
            return


def round_of(settings, first, acknowledged):
    with alone(compute_workers=2, compute_threads=1, **settings) as served:
        threads = [
            threading.Thread(
                target=send, args=(served.address, range(first + one, first + 10_000, CLIENTS), acknowledged)
            )
            for one in range(CLIENTS)
        ]
        for thread in threads:
            thread.start()
        time.sleep(SECONDS)
        served.process.send_signal(signal.SIGKILL)
        served.process.wait(10)
        for thread in threads:
            thread.join(30)


def assert_whole(address, acknowledged):
    database = open_database(*address)
    sets = Sets(database, Quota(10**6, 10**12))
    try:
        with database.reading() as connection:
            if connection.dialect.name == "sqlite":
                assert connection.exec_driver_sql("PRAGMA integrity_check").scalar_one() == "ok"
            there = set(connection.execute(select(SETS.c.id)).scalars())
            parts = connection.execute(select(CONTENTS.c.number, func.count()).group_by(CONTENTS.c.number)).all()
        assert {identity for identity, _ in acknowledged} <= there
        assert len(parts) == len(there)
        assert {count for _, count in parts} == {5}, "document, three columns and summary"
        for identity in there:
            content = sets.content(identity)  # compares with the hash
            assert content is not None
            record = sets.record(identity)
            assert record is not None
            assert record.labels.name == f"set {int(content.columns()['amplitude'][0])}"
            assert record.labels.tags == ("a", "b")
        for identity, number in acknowledged:
            content = sets.content(identity)
            assert content is not None
            assert content.columns()["amplitude"][0] == number
    finally:
        database.close()
    return len(there)


@pytest.mark.parametrize("kind", [*KINDS, "sqlite_with_rollback_journal"])
def test_every_acknowledged_set_survives_kill(kind, tmp_path, monkeypatch, capsys):
    if kind == "postgresql":
        with fresh_postgresql() as url:
            survive({"database_url": url}, (tmp_path, url), capsys, kind)
        return
    if kind != "sqlite" and library().name == "sqlite3":
        pytest.skip("here the interpreter's own library is used anyway")
    if kind != "sqlite":
        # The service's process finds no other library than the interpreter's own.
        hidden = tmp_path / "hidden"
        hidden.mkdir()
        (hidden / "pysqlite3.py").write_text("raise ImportError('hidden')\n")
        monkeypatch.setenv("PYTHONPATH", str(hidden))
        monkeypatch.setattr(sqlite, "import_module", lambda name: (_ for _ in ()).throw(ImportError(name)))
        if sqlite.is_sound(sqlite.sqlite3.sqlite_version_info):
            pytest.skip("the interpreter's own library needs no rollback journal")
    survive({"data_dir": tmp_path / "data"}, (tmp_path / "data", None), capsys, kind)


def survive(settings, address, capsys, kind):
    acknowledged: list[tuple[str, int]] = []
    there = 0
    for number in range(ROUNDS):
        round_of(settings, 10_000 * number, acknowledged)
        there = assert_whole(address, acknowledged)
    assert len(acknowledged) > ROUNDS, "the load was too small to tell anything"
    with capsys.disabled():
        print(f"\n{kind}: {ROUNDS} kills, {len(acknowledged)} sets acknowledged, {there} found, all whole")
