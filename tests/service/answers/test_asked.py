from __future__ import annotations

import json
from urllib.parse import urlencode

import pytest

from service.answers import asked as module
from service.answers.asked import LONGEST, understand
from service.problems import Problem

ID = "0" * 64
PROFILE = {"from": "0,0,0", "to": "1,0,0", "samples": "5"}


def understood(product="profile", members=PROFILE, identity=ID, accept="*/*"):
    return understand(product, identity, urlencode(members), accept)


def test_a_worker_gets_the_request_and_the_set():
    found = understood()
    assert json.loads(found.body) == {"from": [0, 0, 0], "to": [1, 0, 0], "samples": 5, "set_id": ID}
    assert (found.product, found.form) == ("profile", "json")


def test_one_request_has_one_key_however_it_is_written():
    keys = {
        understood().key,
        understood(members=dict(reversed(PROFILE.items()))).key,
        understood(members={**PROFILE, "from": "[0, 0, 0]"}).key,
        understood(members={**PROFILE, "format": "json"}, accept="image/png").key,
        understood(accept="application/json").key,
    }
    assert len(keys) == 1


def test_whatever_changes_the_answer_changes_the_key(monkeypatch):
    keys = [
        understood().key,
        understood(identity="1" * 64).key,
        understood(members={**PROFILE, "samples": "6"}).key,
        understood(members={**PROFILE, "format": "npy"}).key,
        understood(accept="text/csv").key,
        understood("layers", {"from": "0", "to": "1"}).key,
    ]
    monkeypatch.setattr(module, "RELEASE", "another")
    module._remembered.cache_clear()
    keys.append(understood().key)
    module._remembered.cache_clear()
    assert len(set(keys)) == len(keys)


@pytest.mark.parametrize(
    ("members", "status"),
    [
        ({**PROFILE, "colour": "red"}, 422),
        ({**PROFILE, "samples": "1"}, 422),
        ({**PROFILE, "format": "tiff"}, 406),
        ([*PROFILE.items(), ("format", "npy"), ("format", "csv")], 422),
        ([*PROFILE.items(), ("samples", "7")], 422),
        ({}, 422),
    ],
)
def test_faults_are_told_each_time(members, status):
    for _ in range(2):
        with pytest.raises(Problem) as caught:
            understood(members=members)
        assert caught.value.status == status


def test_a_long_query_is_understood_and_not_remembered():
    positions = json.dumps([[0.1, 0.2, 0.3]] * 400)
    before = module._remembered.cache_info().currsize
    found = understood("points", {"positions": positions})
    assert len(positions) > LONGEST
    assert len(json.loads(found.body)["positions"]) == 400
    assert module._remembered.cache_info().currsize == before
