from __future__ import annotations

import os

import numpy as np
import pytest

from service.spool import Spool


@pytest.fixture(params=["memory", "file"])
def unnamed(request, monkeypatch):
    """Both kinds: memory, and the unlinked file of systems without it."""
    if request.param == "file":
        monkeypatch.delattr(os, "memfd_create", raising=False)
    elif not hasattr(os, "memfd_create"):
        pytest.skip("no memory files here")
    with Spool.unnamed() as spool:
        yield spool


def test_bytes_come_back(unnamed):
    assert unnamed.size == 0
    assert bytes(unnamed.view()) == b""
    unnamed.append(b"abc")
    unnamed.append(bytearray(b"def"))
    unnamed.append(memoryview(np.arange(2, dtype=np.int16)))
    assert unnamed.size == 10
    assert bytes(unnamed.view()) == b"abcdef" + np.arange(2, dtype=np.int16).tobytes()


def test_array_is_computed_in_place(unnamed):
    unnamed.append(b"headline")
    room = unnamed.array((3, 4), np.dtype(np.float64))
    assert room.shape == (3, 4)
    assert room.flags.c_contiguous
    assert room.flags.writeable
    room[...] = np.arange(12.0).reshape(3, 4)
    unnamed.append(b"end")
    content = bytes(unnamed.view())
    assert content[:8] == b"headline"
    assert content[-3:] == b"end"
    np.testing.assert_array_equal(np.frombuffer(content[8:-3]).reshape(3, 4), room)


def test_views_outlive_the_spool(unnamed):
    unnamed.append(b"kept")
    room = unnamed.array((2,), np.dtype(np.float32))
    room[:] = 7
    view = unnamed.view()
    unnamed.close()
    assert bytes(view[:4]) == b"kept"
    np.testing.assert_array_equal(room, [7, 7])
    with pytest.raises(TypeError, match="read-only"):
        view[0] = 0


def test_closing_twice_does_nothing(unnamed):
    unnamed.close()
    unnamed.close()
    assert unnamed.descriptor == -1


def test_unnamed_spools_are_not_inherited(unnamed):
    assert not os.get_inheritable(unnamed.descriptor)


def test_file(tmp_path):
    path = tmp_path / "out.npy"
    path.write_bytes(b"something longer that was there before")
    with Spool.at(path) as spool:
        spool.append(b"new")
        room = spool.array((2,), np.dtype(np.int64))
        room[:] = (1, 2)
    del room
    assert path.read_bytes() == b"new" + np.array([1, 2]).tobytes()
    assert path.stat().st_mode & 0o777 == 0o644 & ~_umask()


def _umask():
    mask = os.umask(0)
    os.umask(mask)
    return mask
