from __future__ import annotations

import sqlite3

import pytest
from sqlalchemy.exc import OperationalError

from service.store.faults import FULL_STATE, READ_ONLY_STATE, fault_of


class Remote(Exception):
    def __init__(self, words, state):
        super().__init__(words)
        self.sqlstate = state


@pytest.mark.parametrize(
    ("original", "status", "words"),
    [
        (sqlite3.OperationalError("database or disk is full"), 507, "disk is full"),
        (sqlite3.OperationalError("attempt to write a readonly database"), 503, "only be read"),
        (sqlite3.OperationalError("database is locked"), 503, "busy"),
        (sqlite3.OperationalError("disk I/O error"), 503, "does not answer"),
        (Remote("could not extend file", FULL_STATE), 507, "disk is full"),
        (Remote("cannot execute INSERT", READ_ONLY_STATE), 503, "only be read"),
        (Remote("the connection was closed", None), 503, "does not answer"),
    ],
)
def test_complaints_become_problems(original, status, words):
    problem = fault_of(OperationalError("statement", {}, original))
    assert problem.status == status
    assert words in problem.detail
    assert "nothing was changed" in problem.detail
    assert str(original) not in problem.detail or words in str(original)
