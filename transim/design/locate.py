"""Where the keys of a TOML text stand, by line and column."""

from __future__ import annotations

import contextlib
import re
import tomllib
from bisect import bisect_right
from collections.abc import Sequence
from dataclasses import dataclass

__all__ = ["KeyPath", "Locations", "Place", "dotted", "split_dotted"]

#: Keys from the top level inwards; elements of arrays by index from 0.
KeyPath = tuple[str | int, ...]

_BARE = re.compile(r"[A-Za-z0-9_-]+")
_BASIC = re.compile(r'"(?:[^"\\\n]|\\.)*"')
_LITERAL = re.compile(r"'[^'\n]*'")
_LONG_BASIC = re.compile(r'"""(?:[^"\\]|\\.|"{1,2}(?!"))*"{3,5}', re.DOTALL)
_LONG_LITERAL = re.compile(r"'''(?:[^']|'{1,2}(?!'))*'{3,5}", re.DOTALL)
_SCALAR = re.compile(r"[^,\]}\n#]+")
_BLANK = re.compile(r"(?:[ \t\n]|#[^\n]*)*")
_SPACE = re.compile(r"[ \t]*")
_INDEX = re.compile(r"\[([0-9]+)\]")


@dataclass(frozen=True)
class Place:
    """A place in a text.

    Parameters
    ----------
    line, column : int
        Both counted from 1, the column in characters.
    """

    line: int
    column: int


class _Lost(Exception):
    """The text is no valid TOML at this point."""


class _Scanner:
    """Goes once through a valid TOML text and notes where each key and array element starts."""

    def __init__(self, text: str) -> None:
        self.text = text
        self.position = 0
        self.starts: dict[KeyPath, int] = {}
        self.lengths: dict[KeyPath, int] = {}

    def scan(self) -> None:
        table: KeyPath = ()
        while True:
            self.take(_BLANK)
            if self.position >= len(self.text):
                return
            if self.text[self.position] == "[":
                table = self.header()
            else:
                self.assignment(table)

    def take(self, pattern: re.Pattern[str]) -> str:
        match = pattern.match(self.text, self.position)
        if match is None:
            raise _Lost
        self.position = match.end()
        return match[0]

    def literally(self, expected: str) -> bool:
        if self.text.startswith(expected, self.position):
            self.position += len(expected)
            return True
        return False

    def dotted_key(self) -> list[tuple[str, int]]:
        found = []
        while True:
            self.take(_SPACE)
            start = self.position
            character = self.text[start : start + 1]
            if character == '"':
                name = str(tomllib.loads(f"key = {self.take(_BASIC)}")["key"])
            elif character == "'":
                name = self.take(_LITERAL)[1:-1]
            else:
                name = self.take(_BARE)
            found.append((name, start))
            self.take(_SPACE)
            if not self.literally("."):
                return found

    def header(self) -> KeyPath:
        self.position += 1
        is_array = self.literally("[")
        path: KeyPath = ()
        keys = self.dotted_key()
        for index, (name, start) in enumerate(keys):
            path = (*path, name)
            self.starts.setdefault(path, start)
            if index == len(keys) - 1 and is_array:
                self.lengths[path] = self.lengths.get(path, 0) + 1
            if path in self.lengths:
                path = (*path, self.lengths[path] - 1)
                self.starts.setdefault(path, start)
        if not self.literally("]]" if is_array else "]"):
            raise _Lost
        return path

    def assignment(self, table: KeyPath) -> None:
        path = table
        for name, start in self.dotted_key():
            path = (*path, name)
            self.starts.setdefault(path, start)
        if not self.literally("="):
            raise _Lost
        self.take(_SPACE)
        self.value(path)

    def value(self, path: KeyPath) -> None:
        for opening, pattern in (
            ('"""', _LONG_BASIC),
            ("'''", _LONG_LITERAL),
            ('"', _BASIC),
            ("'", _LITERAL),
        ):
            if self.text.startswith(opening, self.position):
                self.take(pattern)
                return
        if self.literally("["):
            self.array(path)
        elif self.literally("{"):
            self.inline_table(path)
        else:
            self.take(_SCALAR)

    def array(self, path: KeyPath) -> None:
        index = 0
        while True:
            self.take(_BLANK)
            if self.literally("]"):
                return
            self.starts[(*path, index)] = self.position
            self.value((*path, index))
            index += 1
            self.take(_BLANK)
            self.literally(",")

    def inline_table(self, path: KeyPath) -> None:
        while True:
            self.take(_BLANK)
            if self.literally("}"):
                return
            self.assignment(path)
            self.take(_BLANK)
            self.literally(",")


