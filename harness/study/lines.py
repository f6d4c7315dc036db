"""On which line of a TOML file each key stands.

The standard reader of TOML keeps no places, so a message could not say where its key is. This scan
finds the keys and skips the values; whether the file is TOML at all is left to the reader.
"""

from __future__ import annotations

import re
import tomllib
from bisect import bisect_right

from harness.study.mistakes import KeyPath

_BLANK = re.compile(r"(?:[ \t\r\n]|#[^\n]*)*")
_SPACE = re.compile(r"[ \t]*")
_KEY = re.compile(r"[A-Za-z0-9_-]+|\"(?:[^\"\\\n]|\\.)*\"|'[^'\n]*'")
# Text in three quotes may end in one or two more of them.
_STRING = re.compile(
    r'"""(?:[^\\]|\\.)*?"""(?:"{0,2})'
    r"|'''.*?'''(?:'{0,2})"
    r'|"(?:[^"\\\n]|\\.)*"'
    r"|'[^'\n]*'",
    re.DOTALL,
)
_PLAIN = re.compile(r"[^,\]\}\n#]+")


class KeyLines:
    """The lines of a file's keys, as far as the file could be followed.

    lines       path of a key, table or entry of a list -> line, from 1
    repeated    keys and tables stated again: path, line, line of the first
    open_since  line of the statement that the scan could not finish, None if it came to the end
    """

    def __init__(self, text: str) -> None:
        self.lines: dict[KeyPath, int] = {}
        self.repeated: list[tuple[KeyPath, int, int]] = []
        self.open_since: int | None = None
        self._text = text
        self._at = 0
        self._newlines = [match.start() for match in re.finditer("\n", text)]
        self._stated: dict[KeyPath, int] = {}
        self._tables: dict[KeyPath, int] = {}  # how many entries a list of tables has so far
        self._scan()

    def _scan(self) -> None:
        table: KeyPath = ()
        self._skip(_BLANK)
        while self._at < len(self._text):
            started = self._line()
            try:
                if self._next() == "[":
                    table = self._header()
                else:
                    self._statement(table)
            except (_Unreadable, RecursionError):
                self.open_since = started
                return
            self._skip(_BLANK)

    def _header(self) -> KeyPath:
        line = self._line()
        is_list = self._text.startswith("[[", self._at)
        self._at += 2 if is_list else 1
        path = self._placed(self._key())
        self._expect("]]" if is_list else "]")
        if is_list:
            entry = self._tables.get(path, 0)
            self._tables[path] = entry + 1
            self.lines.setdefault(path, line)
            path = (*path, entry)
        self._note(path, line)
        return path

    def _placed(self, key: KeyPath) -> KeyPath:
        """Put the entry of a list of tables into a header that goes on in its last entry."""
        path: KeyPath = ()
        for depth, name in enumerate(key):
            path = (*path, name)
            if path in self._tables and depth < len(key) - 1:
                path = (*path, self._tables[path] - 1)
        return path

    def _statement(self, table: KeyPath) -> None:
        line = self._line()
        path = (*table, *self._key())
        self._expect("=")
        self._note(path, line)
        self._value(path)

    def _value(self, path: KeyPath) -> None:
        self._skip(_SPACE)
        opening = self._next()
        if opening == "[":
            self._list(path)
        elif opening == "{":
            self._inline_table(path)
        else:
            self._match(_STRING if opening in "\"'" else _PLAIN)

    def _list(self, path: KeyPath) -> None:
        self._expect("[")
        entry = 0
        while self._ahead() != "]":
            self.lines[(*path, entry)] = self._line()
            self._value((*path, entry))
            entry += 1
            if self._ahead() != "]":
                self._expect(",")
        self._expect("]")

    def _inline_table(self, path: KeyPath) -> None:
        self._expect("{")
        while self._ahead() != "}":
            self._statement(path)
            if self._ahead() != "}":
                self._expect(",")
        self._expect("}")

    def _key(self) -> KeyPath:
        parts: list[str] = []
        while True:
            self._skip(_SPACE)
            parts.append(_plain_name(self._match(_KEY)))
            self._skip(_SPACE)
            if self._next() != ".":
                return tuple(parts)
            self._at += 1

    def _note(self, path: KeyPath, line: int) -> None:
        if path in self._stated:
            self.repeated.append((path, line, self._stated[path]))
            return
        self._stated[path] = line
        self.lines[path] = line
        for length in range(1, len(path)):
            self.lines.setdefault(path[:length], line)

    def _ahead(self) -> str:
        self._skip(_BLANK)
        return self._next()

    def _next(self) -> str:
        if self._at >= len(self._text):
            raise _Unreadable
        return self._text[self._at]

    def _skip(self, pattern: re.Pattern[str]) -> None:
        match = pattern.match(self._text, self._at)
        self._at = match.end() if match else self._at

    def _match(self, pattern: re.Pattern[str]) -> str:
        match = pattern.match(self._text, self._at)
        if match is None:
            raise _Unreadable
        self._at = match.end()
        return match.group()

    def _expect(self, mark: str) -> None:
        self._skip(_SPACE)
        if not self._text.startswith(mark, self._at):
            raise _Unreadable
        self._at += len(mark)

    def _line(self) -> int:
        return bisect_right(self._newlines, self._at - 1) + 1


class _Unreadable(Exception):
    """The text does not go on as TOML does."""


def _plain_name(written: str) -> str:
    if written[0] == "'":
        return written[1:-1]
    if written[0] != '"' or "\\" not in written:
        return written.strip('"')
    try:
        return str(tomllib.loads(f"name = {written}")["name"])
    except tomllib.TOMLDecodeError:
        raise _Unreadable from None
