"""Line numbers of the tables and keys of a TOML text, which the parser of the standard library does not tell.

The text must be valid: parse it first. What it holds is not looked at, only where each key stands.
"""

from __future__ import annotations

import re
import tomllib
from collections.abc import Mapping

__all__ = ["KeyPath", "Lines", "toml_lines"]

KeyPath = tuple[str | int, ...]  # keys from the top down; elements of arrays by their index

_BLANK = re.compile(r"(?:[ \t\r\n]|#[^\n]*)*")
_SPACE = re.compile(r"[ \t]*")
_KEY = re.compile(r'"(?:[^"\\\n]|\\.)*"|\'[^\'\n]*\'|[A-Za-z0-9_-]+')
_STRING = re.compile(r'"""(?:[^\\]|\\.)*?"""(?:"{0,2})|\'\'\'.*?\'\'\'(?:\'{0,2})|'
                     r'"(?:[^"\\\n]|\\.)*"|\'[^\'\n]*\'', re.DOTALL)
_PLAIN = re.compile(r"[^,\]}#\n]*")


class Lines:
    """Lines of a TOML text by path, the first one being 1."""

    def __init__(self, at: Mapping[KeyPath, int]):
        self._at = dict(at)

    def of(self, path: KeyPath) -> int:
        """Line of a path, or of what holds it where it has none of its own."""
        for end in range(len(path), 0, -1):
            if path[:end] in self._at:
                return self._at[path[:end]]
        return 1

    def paths(self) -> Mapping[KeyPath, int]:
        """Every path found, and its line."""
        return dict(self._at)


def toml_lines(text: str) -> Lines:
    """Lines of all tables and keys of a valid TOML text: dotted, quoted, inline and arrays of tables included."""
    scan = _Scan(text)
    scan.statements()
    return Lines(scan.found)


class _Scan:
    """One walk through a text; stops quietly where the text is not valid."""

    def __init__(self, text: str):
        self.text, self.at = text, 0
        self.found: dict[KeyPath, int] = {}
        self._counts: dict[KeyPath, int] = {}  # tables so far in each array of tables
        self._line, self._counted = 1, 0

    def line(self) -> int:
        """Line of the present place, counted on from the last one asked for."""
        self._line += self.text.count("\n", self._counted, self.at)
        self._counted = self.at
        return self._line

    def skip(self, pattern: re.Pattern[str]) -> str:
        """Go over what matches here, and give it."""
        match = pattern.match(self.text, self.at)
        if match is None:
            return ""
        self.at = match.end()
        return match[0]

    def eat(self, token: str) -> bool:
        """Go over `token` if it stands here."""
        if self.text.startswith(token, self.at):
            self.at += len(token)
            return True
        return False

    def note(self, path: KeyPath, line: int) -> None:
        """Keep the line of a path, and of the tables above it that have none yet."""
        for end in range(1, len(path) + 1):
            self.found.setdefault(path[:end], line)

    def key(self) -> KeyPath:
        """A key, dotted or not; empty where there is none."""
        parts: list[str | int] = []
        while True:
            self.skip(_SPACE)
            part = self.skip(_KEY)
            if not part:
                return ()
            parts.append(tomllib.loads(f"k = {part}")["k"] if part[0] in "\"'" else part)
            self.skip(_SPACE)
            if not self.eat("."):
                return tuple(parts)

    def statements(self) -> None:
        """The whole text: headers of tables, and keys with their values."""
        table: KeyPath = ()
        while True:
            self.skip(_BLANK)
            line = self.line()
            if self.eat("[["):
                table = self._next_of_array(self.key())
                self.eat("]]")
                self.found[table] = line
            elif self.eat("["):
                table = self._inside_arrays(self.key())
                self.eat("]")
                self.found[table] = line  # a table may be opened by one below it before its own header
            elif not self.pair(table):
                return
            self.note(table, line)

    def pair(self, table: KeyPath) -> bool:
        """A key and its value, in a table; whether there was one."""
        line, key = self.line(), self.key()
        if not key or not self.eat("="):
            return False
        self.note((*table, *key), line)
        self.skip(_SPACE)
        self.value((*table, *key))
        return True

    def value(self, path: KeyPath) -> None:
        """A value, and the keys within it."""
        if self.eat("["):
            self._elements(path)
        elif self.eat("{"):
            self._inline(path)
        elif not self.skip(_STRING):
            self.skip(_PLAIN)

    def _elements(self, path: KeyPath) -> None:
        index = 0
        self.skip(_BLANK)
        while self.at < len(self.text) and not self.eat("]"):
            before = self.at
            self.note((*path, index), self.line())
            self.value((*path, index))
            self.skip(_BLANK)
            self.eat(",")
            self.skip(_BLANK)
            index += 1
            if self.at == before:
                return

    def _inline(self, path: KeyPath) -> None:
        self.skip(_BLANK)
        while not self.eat("}"):
            if not self.pair(path):
                return
            self.skip(_BLANK)
            self.eat(",")
            self.skip(_BLANK)

    def _inside_arrays(self, key: KeyPath) -> KeyPath:
        """Path of a header: within an array of tables it means the last of them."""
        path: KeyPath = ()
        for part in key:
            path = (*path, part)
            if path in self._counts:
                path = (*path, self._counts[path] - 1)
        return path

    def _next_of_array(self, key: KeyPath) -> KeyPath:
        path = (*self._inside_arrays(key[:-1]), *key[-1:])
        self._counts[path] = self._counts.get(path, 0) + 1
        return (*path, self._counts[path] - 1)
