"""Where each key and value of a TOML text stands: the line and column that `tomllib` does not give.

The scanner trusts that `tomllib` has accepted the text; it only finds places, never values.
"""

from __future__ import annotations

import json
import re
from dataclasses import dataclass

Path = tuple[str, ...]

_BARE = re.compile(r"[A-Za-z0-9_-]+")
_SPACE = re.compile(r"(?:[ \t\n]|#[^\n]*)*")
_BLANK = re.compile(r"[ \t]*")
_PLAIN_VALUE = re.compile(r"[^,\]}#\n]*")


@dataclass(frozen=True)
class Spot:
    """Line and column (from 1) of a key and of its value; a string's value starts inside its quotes."""

    key_line: int
    key_column: int
    line: int
    column: int


def find_places(text: str) -> dict[Path, Spot]:
    """The spots of all keys, by their path, tables' headers included; array elements have none."""
    return _Scanner(text.replace("\r\n", "\n")).run()


class _Scanner:
    def __init__(self, text: str):
        self.text = text
        self.position = 0
        self.spots: dict[Path, Spot] = {}
        self.starts = [0] + [m.end() for m in re.finditer("\n", text)]

    def run(self) -> dict[Path, Spot]:
        header: Path = ()
        while True:
            self.skip(_SPACE)
            if self.position >= len(self.text):
                return self.spots
            if self.text[self.position] == "[":
                header = self.header()
            else:
                self.pair(header)

    def skip(self, pattern: re.Pattern[str]) -> None:
        match = pattern.match(self.text, self.position)
        if match:
            self.position = match.end()

    def peek(self) -> str:
        return self.text[self.position : self.position + 1]

    def where(self, position: int) -> tuple[int, int]:
        from bisect import bisect_right

        line = bisect_right(self.starts, position)
        return line, position - self.starts[line - 1] + 1

    def record(self, path: Path, key: int, value: int) -> None:
        self.spots.setdefault(path, Spot(*self.where(key), *self.where(value)))

    def header(self) -> Path:
        while self.peek() == "[":
            self.position += 1
        self.skip(_BLANK)
        start = self.position
        path = self.key()
        self.record(path, start, start)
        while self.peek() == "]":
            self.position += 1
        return path

    def key(self) -> Path:
        parts: list[str] = []
        while True:
            self.skip(_BLANK)
            if self.peek() in ('"', "'"):
                parts.append(self.quoted())
            else:
                match = _BARE.match(self.text, self.position)
                parts.append(match.group() if match else "")
                self.position = match.end() if match else self.position + 1
            self.skip(_BLANK)
            if self.peek() != ".":
                return tuple(parts)
            self.position += 1

    def pair(self, prefix: Path) -> None:
        start = self.position
        path = prefix + self.key()
        self.position += 1  # the equals sign
        self.skip(_BLANK)
        self.record(path, start, self.position + self.opening())
        self.value(path)

    def opening(self) -> int:
        """How many characters of quotes stand before a value's first character."""
        for quotes in ('"""', "'''"):
            if self.text.startswith(quotes, self.position):
                return 4 if self.text.startswith("\n", self.position + 3) else 3
        return 1 if self.peek() in ('"', "'") else 0

    def value(self, path: Path) -> None:
        first = self.peek()
        if first in ('"', "'"):
            self.quoted()
        elif first == "[":
            self.bracketed(path, "]")
        elif first == "{":
            self.bracketed(path, "}")
        else:
            self.skip(_PLAIN_VALUE)

    def bracketed(self, path: Path, closing: str) -> None:
        self.position += 1
        while True:
            self.skip(_SPACE)
            character = self.peek()
            if character == ",":
                self.position += 1
            elif character in (closing, ""):
                self.position += 1
                return
            elif closing == "}":
                self.pair(path)
            else:
                self.value((*path, ""))

    def quoted(self) -> str:
        """Step over a string and give its content (escapes resolved as far as a key needs them)."""
        quote = self.peek()
        long = self.text.startswith(quote * 3, self.position)
        close = quote * 3 if long else quote
        start = self.position + len(close)
        end = start
        while end < len(self.text) and not self.text.startswith(close, end):
            end += 2 if quote == '"' and self.text[end] == "\\" else 1
        self.position = end + len(close)
        while long and self.peek() == quote:  # a long string may end in up to five quotes
            self.position += 1
        content = self.text[start:end]
        if quote == '"' and "\\" in content:
            try:
                return str(json.loads(f'"{content}"'))
            except ValueError:
                return content
        return content
