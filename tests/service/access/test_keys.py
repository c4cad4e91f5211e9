from __future__ import annotations

import hashlib
import hmac
import time

import pytest
from sqlalchemy import select

from service.access.keys import PATTERN, Keys
from service.problems import Problem
from service.store.database import open_database
from service.store.tables import KEYS


def test_key_is_known_by_its_digest_alone(keys, database):
    key, text = keys.create("a dashboard", ["compute", "read", "read"])
    assert PATTERN.fullmatch(text)
    assert len(text.rpartition("_")[2]) == 2 * 32
    assert (key.name, key.scopes, key.revoked) == ("a dashboard", ("read", "compute"), None)
    assert abs(key.created - time.time()) < 60
    with database.reading() as connection:
        (row,) = connection.execute(select(KEYS)).all()
    assert row.digest == hashlib.sha256(text.encode()).hexdigest()
    secret = text.rpartition("_")[2]
    assert not any(secret in str(value) for value in row)
    assert keys.check(text) == key


def test_nothing_of_a_key_is_in_the_files(keys, tmp_path):
    _, text = keys.create("a", ["read"])
    secret = text.rpartition("_")[2].encode()
    assert all(secret not in path.read_bytes() for path in tmp_path.rglob("*") if path.is_file())


def test_other_texts_are_no_keys(keys):
    _, text = keys.create("a", ["read"])
    _, other = keys.create("b", ["read"])
    prefix, secret = text.rpartition("_")[0], other.rpartition("_")[2]
    last = "0" if text[-1] != "0" else "1"
    for wrong in (
        "",
        text[:-1],
        text[:-1] + last,
        text + "0",
        text.upper(),
        f" {text}",
        f"{prefix}_{secret}",
        f"dl_{'0' * 16}_{secret}",
        "dl_" + "é" * 81,
        "0" * 64,
        prefix,
        text + "\n",
    ):
        assert keys.check(wrong) is None, wrong
    assert keys.check(text) is not None


def test_digests_are_compared_also_for_an_unknown_id(keys, monkeypatch):
    compared = []
    whole = hmac.compare_digest
    monkeypatch.setattr(hmac, "compare_digest", lambda *both: compared.append(both) or whole(*both))
    assert keys.check(f"dl_{'0' * 16}_{'0' * 64}") is None
    ((one, other),) = compared
    assert isinstance(one, bytes)
    assert len(one) == len(other) == 64


def test_revoked_key_is_refused_at_once(keys):
    key, text = keys.create("a", ["read"])
    kept, kept_text = keys.create("b", ["write"])
    assert keys.check(text) is not None
    assert keys.revoke(key.id)
    assert keys.check(text) is None
    assert not keys.revoke(key.id)
    assert not keys.revoke("0" * 16)
    assert keys.check(kept_text) == kept
    first, second = keys.all()
    assert (first.id, second.id) == (key.id, kept.id)
    assert first.revoked is not None
    assert second.revoked is None


def test_whether_a_key_is_in_force(keys):
    assert not keys.any_valid()
    key, _ = keys.create("a", ["read"])
    assert keys.any_valid()
    keys.revoke(key.id)
    assert not keys.any_valid()


@pytest.mark.parametrize(
    ("name", "scopes"),
    [("", ["read"]), ("  ", ["read"]), ("a" * 201, ["read"]), ("a\nb", ["read"]), ("a", []), ("a", ["read", "admin"])],
)
def test_bad_keys_are_not_made(keys, name, scopes):
    with pytest.raises(ValueError, match="key"):
        keys.create(name, scopes)
    assert keys.all() == ()


def test_without_a_store_nothing_passes():
    keys = Keys(None)
    for text in ("", "nonsense", f"dl_{'0' * 16}_{'0' * 64}"):
        with pytest.raises(Problem) as caught:
            keys.check(text)
        assert (caught.value.kind, caught.value.status) == ("store-unavailable", 503)
        assert int(caught.value.headers["Retry-After"]) > 0
    with pytest.raises(Problem):
        keys.any_valid()


def test_keys_outlive_the_process(keys, address):
    key, text = keys.create("a", ["read"])
    again = open_database(*address)
    assert Keys(again).check(text) == key
    again.close()
