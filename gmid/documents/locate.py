"""Where each key of a TOML text stands: key path -> line number.

The reader of the standard library keeps no lines, so this scanner walks a text which that
reader has already found valid, and notes where keys, tables and items begin.
"""

from __future__ import annotations

import re
import tomllib
from bisect import bisect_right
from collections.abc import Iterator, Mapping

KeyPath = tuple[str | int, ...]
"""Keys and positions in lists, from the top of the document; positions count from 0."""

_BLANK = re.compile(r"(?:[ \t\r\n]|#[^\n]*)*")
_SPACE = re.compile(r"[ \t]*")
_BARE = re.compile(r"[A-Za-z0-9_-]+")
_TEXT = re.compile(
    r'"""(?:\\.|[^\\])*?"{3,5}'
    r"|'''.*?'{3,5}"
    r'|"(?:\\.|[^"\\\n])*"'
    r"|'[^'\n]*'",
    re.DOTALL,
)
_SCALAR = re.compile(r"[^,\]}#\n]+")


class _Scanner:
    """One pass over a valid TOML text."""

    def __init__(self, text: str) -> None:
        self.text = text
        self.at = 0
        self.breaks = [match.start() for match in re.finditer("\n", text)]
        self.lines: dict[KeyPath, int] = {}
        self.repeated: dict[KeyPath, int] = {}

    def scan(self) -> dict[KeyPath, int]:
        """Walk all statements of the document."""
        table: KeyPath = ()
        self.skip(_BLANK)
        while self.at < len(self.text):
            if self.text.startswith("[[", self.at):
                table = self.open_item()
            elif self.text[self.at] == "[":
                table = self.open_table()
            else:
                self.pair(table)
            self.skip(_BLANK)
        return self.lines

    def skip(self, pattern: re.Pattern[str]) -> None:
        match = pattern.match(self.text, self.at)
        if match is not None:
            self.at = match.end()

    def take(self, mark: str) -> bool:
        """Step over a mark when it stands here."""
        found = self.text.startswith(mark, self.at)
        self.at += len(mark) * found
        return found

    def line(self) -> int:
        return bisect_right(self.breaks, self.at - 1) + 1

    def key(self) -> tuple[str, ...]:
        """Read a key of one or more dotted parts."""
        parts: list[str] = []
        while True:
            self.skip(_SPACE)
            match = _BARE.match(self.text, self.at) or _TEXT.match(self.text, self.at)
            if match is None:
                raise AssertionError(f"no key at {self.at} of a text that was found valid")
            self.at = match.end()
            raw = match.group()
            parts.append(tomllib.loads(f"x={raw}")["x"] if raw[0] in "\"'" else raw)
            self.skip(_SPACE)
            if not self.take("."):
                return tuple(parts)

    def latest(self, key: tuple[str, ...], line: int) -> KeyPath:
        """Follow the outer parts of a header's key into the last item of each list."""
        path: KeyPath = ()
        for part in key:
            path = (*path, part)
            self.lines.setdefault(path, line)
            if path in self.repeated:
                path = (*path, self.repeated[path] - 1)
        return path

    def open_table(self) -> KeyPath:
        """Read ``[key]``."""
        line = self.line()
        self.at += 1
        key = self.key()
        self.take("]")
        path = self.latest(key, line)
        self.lines[path] = line
        return path

    def open_item(self) -> KeyPath:
        """Read ``[[key]]``."""
        line = self.line()
        self.at += 2
        key = self.key()
        self.take("]]")
        path = (*self.latest(key[:-1], line), key[-1])
        self.lines.setdefault(path, line)
        index = self.repeated.get(path, 0)
        self.repeated[path] = index + 1
        path = (*path, index)
        self.lines[path] = line
        return path

    def pair(self, table: KeyPath) -> None:
        """Read ``key = value``."""
        line = self.line()
        path = table
        for part in self.key():
            path = (*path, part)
            self.lines.setdefault(path, line)
        self.take("=")
        self.skip(_SPACE)
        self.value(path)

    def value(self, path: KeyPath) -> None:
        """Step over a value, noting what is inside lists and inline tables."""
        if self.take("["):
            for index in self.items("]"):
                self.lines[(*path, index)] = self.line()
                self.value((*path, index))
        elif self.take("{"):
            for _ in self.items("}"):
                self.pair(path)
        else:
            self.skip(_TEXT if self.text[self.at] in "\"'" else _SCALAR)

    def items(self, close: str) -> Iterator[int]:
        """Stop at each item up to the closing bracket."""
        index = 0
        self.skip(_BLANK)
        while not self.take(close):
            yield index
            index += 1
            self.skip(_BLANK)
            self.take(",")
            self.skip(_BLANK)


def locate_keys(text: str) -> dict[KeyPath, int]:
    r"""Find the line of every key, table and list item of a TOML text.

    Parameters
    ----------
    text : str
        Valid TOML.

    Returns
    -------
    dict of KeyPath to int
        Line, counted from 1, of each key path.  A table stands where its header is; one
        that only dotted keys or inner headers imply stands at the first of them.

    Raises
    ------
    ValueError
        If the text is not TOML.

    Examples
    --------
    >>> lines = locate_keys('a = 1\n[[b]]\nc.d = [1,\n  2]\n')
    >>> lines["a",], lines["b", 0], lines["b", 0, "c", "d", 1]
    (1, 2, 4)
    """
    tomllib.loads(text)
    return _Scanner(text.replace("\r\n", "\n")).scan()


def nearest_line(lines: Mapping[KeyPath, int], path: KeyPath) -> int:
    """Tell the line of a key, or of the closest table around it that the text has.

    Parameters
    ----------
    lines : mapping of KeyPath to int
        From `locate_keys`.
    path : KeyPath
        Key that may be absent.

    Returns
    -------
    int
        The line; 1 when nothing of the path is there.

    Examples
    --------
    >>> nearest_line({("supply",): 7}, ("supply", "voltage"))
    7
    """
    for end in range(len(path), 0, -1):
        if path[:end] in lines:
            return lines[path[:end]]
    return 1


def dotted(path: KeyPath) -> str:
    """Write a key path as people do; items of lists count from 1.

    Parameters
    ----------
    path : KeyPath
        Keys and positions.

    Returns
    -------
    str
        Such as ``sweep[2].axes.vgs`` for the second item of ``sweep``.

    Examples
    --------
    >>> dotted(("sweep", 1, "axes", "vgs"))
    'sweep[2].axes.vgs'
    """
    text = ""
    for part in path:
        if isinstance(part, int):
            text += f"[{part + 1}]"
        else:
            word = part if _BARE.fullmatch(part) else f'"{part}"'
            text += f".{word}" if text else word
    return text
