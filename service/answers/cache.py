"""Encoded answers in memory, bounded by their bytes; the least recently used goes first."""

from __future__ import annotations

from collections import OrderedDict
from dataclasses import dataclass, field

LARGEST_SHARE = 0.25
"""An answer larger than this share of the cache is not kept: it would drive out all others."""

OVERHEAD = 2048
"""Bytes that an answer costs beside its body: headers, key, bookkeeping."""


@dataclass(slots=True)
class Kept:
    """One encoded answer.

    Attributes
    ----------
    body : memoryview
    media_type : str
    headers : dict of str to str
    seconds : float
        What it took to compute.
    coded : dict of str to bytes
        The body in content codings that were asked for.
    """

    body: memoryview
    media_type: str
    headers: dict[str, str]
    seconds: float
    coded: dict[str, bytes] = field(default_factory=dict)

    @property
    def size(self) -> int:
        return OVERHEAD + len(self.body) + sum(map(len, self.coded.values()))


class Cache:
    """Answers by their keys."""

    def __init__(self, most_bytes: int) -> None:
        self._most = most_bytes
        self._kept: OrderedDict[str, Kept] = OrderedDict()
        # As they were counted: an answer grows by the codings it is asked in.
        self._sizes: dict[str, int] = {}
        self.bytes = 0
        self.hits = 0
        self.misses = 0

    @property
    def largest(self) -> float:
        """Bytes beyond which an answer is not kept."""
        return LARGEST_SHARE * self._most

    def get(self, key: str) -> Kept | None:
        """The answer of a key; counts as used."""
        found = self._kept.get(key)
        if found is None:
            self.misses += 1
            return None
        self.hits += 1
        self._kept.move_to_end(key)
        return found

    def put(self, key: str, answer: Kept) -> None:
        """Keep an answer, or its grown self, if it is not too large."""
        if self._kept.pop(key, None) is not None:
            self.bytes -= self._sizes.pop(key)
        if answer.size > self.largest:
            return
        self._kept[key] = answer
        self._sizes[key] = answer.size
        self.bytes += answer.size
        while self.bytes > self._most:
            oldest, _ = self._kept.popitem(last=False)
            self.bytes -= self._sizes.pop(oldest)
