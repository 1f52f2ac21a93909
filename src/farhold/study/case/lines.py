"""From the path of a key in a TOML text to the line it stands on.

``tomllib`` gives values without places. This reads the same text a second time, after ``tomllib`` has found
it lawful, and only notes where each key, table and list element begins; so it need not judge anything.
"""

from __future__ import annotations

import bisect
import tomllib
from dataclasses import dataclass, field

__all__ = ["KeyPath", "Lines", "index_lines"]

KeyPath = tuple[str | int, ...]
"""Keys and places in lists (from 0), such as ``("formation", "wide", "slots", 0, "radius")``."""

_BLANK = " \t"
_LOOSE = " \t\r\n"


@dataclass(frozen=True, slots=True)
class Lines:
    """Line (from 1) of every key path of a text."""

    lines: dict[KeyPath, int] = field(default_factory=dict)

    def at(self, path: KeyPath) -> int:
        """Return the line of `path`, or of its nearest parent that stands in the text (line 1 for none)."""
        for stop in range(len(path), 0, -1):
            if path[:stop] in self.lines:
                return self.lines[path[:stop]]
        return 1


def index_lines(text: str) -> Lines:
    """Index a lawful TOML text: tables, arrays of tables, dotted keys, inline tables, multi-line arrays."""
    return Lines(_Reader(text).read())


class _Reader:
    """One pass over a lawful text; `pos` is where the next character is taken."""

    def __init__(self, text: str) -> None:
        self.text = text
        self.pos = 0
        self.newlines = [i for i, character in enumerate(text) if character == "\n"]
        self.lines: dict[KeyPath, int] = {}
        self.counts: dict[KeyPath, int] = {}

    def read(self) -> dict[KeyPath, int]:
        prefix: KeyPath = ()
        while True:
            self._skip_loose()
            if self.pos >= len(self.text):
                return self.lines
            if self.text.startswith("[[", self.pos):
                prefix = self._list_header()
            elif self.text[self.pos] == "[":
                prefix = self._table_header()
            else:
                self._pair(prefix)

    def _list_header(self) -> KeyPath:
        start = self.pos
        self.pos += 2
        *parents, last = self._key()
        self.pos = self.text.index("]]", self.pos) + 2
        base = (*self._resolve(parents, start), last)
        n = self.counts.get(base, 0)
        self.counts[base] = n + 1
        self._note(base, start)
        self._note((*base, n), start)
        return (*base, n)

    def _table_header(self) -> KeyPath:
        start = self.pos
        self.pos += 1
        keys = self._key()
        self.pos = self.text.index("]", self.pos) + 1
        return self._resolve(keys, start)

    def _resolve(self, keys: list[str], start: int) -> KeyPath:
        """Path of a header's keys; one that names a list of tables stands for its last table."""
        path: KeyPath = ()
        for key in keys:
            path = (*path, key)
            if path in self.counts:
                path = (*path, self.counts[path] - 1)
            self._note(path, start)
        return path

    def _pair(self, prefix: KeyPath) -> None:
        start = self.pos
        path = prefix
        for key in self._key():
            path = (*path, key)
            self._note(path, start)
        self.pos = self.text.index("=", self.pos) + 1
        self._value(path)

    def _key(self) -> list[str]:
        """Read ``a.b."c d"`` and stop behind it."""
        keys: list[str] = []
        while True:
            self._skip(_BLANK)
            start = self.pos
            if self.text[self.pos] in "\"'":
                self._string()
                keys.append(tomllib.loads(f"key = {self.text[start : self.pos]}")["key"])
            else:
                while self.text[self.pos] not in " \t.=]":
                    self.pos += 1
                keys.append(self.text[start : self.pos])
            self._skip(_BLANK)
            if self.text[self.pos] != ".":
                return keys
            self.pos += 1

    def _value(self, path: KeyPath) -> None:
        self._skip(_BLANK)
        character = self.text[self.pos]
        if character in "\"'":
            self._string()
        elif character == "[":
            self._items(path, "]")
        elif character == "{":
            self._items(path, "}")
        else:
            while self.pos < len(self.text) and self.text[self.pos] not in ",]}#\n":
                self.pos += 1

    def _items(self, path: KeyPath, end: str) -> None:
        """Read what stands in brackets (values) or braces (pairs), up to `end`."""
        self.pos += 1
        n = 0
        while True:
            self._skip_loose()
            if self.text[self.pos] == end:
                self.pos += 1
                return
            if self.text[self.pos] == ",":
                self.pos += 1
            elif end == "}":
                self._pair(path)
            else:
                self._note((*path, n), self.pos)
                self._value((*path, n))
                n += 1

    def _string(self) -> None:
        quote = self.text[self.pos]
        long = self.text.startswith(quote * 3, self.pos)
        mark = quote * 3 if long else quote
        self.pos += len(mark)
        while not self.text.startswith(mark, self.pos):
            self.pos += 2 if quote == '"' and self.text[self.pos] == "\\" else 1
        self.pos += len(mark)
        # a long string may end in up to two quotes of its own, just before its closing mark
        while long and self.text.startswith(quote, self.pos):
            self.pos += 1

    def _skip(self, characters: str) -> None:
        while self.pos < len(self.text) and self.text[self.pos] in characters:
            self.pos += 1

    def _skip_loose(self) -> None:
        """Skip blanks, line ends and comments."""
        while True:
            self._skip(_LOOSE)
            if not self.text.startswith("#", self.pos):
                return
            end = self.text.find("\n", self.pos)
            self.pos = len(self.text) if end < 0 else end

    def _note(self, path: KeyPath, start: int) -> None:
        self.lines.setdefault(path, bisect.bisect_left(self.newlines, start) + 1)
