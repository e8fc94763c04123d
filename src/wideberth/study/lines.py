"""On which line of a TOML text each key stands; parsers do not tell.

Runs after the standard parser has accepted the text, so it only has to follow valid TOML.
"""

from __future__ import annotations

import tomllib
from dataclasses import dataclass, field

KeyPath = tuple[str | int, ...]


def key_lines(text: str) -> dict[KeyPath, int]:
    """Map every key path of a valid TOML text to its line, counted from 1.

    Arrays of tables and arrays count their items from 0, as in ``("constraints", 0, "name")``.
    """
    return _Scanner(text).scan()


@dataclass(slots=True)
class _Scanner:
    text: str
    at: int = 0
    table: KeyPath = ()
    lines: dict[KeyPath, int] = field(default_factory=dict)
    counts: dict[KeyPath, int] = field(default_factory=dict)

    def scan(self) -> dict[KeyPath, int]:
        while self._skip(" \t\r\n"):
            if self._peek() == "[":
                self._header()
            else:
                self._pair(self.table)
        return self.lines

    def _peek(self) -> str:
        return self.text[self.at : self.at + 1]

    def _skip(self, blanks: str) -> bool:
        """Skip blanks and comments; tell whether anything is left."""
        while self.at < len(self.text):
            if self.text[self.at] in blanks:
                self.at += 1
            elif self.text[self.at] == "#":
                end = self.text.find("\n", self.at)
                self.at = len(self.text) if end < 0 else end
                if "\n" not in blanks:
                    return True
            else:
                return True
        return False

    def _note(self, path: KeyPath, at: int) -> None:
        self.lines.setdefault(path, self.text.count("\n", 0, at) + 1)

    def _header(self) -> None:
        start = self.at
        double = self.text.startswith("[[", self.at)
        self.at += 2 if double else 1
        parts = self._key()
        self.at = self.text.index("]", self.at) + (2 if double else 1)
        path: KeyPath = ()
        for part in parts[:-1]:
            path = self._last_item((*path, part))
        path = (*path, parts[-1])
        self._note(path, start)
        if double:
            item = self.counts.get(path, 0)
            self.counts[path] = item + 1
            path = (*path, item)
            self._note(path, start)
        else:
            path = self._last_item(path)
        self.table = path

    def _last_item(self, path: KeyPath) -> KeyPath:
        return (*path, self.counts[path] - 1) if path in self.counts else path

    def _key(self) -> list[str]:
        parts: list[str] = []
        while True:
            self._skip(" \t")
            quote = self._peek()
            if quote in ('"', "'"):
                parts.append(self._string())
            else:
                start = self.at
                while self._peek() not in ("", " ", "\t", ".", "=", "]"):
                    self.at += 1
                parts.append(self.text[start : self.at])
            self._skip(" \t")
            if self._peek() != ".":
                return parts
            self.at += 1

    def _pair(self, table: KeyPath) -> None:
        start = self.at
        parts = self._key()
        for i in range(1, len(parts) + 1):
            self._note((*table, *parts[:i]), start)
        self.at = self.text.index("=", self.at) + 1
        self._value((*table, *parts))

    def _value(self, path: KeyPath) -> None:
        self._skip(" \t")
        first = self._peek()
        if first in ('"', "'"):
            self._string()
        elif first == "[":
            self._array(path)
        elif first == "{":
            self._inline(path)
        else:
            while self._peek() not in ("", "\n", ",", "]", "}", "#"):
                self.at += 1

    def _array(self, path: KeyPath) -> None:
        self.at += 1
        item = 0
        while self._skip(" \t\r\n,") and self._peek() != "]":
            self._note((*path, item), self.at)
            self._value((*path, item))
            item += 1
        self.at += 1

    def _inline(self, path: KeyPath) -> None:
        self.at += 1
        while self._skip(" \t\r\n,") and self._peek() != "}":
            self._pair(path)
        self.at += 1

    def _string(self) -> str:
        quote = self._peek()
        triple = self.text.startswith(quote * 3, self.at)
        mark = quote * 3 if triple else quote
        self.at += len(mark)
        start = self.at
        while not self.text.startswith(mark, self.at):
            self.at += 2 if quote == '"' and self._peek() == "\\" else 1
        content = self.text[start : self.at]
        self.at += len(mark)
        while triple and self._peek() == quote:
            self.at += 1
        return _unescaped(content) if quote == '"' and not triple else content


def _unescaped(content: str) -> str:
    if "\\" not in content:
        return content
    return str(tomllib.loads(f'key = "{content}"')["key"])
