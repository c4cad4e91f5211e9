from __future__ import annotations

import dataclasses

import pytest

from service.parts import Part


def test_part_is_a_value():
    part = Part("text/csv", b"l\n1\n")
    assert part == Part("text/csv", b"l\n1\n", "")
    assert part != Part("text/csv", b"l\n1\n", "film.csv")
    with pytest.raises(dataclasses.FrozenInstanceError):
        part.data = b""
