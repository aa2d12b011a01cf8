"""Which line of a TOML text a key stands on: the standard parser does not say.

Only for text that `tomllib` has accepted, so the scan trusts the grammar: it
needs to know where keys, strings, brackets and comments end, nothing else.
"""

from __future__ import annotations

import re
import tomllib
from bisect import bisect_right
from typing import Final, TypeAlias

Path: TypeAlias = tuple[str | int, ...]
"""A key's place: names, and indices inside lists."""

_BLANK: Final = re.compile(r"(?:[ \t\n]|#[^\n]*)*")
_SPACE: Final = re.compile(r"[ \t]*")
_KEY_PART: Final = re.compile(r"""[A-Za-z0-9_-]+|"(?:[^"\\]|\\.)*"|'[^']*'""")
_STRING: Final = re.compile(
    r'"""(?:[^\\]|\\.)*?"{3,5}|' r"'''.*?'{3,5}|" r'"(?:[^"\\]|\\.)*"|' r"'[^']*'", re.DOTALL
)
_SCALAR: Final = re.compile(r"[^,\]}#\n]*")
# Deeper keys exist in no site file; recording them would make a hostile one slow.
_DEEPEST: Final = 8


class LineIndex:
    """Key to line. `line` falls back to the nearest enclosing key that is written down."""

    def __init__(self, text: str) -> None:
        self._text = text.replace("\r\n", "\n")
        self._ends = [match.start() for match in re.finditer("\n", self._text)]
        self._lines: dict[Path, int] = {}
        self._last: dict[Path, int] = {}
        """Newest index of each array of tables."""
        self._scan()

    def line(self, path: Path) -> int:
        """Line of the key, counted from 1."""
        for size in range(min(len(path), _DEEPEST), 0, -1):
            if path[:size] in self._lines:
                return self._lines[path[:size]]
        return 1

    def _note(self, path: Path, position: int) -> None:
        if len(path) <= _DEEPEST:
            self._lines.setdefault(path, bisect_right(self._ends, position - 1) + 1)

    def _scan(self) -> None:
        header: Path = ()
        at = self._blank(0)
        while at < len(self._text):
            if self._text[at] == "[":
                header, at = self._header(at)
            else:
                at = self._pair(header, at)
            at = self._blank(at)

    def _header(self, at: int) -> tuple[Path, int]:
        is_list = self._text.startswith("[[", at)
        names, end = self._key(self._space(at + (2 if is_list else 1)))
        path: Path = ()
        for name in names[:-1]:
            path = self._inside((*path, name))
            self._note(path, at)
        path = (*path, names[-1])
        if is_list:
            self._note(path, at)
            self._last[path] = self._last.get(path, -1) + 1
        path = self._inside(path)
        self._note(path, at)
        return path, self._text.index("]", end) + (2 if is_list else 1)

    def _inside(self, path: Path) -> Path:
        return (*path, self._last[path]) if path in self._last else path

    def _pair(self, base: Path, at: int) -> int:
        names, end = self._key(at)
        path = base
        for name in names[:_DEEPEST]:
            path = (*path, name)
            self._note(path, at)
        if len(names) > _DEEPEST:
            path = (*path, "", "")
        return self._value(path, self._space(self._space(end) + 1))

    def _value(self, path: Path, at: int) -> int:
        """Position after the value that starts at `at`."""
        first = self._text[at]
        if first == "{":
            at = self._blank(at + 1)
            while self._text[at] != "}":
                at = self._blank(self._pair(path, at))
                at = self._blank(at + 1) if self._text[at] == "," else at
            return at + 1
        if first == "[":
            at, index = self._blank(at + 1), 0
            while self._text[at] != "]":
                self._note((*path, index), at)
                at = self._blank(self._value((*path[:_DEEPEST], index), at))
                at, index = (self._blank(at + 1) if self._text[at] == "," else at), index + 1
            return at + 1
        return self._end(_STRING if first in "\"'" else _SCALAR, at)

    def _key(self, at: int) -> tuple[list[str], int]:
        names = []
        while True:
            end = self._end(_KEY_PART, at)
            part = self._text[at:end]
            # The parser itself undoes quotes and escapes.
            names.append(str(tomllib.loads(f"k = {part}")["k"]) if part[0] in "\"'" else part)
            dot = self._space(end)
            if not self._text.startswith(".", dot):
                return names, end
            at = self._space(dot + 1)

    def _blank(self, at: int) -> int:
        return self._end(_BLANK, at)

    def _space(self, at: int) -> int:
        return self._end(_SPACE, at)

    def _end(self, pattern: re.Pattern[str], at: int) -> int:
        match = pattern.match(self._text, at)
        return match.end() if match else len(self._text)
