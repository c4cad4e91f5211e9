"""Messages between the server and a worker: JSON, with file descriptors beside it."""

from __future__ import annotations

import os
import socket
import struct
from collections.abc import Sequence
from typing import Any

import orjson

_LENGTH = struct.Struct("!I")
MOST_DESCRIPTORS = 1


class Closed(Exception):
    """The other side has gone."""


def send(channel: socket.socket, message: dict[str, Any], descriptors: Sequence[int] = ()) -> None:
    """Send one message.

    Raises
    ------
    Closed
        The other side has gone.
    """
    payload = orjson.dumps(message)
    try:
        # Descriptors ride on the length, which is small enough to go out whole.
        socket.send_fds(channel, [_LENGTH.pack(len(payload))], list(descriptors))
        channel.sendall(payload)
    except (BrokenPipeError, ConnectionError) as fault:
        raise Closed from fault


def receive(channel: socket.socket) -> tuple[dict[str, Any], list[int]]:
    """Wait for one message.

    Raises
    ------
    Closed
        The other side has gone.
    TimeoutError
        The channel's time is up.
    """
    try:
        head, descriptors, _, _ = socket.recv_fds(channel, _LENGTH.size, MOST_DESCRIPTORS)
        for descriptor in descriptors:
            os.set_inheritable(descriptor, False)
        while 0 < len(head) < _LENGTH.size:
            head += _some(channel, _LENGTH.size - len(head))
        if not head:
            raise Closed
        payload = bytearray()
        (length,) = _LENGTH.unpack(head)
        while len(payload) < length:
            payload += _some(channel, length - len(payload))
    except ConnectionError as fault:
        raise Closed from fault
    message: dict[str, Any] = orjson.loads(payload)
    return message, descriptors


def _some(channel: socket.socket, size: int) -> bytes:
    data = channel.recv(min(size, 1 << 16))
    if not data:
        raise Closed
    return data
