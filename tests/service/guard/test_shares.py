from __future__ import annotations

from contextlib import ExitStack

import pytest

from service.guard.record import CURRENT, Record
from service.guard.shares import Shares
from service.problems import Problem


@pytest.fixture
def shares():
    yield Shares(2)
    CURRENT.set(None)


def come_from(address, key=None):
    CURRENT.set(Record(id="r", method="GET", path="/", query="", address=address, begun=0.0, key=key))


def assert_most(shares, limit, tries=5):
    """So much may be under way at once, of so many tries."""
    with ExitStack() as held:
        for number in range(tries):
            if number == limit:
                with pytest.raises(Problem) as caught:
                    held.enter_context(shares.held())
                assert caught.value.status == 429
                assert int(caught.value.headers["Retry-After"]) >= 1
                return
            held.enter_context(shares.held())


def test_each_key_has_its_share(shares):
    come_from("127.0.0.1", "a")
    with shares.held(), shares.held():
        with pytest.raises(Problem), shares.held():
            pass
        come_from("127.0.0.1", "b")
        assert_most(shares, 2)
    come_from("127.0.0.1", "a")
    assert_most(shares, 2)
    assert not shares._held


def test_machines_without_keys_have_theirs(shares):
    come_from("192.0.2.1")
    with shares.held(), shares.held():
        assert_most(shares, 0)
        come_from("2001:db8::/64")
        assert_most(shares, 2)


def test_programs_of_this_machine_are_no_rivals(shares):
    for address in ("127.0.0.1", "::1"):
        come_from(address)
        assert_most(shares, None)
    CURRENT.set(None)
    assert_most(shares, None)


def test_place_is_given_back_after_a_fault(shares):
    come_from("192.0.2.1")
    for _ in range(5):
        with pytest.raises(RuntimeError), shares.held():
            raise RuntimeError
    assert_most(shares, 2)
