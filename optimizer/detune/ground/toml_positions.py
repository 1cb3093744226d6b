"""The line of every key in a TOML text that has been found valid before; only positions are taken here."""

from __future__ import annotations

import re
from bisect import bisect_right
from collections.abc import Mapping
from contextlib import suppress
from dataclasses import dataclass, field

KeyPath = tuple[str | int, ...]


@dataclass(frozen=True)
class Positions:
    """Line numbers by key path.

    open_table: path of the table open at the end of the text. last_statement: line where the last header or
    key begins, which is the one that breaks off in a text that stops being TOML.
    """

    lines: Mapping[KeyPath, int] = field(default_factory=dict)
    open_table: KeyPath = ()
    last_statement: int | None = None

    def line(self, path: KeyPath) -> int | None:
        """Return the 1-based line of the deepest known prefix of the path, or None when there is none."""
        for length in range(len(path), 0, -1):
            found = self.lines.get(tuple(path[:length]))
            if found is not None:
                return found
        return None


class _Broken(Exception):
    """The text stops being TOML here; only a text cut short for an error message gets this far."""


_BLANK = re.compile(r"(?:[ \t\n]|#[^\n]*)*")
_SPACE = re.compile(r"[ \t]*")
_BARE_KEY = re.compile(r"[A-Za-z0-9_-]+")
_BASIC = re.compile(r'"((?:[^"\\\n]|\\.)*)"')
_LITERAL = re.compile(r"'([^'\n]*)'")
_LONG_BASIC = re.compile(r'"""(?:[^"\\]|\\.|"{1,2}(?!"))*"{3,5}', re.DOTALL)
_LONG_LITERAL = re.compile(r"'''(?:[^']|'{1,2}(?!'))*'{3,5}", re.DOTALL)
_PLAIN = re.compile(r"[^,\]}#\n]+")
_ESCAPE = re.compile(r"\\(u[0-9A-Fa-f]{4}|U[0-9A-Fa-f]{8}|.)")
_ESCAPES = {"b": "\b", "t": "\t", "n": "\n", "f": "\f", "r": "\r", "e": "\x1b"}


def _unescaped(text: str) -> str:
    def one(match: re.Match[str]) -> str:
        code = match.group(1)
        return chr(int(code[1:], 16)) if len(code) > 1 else _ESCAPES.get(code, code)

    return _ESCAPE.sub(one, text)


class _Scan:
    def __init__(self, text: str) -> None:
        self.text = text
        self.place = 0
        self.breaks = [index for index, letter in enumerate(text) if letter == "\n"]
        self.lines: dict[KeyPath, int] = {}
        self.implied: set[KeyPath] = set()
        self.lengths: dict[KeyPath, int] = {}
        self.table: KeyPath = ()
        self.last_statement: int | None = None

    def line_here(self) -> int:
        return bisect_right(self.breaks, self.place - 1) + 1

    def skip(self, pattern: re.Pattern[str]) -> str:
        match = pattern.match(self.text, self.place)
        if match is None:
            raise _Broken
        self.place = match.end()
        return match.group()

    def accept(self, mark: str) -> bool:
        if self.text.startswith(mark, self.place):
            self.place += len(mark)
            return True
        return False

    def require(self, mark: str) -> None:
        if not self.accept(mark):
            raise _Broken

    def record(self, path: KeyPath, line: int) -> None:
        """Note a path as written here, and its parents as implied here unless they were seen before."""
        if path not in self.lines or path in self.implied:
            self.lines[path] = line
            self.implied.discard(path)
        for length in range(1, len(path)):
            parent = path[:length]
            if parent not in self.lines:
                self.lines[parent] = line
                self.implied.add(parent)

    def document(self) -> None:
        self.skip(_BLANK)
        while self.place < len(self.text):
            self.last_statement = self.line_here()
            if self.accept("[["):
                self.array_header()
            elif self.accept("["):
                line = self.line_here()
                self.table = self.with_indices(self.key())
                self.require("]")
                self.record(self.table, line)
            else:
                self.pair(self.table)
            self.skip(_BLANK)

    def array_header(self) -> None:
        line = self.line_here()
        *parents, last = self.key()
        self.require("]]")
        path = (*self.with_indices(tuple(parents)), last)
        index = self.lengths.get(path, 0)
        self.lengths[path] = index + 1
        self.table = (*path, index)
        # The array itself stands where its first table does.
        self.record(path, line)
        self.record(self.table, line)

    def with_indices(self, key: tuple[str, ...]) -> KeyPath:
        """Turn a header into a path: a name of an array of tables means its last table so far."""
        path: KeyPath = ()
        for step in key:
            path = (*path, step)
            if path in self.lengths:
                path = (*path, self.lengths[path] - 1)
        return path

    def key(self) -> tuple[str, ...]:
        steps: list[str] = []
        while True:
            self.skip(_SPACE)
            if self.text.startswith('"', self.place):
                steps.append(_unescaped(self.skip(_BASIC)[1:-1]))
            elif self.text.startswith("'", self.place):
                steps.append(self.skip(_LITERAL)[1:-1])
            else:
                steps.append(self.skip(_BARE_KEY))
            self.skip(_SPACE)
            if not self.accept("."):
                return tuple(steps)

    def pair(self, table: KeyPath) -> None:
        line = self.line_here()
        path = (*table, *self.key())
        self.record(path, line)
        self.require("=")
        self.skip(_SPACE)
        self.value(path)

    def value(self, path: KeyPath) -> None:
        if self.accept("["):
            self.array(path)
        elif self.accept("{"):
            self.inline_table(path)
        elif self.text.startswith('"""', self.place):
            self.skip(_LONG_BASIC)
        elif self.text.startswith("'''", self.place):
            self.skip(_LONG_LITERAL)
        elif self.text.startswith('"', self.place):
            self.skip(_BASIC)
        elif self.text.startswith("'", self.place):
            self.skip(_LITERAL)
        else:
            self.skip(_PLAIN)

    def array(self, path: KeyPath) -> None:
        index = 0
        self.skip(_BLANK)
        while not self.accept("]"):
            entry = (*path, index)
            self.record(entry, self.line_here())
            self.value(entry)
            index += 1
            self.skip(_BLANK)
            if not self.accept(","):
                self.require("]")
                return
            self.skip(_BLANK)

    def inline_table(self, path: KeyPath) -> None:
        self.skip(_BLANK)
        while not self.accept("}"):
            self.pair(path)
            self.skip(_BLANK)
            if not self.accept(","):
                self.require("}")
                return
            self.skip(_BLANK)


def positions_of(text: str) -> Positions:
    """Return the line of every table, key and array entry of a TOML text.

    A text that stops being TOML somewhere gives the positions up to there.
    """
    scan = _Scan(text)
    with suppress(_Broken):
        scan.document()
    return Positions(scan.lines, scan.table, scan.last_statement)
