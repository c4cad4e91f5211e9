from __future__ import annotations

import os
import socket
import threading

import pytest

from service.spool import Spool
from service.wall import wire


@pytest.fixture
def ends():
    one, other = socket.socketpair()
    with one, other:
        yield one, other


def test_message_and_descriptor_arrive(ends):
    one, other = ends
    with Spool.unnamed() as spool:
        spool.append(b"carried")
        wire.send(one, {"form": "npy", "n": 1.5}, [spool.descriptor])
        message, descriptors = wire.receive(other)
    assert message == {"form": "npy", "n": 1.5}
    assert len(descriptors) == 1
    with Spool(descriptors[0]) as carried:
        assert bytes(carried.view()) == b"carried"


def test_messages_keep_their_order_and_bounds(ends):
    one, other = ends
    for number in range(3):
        wire.send(one, {"n": number})
    assert [wire.receive(other)[0]["n"] for _ in range(3)] == [0, 1, 2]


def test_long_message_arrives_whole(ends):
    one, other = ends
    text = "é" * 2_000_000
    sender = threading.Thread(target=wire.send, args=(one, {"text": text}))
    sender.start()
    assert wire.receive(other)[0]["text"] == text
    sender.join()


def test_other_side_gone(ends):
    one, other = ends
    other.close()
    with pytest.raises(wire.Closed):
        wire.receive(one)
    with pytest.raises(wire.Closed):
        wire.send(one, {})


@pytest.mark.parametrize("length", [2, 6])
def test_other_side_gone_in_the_middle(ends, length):
    one, other = ends
    one.sendall(b"\x00\x00\x00\x09[1,2"[:length])
    one.close()
    with pytest.raises(wire.Closed):
        wire.receive(other)


def test_length_that_comes_in_pieces(ends):
    one, other = ends
    one.sendall(b"\x00\x00")
    rest = threading.Timer(0.05, one.sendall, [b'\x00\x07{"a":1}'])
    rest.start()
    assert wire.receive(other) == ({"a": 1}, [])
    rest.join()


def test_time_is_up(ends):
    one, _ = ends
    one.settimeout(0.02)
    with pytest.raises(TimeoutError):
        wire.receive(one)


def test_descriptors_are_not_inherited(ends):
    one, other = ends
    with Spool.unnamed() as spool:
        wire.send(one, {}, [spool.descriptor])
        _, descriptors = wire.receive(other)
    assert not os.get_inheritable(descriptors[0])
    os.close(descriptors[0])
