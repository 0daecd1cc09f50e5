"""At which line each key of a TOML text stands; the values are read by ``tomllib``.

``tomllib`` gives data without places.  This scanner walks over the same text
and notes the line of every key: table headers, dotted and quoted keys, inline
tables, elements of arrays.  It skips values and judges nothing: it runs on text
that ``tomllib`` has accepted, or, to find where a key was set before, on the
part of a faulty text above the fault.
"""

from __future__ import annotations

import bisect
import contextlib
import re
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass

Place = tuple[str | int, ...]
"""A place in the data: keys, and indices (from 0) in arrays."""

_BLANK = re.compile(r"[ \t]*")
_GAP = re.compile(r"(?:[ \t\n]|#[^\n]*)*")
_BARE = re.compile(r"[A-Za-z0-9_-]+")
_BASIC = re.compile(r'"(?:[^"\\\n]|\\.)*"')
_LITERAL = re.compile(r"'[^'\n]*'")
# Up to five quotation marks may end a multi-line text: two of them belong to it.
_LONG_BASIC = re.compile(r'"""(?:[^\\]|\\.)*?"""(?:"{0,2})', re.DOTALL)
_LONG_LITERAL = re.compile(r"'''.*?'''(?:'{0,2})", re.DOTALL)
_SCALAR = re.compile(r"[^,\]}#\n]+")


@dataclass(frozen=True, slots=True)
class KeyLines:
    """Lines of keys, from 1; ``repeated`` holds (first, second) line of keys that are set twice."""

    at: Mapping[Place, int]
    repeated: Mapping[Place, tuple[int, int]]

    def line(self, path: Place) -> int | None:
        """Return the line of a place, or of the nearest thing around it that has one."""
        for length in range(len(path), 0, -1):
            if (line := self.at.get(path[:length])) is not None:
                return line
        return None

    def dotted(self) -> dict[str, int]:
        """Return the lines by dotted key; elements of arrays by their index."""
        return {".".join(map(str, path)): line for path, line in self.at.items()}


def key_lines(text: str) -> KeyLines:
    """Scan a TOML text with Unix line ends for the lines of its keys.

    Parameters
    ----------
    text : str
        TOML; scanning ends without complaint at the first thing that cannot be
        TOML.

    Returns
    -------
    KeyLines
        A table that several headers open has the line of its own header, else
        of the first key inside it.
    """
    scanner = _Scanner(text)
    with contextlib.suppress(_EndOfSense, RecursionError):
        scanner.document()
    return KeyLines(scanner.lines, scanner.repeated)


class _EndOfSense(Exception):  # noqa: N818 - a signal inside this file, not an error
    """What follows is not TOML."""


class _Scanner:
    def __init__(self, text: str) -> None:
        self.text = text
        self.position = 0
        self.newlines = [m.start() for m in re.finditer("\n", text)]
        self.lines: dict[Place, int] = {}
        self.repeated: dict[Place, tuple[int, int]] = {}
        self.explicit: set[Place] = set()
        self.elements: dict[Place, int] = {}

    # ------------------------------------------------------------ structure

    def document(self) -> None:
        table: Place = ()
        while self.skip(_GAP) < len(self.text):
            if self.text.startswith("[[", self.position):
                table = self.header(2)
            elif self.text.startswith("[", self.position):
                table = self.header(1)
            else:
                self.pair(table)

    def header(self, brackets: int) -> Place:
        line = self.line()
        self.position += brackets
        keys = self.dotted_key()
        self.expect("]" * brackets)
        path: Place = ()
        for key in keys[:-1]:
            path = self.into_last((*path, key))
            self.lines.setdefault(path, line)
        path = (*path, keys[-1])
        if brackets == 1:
            path = self.into_last(path)
            self.note(path, line)
            return path
        self.lines.setdefault(path, line)
        self.elements[path] = self.elements.get(path, -1) + 1
        path = (*path, self.elements[path])
        self.note(path, line)
        return path

    def into_last(self, path: Place) -> Place:
        """Return the path of the last element where ``path`` is an array of tables."""
        return (*path, self.elements[path]) if path in self.elements else path

    def pair(self, table: Place) -> None:
        line = self.line()
        path = table
        keys = self.dotted_key()
        for key in keys[:-1]:
            path = (*path, key)
            self.lines.setdefault(path, line)
        path = (*path, keys[-1])
        self.note(path, line)
        self.expect("=")
        self.value(path)

    def note(self, path: Place, line: int) -> None:
        if path in self.explicit:
            self.repeated.setdefault(path, (self.lines[path], line))
        else:
            self.explicit.add(path)
            self.lines[path] = line

    def value(self, path: Place) -> None:
        self.skip(_BLANK)
        if self.text.startswith("[", self.position):
            self.array(path)
        elif self.text.startswith("{", self.position):
            self.inline_table(path)
        elif not any(self.matched(p) for p in (_LONG_BASIC, _LONG_LITERAL, _BASIC, _LITERAL, _SCALAR)):
            raise _EndOfSense

    def array(self, path: Place) -> None:
        self.position += 1
        index = 0
        while True:
            self.skip(_GAP)
            if self.accept("]"):
                return
            self.note((*path, index), self.line())
            self.value((*path, index))
            self.skip(_GAP)
            index += 1
            if not self.accept(","):
                self.expect("]")
                return

    def inline_table(self, path: Place) -> None:
        self.position += 1
        while True:
            self.skip(_GAP)
            if self.accept("}"):
                return
            self.pair(path)
            self.skip(_GAP)
            if not self.accept(","):
                self.expect("}")
                return

    # ----------------------------------------------------------------- keys

    def dotted_key(self) -> list[str]:
        keys = [self.key()]
        while self.skip(_BLANK) and self.accept("."):
            keys.append(self.key())
        return keys

    def key(self) -> str:
        self.skip(_BLANK)
        start = self.position
        if self.matched(_BARE):
            return self.text[start : self.position]
        if self.matched(_LITERAL):
            return self.text[start + 1 : self.position - 1]
        if self.matched(_BASIC):
            try:
                return str(tomllib.loads("key = " + self.text[start : self.position])["key"])
            except tomllib.TOMLDecodeError:
                raise _EndOfSense from None
        raise _EndOfSense

    # ----------------------------------------------------------- characters

    def line(self) -> int:
        return bisect.bisect_left(self.newlines, self.position) + 1

    def skip(self, pattern: re.Pattern[str]) -> int:
        self.matched(pattern)
        return self.position

    def matched(self, pattern: re.Pattern[str]) -> bool:
        match = pattern.match(self.text, self.position)
        if match is None:
            return False
        self.position = match.end()
        return True

    def accept(self, mark: str) -> bool:
        found = self.text.startswith(mark, self.position)
        if found:
            self.position += len(mark)
        return found

    def expect(self, mark: str) -> None:
        self.skip(_BLANK)
        if not self.accept(mark):
            raise _EndOfSense
