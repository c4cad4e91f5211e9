from __future__ import annotations

import pytest

from service.routes.conditions import is_current


@pytest.mark.parametrize(
    ("header", "current"),
    [
        (None, False),
        ("", False),
        ('"a"', True),
        ('W/"a"', True),
        ('"b", "a"', True),
        ('"b"', False),
        ("a", False),
        ("*", True),
        ('"a', False),
        ('"xa"', False),
    ],
)
def test_a_tag_is_compared_as_the_standard_says(header, current):
    assert is_current(header, '"a"') is current


def test_a_weak_tag_of_ours_is_compared_by_its_text():
    assert is_current('"a"', 'W/"a"')