class Locations:
    r"""Line and column of every key and array element of a TOML text.

    Parameters
    ----------
    text : str
        Valid TOML. In other text, what stands before the first fault is found.

    Examples
    --------
    >>> Locations('[driver.fast]\nspeedup_cap = "470 pF"').find("driver.fast.speedup_cap")
    Place(line=2, column=1)
    """

    def __init__(self, text: str) -> None:
        plain = text.replace("\r\n", "\n")
        scanner = _Scanner(plain)
        with contextlib.suppress(_Lost, RecursionError):
            scanner.scan()
        self._starts = scanner.starts
        self._lines = [0, *(match.end() for match in re.finditer("\n", plain))]

    def exactly(self, path: str | Sequence[str | int]) -> Place | None:
        """Return where a key or array element starts.

        Parameters
        ----------
        path : str or sequence of str or int
            Dotted key, or its pieces.

        Returns
        -------
        Place or None
            None where the text has no such key.
        """
        pieces = split_dotted(path) if isinstance(path, str) else tuple(path)
        start = self._starts.get(pieces)
        if start is None:
            return None
        line = bisect_right(self._lines, start)
        return Place(line, start - self._lines[line - 1] + 1)

    def find(self, path: str | Sequence[str | int]) -> Place | None:
        """Return where a key, or the innermost table around it that the text has, starts.

        Parameters
        ----------
        path : str or sequence of str or int
            Dotted key, or its pieces.

        Returns
        -------
        Place or None
            None where the text has not even the outermost table.
        """
        pieces = split_dotted(path) if isinstance(path, str) else tuple(path)
        for count in range(len(pieces), 0, -1):
            place = self.exactly(pieces[:count])
            if place is not None:
                return place
        return None


def dotted(path: Sequence[str | int]) -> str:
    """Write a key path as TOML writes it, with array elements as ``[index]``.

    Parameters
    ----------
    path : sequence of str or int
        Keys from the top level inwards.

    Returns
    -------
    str
        For example ``carrier.frequency[1]``; keys that are not bare are quoted.
    """
    text = ""
    for piece in path:
        if isinstance(piece, int):
            text += f"[{piece}]"
            continue
        key = piece if _BARE.fullmatch(piece) else _quoted(piece)
        text += f".{key}" if text else key
    return text


def _quoted(key: str) -> str:
    """Return a key as a TOML basic string."""
    escapes = {'"': '\\"', "\\": "\\\\", "\n": "\\n", "\t": "\\t", "\r": "\\r"}
    return '"' + "".join(
        escapes.get(character, character if character.isprintable() else f"\\U{ord(character):08X}")
        for character in key
    ) + '"'  # fmt: skip


def split_dotted(text: str) -> KeyPath:
    """Read a dotted key, the reverse of `dotted`.

    Parameters
    ----------
    text : str
        For example ``carrier.frequency[1]``.

    Returns
    -------
    tuple of str or int
        Its pieces; empty if the text is no dotted key.
    """
    scanner = _Scanner(text)
    pieces: list[str | int] = []
    try:
        while scanner.position < len(text):
            if text[scanner.position] == "[":
                pieces.append(int(scanner.take(_INDEX)[1:-1]))
                scanner.literally(".")
            else:
                pieces.extend(name for name, _ in scanner.dotted_key())
    except _Lost:
        return ()
    return tuple(pieces)
