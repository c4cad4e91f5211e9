"""Conditional requests (RFC 9110 §13): does the client hold this answer already?"""

from __future__ import annotations

import re

_TAG = re.compile(r'(?:W/)?("[^"]*")')


def is_current(if_none_match: str | None, tag: str) -> bool:
    """Whether an If-None-Match header names a tag, by weak comparison as for GET and HEAD."""
    if if_none_match is None:
        return False
    if if_none_match.strip() == "*":
        return True
    return tag.removeprefix("W/") in _TAG.findall(if_none_match)
