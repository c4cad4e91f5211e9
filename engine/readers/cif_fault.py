"""Where a CIF 1 text breaks the syntax; used only to report a text that has been refused."""

from __future__ import annotations

import re

_TOKEN = re.compile(
    r"""
    (?P<space>[ \t\n\f]+) | (?P<comment>\#[^\n]*)
    | (?P<field>(?:(?<=\n)|(?<=\A));.*?(?:\n;|(?P<endless>\Z)))
    | (?P<quoted>'[^\n]*?'(?=[ \t\n]|\Z)|"[^\n]*?"(?=[ \t\n]|\Z))
    | (?P<open>['"][^\n]*)
    | (?P<word>[^ \t\n]+)
    """,
    re.VERBOSE | re.DOTALL,
)
_RESERVED = ("loop_", "global_", "stop_")


def find_fault(text: str) -> tuple[int, str] | None:
    """Line (from 1) and description of the first fault of syntax, or None where none is seen."""
    return _Reading(text).run()


class _Reading:
    """One pass over the tokens, with what the syntax remembers between them."""

    def __init__(self, text: str) -> None:
        self.text = text
        self.blocks: set[str] = set()
        self.names: set[str] = set()
        self.waiting = ""
        self.waiting_at = 0
        self.header: list[str] | None = None
        self.loop_at = 0
        self.values = 0
        self.begun = False

    def run(self) -> tuple[int, str] | None:
        for match in _TOKEN.finditer(self.text):
            kind = match.lastgroup or ""
            if kind in ("space", "comment"):
                continue
            fault = self._step(kind, match)
            if fault is not None:
                return fault
        return self._loop_ends() or self._value_missing()

    def _step(self, kind: str, match: re.Match[str]) -> tuple[int, str] | None:
        word, at = match.group(), match.start()
        if kind == "endless" or (kind == "field" and match.group("endless") is not None):
            return self._line(at), "a text field that begins with ; is never closed"
        if kind == "open":
            return self._line(at), "a quotation mark is not closed on its line"
        lower = word.lower()
        if kind == "word" and lower.startswith("data_"):
            return self._loop_ends() or self._value_missing() or self._block(lower, at)
        if not self.begun:
            return self._line(at), "the text does not begin with a data block"
        if kind == "word" and word.startswith("_"):
            return self._name(lower, at)
        if kind == "word" and (lower in _RESERVED or lower.startswith("save_")):
            return self._loop_ends() or self._value_missing() or self._reserved(lower, at)
        return self._value(word, at)

    def _block(self, lower: str, at: int) -> tuple[int, str] | None:
        if lower == "data_":
            return self._line(at), "a data block has no name"
        if lower in self.blocks:
            return self._line(at), f"the data block {lower[5:45]!r} comes a second time"
        self.blocks.add(lower)
        self.names, self.begun = set(), True
        return None

    def _reserved(self, lower: str, at: int) -> tuple[int, str] | None:
        if lower in ("global_", "stop_"):
            return self._line(at), f"the word {lower} is reserved and has no place here"
        if lower == "loop_":
            self.header, self.loop_at, self.values = [], at, 0
        else:
            # A save frame has names of its own.
            self.names = set()
        return None

    def _name(self, lower: str, at: int) -> tuple[int, str] | None:
        fault = self._value_missing()
        if fault is None and self.header is not None and self.values:
            fault = self._loop_ends()
        if fault is not None:
            return fault
        if lower in self.names:
            return self._line(at), f"the item {lower[:60]} comes a second time in its data block"
        self.names.add(lower)
        if self.header is None:
            self.waiting, self.waiting_at = lower, at
        else:
            self.header.append(lower)
        return None

    def _value(self, word: str, at: int) -> tuple[int, str] | None:
        if self.waiting:
            self.waiting = ""
        elif self.header:
            self.values += 1
        else:
            return self._line(at), f"the value {word[:20]!r} belongs to no item"
        return None

    def _value_missing(self) -> tuple[int, str] | None:
        if not self.waiting:
            return None
        return self._line(self.waiting_at), f"the item {self.waiting[:60]} has no value"

    def _loop_ends(self) -> tuple[int, str] | None:
        if self.header is None:
            return None
        header, self.header = self.header, None
        if not header or not self.values:
            return self._line(self.loop_at), f"the loop has no {'values' if header else 'items'}"
        if self.values % len(header):
            reason = f"the loop of {header[0][:60]} has {self.values} values, not a multiple of its {len(header)} items"
            return self._line(self.loop_at), reason
        return None

    def _line(self, at: int) -> int:
        return self.text.count("\n", 0, at) + 1
