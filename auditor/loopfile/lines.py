"""On which line of a TOML text each key stands; for texts that are known to be valid TOML."""

from __future__ import annotations

import bisect
import re
from collections.abc import Mapping
from typing import TypeAlias

KeyPath: TypeAlias = tuple[str | int, ...]

_TOKEN = re.compile(
    r'"""(?:\\.|(?!""").)*""""{0,2}'
    r"|'''(?:(?!''').)*''''{0,2}"
    r'|"(?:\\.|[^"\\\n])*"'
    r"|'[^'\n]*'"
    r"|#[^\n]*"
    r"|[\[\]{}=,\n]"
    r"|[^\s\[\]{}=,#\"']+",
    re.DOTALL,
)
_KEY_PART = re.compile(r"\"[^\"]*\"|'[^']*'|[^.\s]+")


def key_lines(text: str) -> Mapping[KeyPath, int]:
    """Return the line (from 1) of every table and key of a valid TOML text; list members are whole numbers from 0."""
    return _Locator(text).lines


def line_of(path: KeyPath, lines: Mapping[KeyPath, int]) -> int | None:
    """Return the line of `path`, or of the nearest table above it that is in the file."""
    for length in range(len(path), 0, -1):
        if path[:length] in lines:
            return lines[path[:length]]
    return None


class _Locator:
    """A walk over the tokens; the values themselves are of no interest."""

    def __init__(self, text: str) -> None:
        self.lines: dict[KeyPath, int] = {}
        self._tokens = [m for m in _TOKEN.finditer(text) if not m[0].startswith("#")]
        self._line_starts = [m.end() for m in re.finditer("\n", text)]
        self._at = 0
        self._members: dict[KeyPath, int] = {}
        self._walk()

    def _walk(self) -> None:
        table: KeyPath = ()
        while self._at < len(self._tokens):
            token = self._peek()
            if token == "\n":
                self._at += 1
            elif token == "[":
                table = self._header()
            else:
                self._pair(table)
                self._skip_to("\n")

    def _peek(self) -> str:
        return self._tokens[self._at][0] if self._at < len(self._tokens) else ""

    def _note(self, path: KeyPath) -> None:
        position = self._tokens[min(self._at, len(self._tokens) - 1)].start()
        self.lines.setdefault(path, 1 + bisect.bisect_right(self._line_starts, position))

    def _header(self) -> KeyPath:
        self._at += 1
        many = self._peek() == "["
        self._at += many
        path = self._through_members(self._key("]"), many)
        self._note(path)
        self._skip_to("\n")
        return path

    def _through_members(self, parts: KeyPath, many: bool) -> KeyPath:
        """Put the number of the current member behind every list of tables on the way."""
        path: KeyPath = ()
        for depth, part in enumerate(parts, start=1):
            path = (*path, part)
            if many and depth == len(parts):
                self._members[path] = self._members.get(path, -1) + 1
            if path in self._members:
                path = (*path, self._members[path])
        return path

    def _key(self, end: str) -> KeyPath:
        """Read the parts of a key up to `end`, which stays unread."""
        written = ""
        while self._peek() not in (end, ""):
            written += self._peek()
            self._at += 1
        return tuple(part.strip("\"'") for part in _KEY_PART.findall(written))

    def _pair(self, table: KeyPath) -> None:
        first = self._at
        parts = self._key("=")
        after, self._at = self._at, first
        for length in range(1, len(parts) + 1):
            self._note(table + parts[:length])
        self._at = after + 1
        self._value(table + parts)

    def _value(self, path: KeyPath) -> None:
        token = self._peek()
        self._at += 1
        if token == "{":
            self._inline_table(path)
        elif token == "[":
            self._list(path)

    def _inline_table(self, path: KeyPath) -> None:
        while self._peek() not in ("}", ""):
            if self._peek() in (",", "\n"):
                self._at += 1
            else:
                self._pair(path)
                self._skip_to(",", "}")
        self._at += 1

    def _list(self, path: KeyPath) -> None:
        member = 0
        while self._peek() not in ("]", ""):
            if self._peek() in (",", "\n"):
                self._at += 1
            else:
                self._note((*path, member))
                self._value((*path, member))
                self._skip_to(",", "]")
                member += 1
        self._at += 1

    def _skip_to(self, *ends: str) -> None:
        while self._peek() not in (*ends, ""):
            self._at += 1
