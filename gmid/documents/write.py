"""TOML text from plain data, laid out for people who will edit it."""

from __future__ import annotations

import math
import re
from collections.abc import Collection, Iterator, Mapping, Sequence
from numbers import Integral, Real
from typing import TypeGuard

from gmid.documents.locate import KeyPath, dotted
from gmid.errors import DataFault

_BARE = re.compile(r"[A-Za-z0-9_-]+")
_ESCAPES = {"\\": "\\\\", '"': '\\"', "\n": "\\n", "\t": "\\t", "\r": "\\r"}
_SPECIAL = re.compile(r'[\\"\x00-\x1f\x7f]')
_CONTROL = re.compile(r"[\x00-\x08\x0a-\x1f\x7f]")
_WIDTH = 100


def write_document(
    data: Mapping[str, object],
    *,
    heading: str = "",
    tables: Collection[str] = (),
    comments: Mapping[KeyPath, str] | None = None,
) -> str:
    """Write nested data as a TOML document.

    Parameters
    ----------
    data : mapping
        Texts, numbers, booleans, and lists and mappings of them.  In each table plain keys
        come first, then tables, in the order given; lists of mappings become ``[[name]]``.
        A mapping of plain values inside a table is written on one line where it fits.
    heading : str
        Comment lines for the top.
    tables : collection of str
        Keys which are always written as ``[table]``, even where one line would do.
    comments : mapping of KeyPath to str, optional
        Comment lines to stand above a key or a table.

    Returns
    -------
    str
        Text that reads back as the same data; a list item of a comment's path counts from 0.

    Raises
    ------
    DataFault
        If a value has no form in TOML; its key is named.

    Examples
    --------
    >>> plan = {"format": 1, "plan": [{"name": "a1", "transistors": {"pair": {"count": 4}}}]}
    >>> print(write_document(plan, tables=["transistors"]), end="")
    format = 1
    <BLANKLINE>
    [[plan]]
    name = "a1"
    <BLANKLINE>
    [plan.transistors]
    pair = { count = 4 }
    """
    writer = _Writer(frozenset(tables), comments or {})
    lines = [*_comment(heading), *([""] if heading else []), *writer.table(data, ())]
    return "\n".join(lines).lstrip("\n") + "\n"


class _Writer:
    """Layout of one document."""

    def __init__(self, tables: frozenset[str], comments: Mapping[KeyPath, str]) -> None:
        self.tables = tables
        self.comments = comments

    def table(self, data: Mapping[str, object], path: KeyPath) -> Iterator[str]:
        """Write what stands in one table, headers of inner tables included."""
        later: list[tuple[str, object]] = []
        for key, value in data.items():
            if self.is_block(key, value, (*path, key)):
                later.append((key, value))
                continue
            yield from self.comment((*path, key))
            yield from _pair(key, value, (*path, key))
        for key, value in later:
            yield from self.block(value, (*path, key))

    def block(self, value: object, path: KeyPath) -> Iterator[str]:
        """Write ``[table]`` or every ``[[item]]`` of a list."""
        name = ".".join(_key(part) for part in path if isinstance(part, str))
        if isinstance(value, Mapping):
            blocks = [value[key] for key in value if self.is_block(key, value[key], (*path, key))]
            if not value or len(blocks) < len(value) or path in self.comments:
                yield ""
                yield from self.comment(path)
                yield f"[{name}]"
            yield from self.table(value, path)
            return
        for index, item in enumerate(value if _is_list(value) else ()):
            if isinstance(item, Mapping):
                yield ""
                yield from self.comment((*path, index))
                yield f"[[{name}]]"
                yield from self.table(item, (*path, index))

    def is_block(self, key: str, value: object, path: KeyPath) -> bool:
        """Tell whether a value gets a header of its own."""
        if _is_list(value):
            return len(value) > 0 and all(isinstance(item, Mapping) for item in value)
        if not isinstance(value, Mapping):
            return False
        if len(path) == 1 or not value or key in self.tables:
            return True
        if any(isinstance(entry, Mapping) or _is_list(entry) for entry in value.values()):
            return True
        return len(_key(key)) + 3 + len(_inline(value, path)) > _WIDTH

    def comment(self, path: KeyPath) -> Iterator[str]:
        yield from _comment(self.comments.get(path, ""))


def _comment(text: str) -> Iterator[str]:
    for line in text.splitlines():
        yield f"# {_CONTROL.sub(' ', line)}".rstrip()


def _pair(key: str, value: object, path: KeyPath) -> Iterator[str]:
    """Write ``key = value``, a long list over several lines."""
    text = f"{_key(key)} = {_inline(value, path)}"
    if len(text) <= _WIDTH or not _is_list(value):
        yield text
        return
    yield f"{_key(key)} = ["
    for index, item in enumerate(value):
        yield f"  {_inline(item, (*path, index))},"
    yield "]"


def _is_list(value: object) -> TypeGuard[Sequence[object]]:
    return isinstance(value, Sequence) and not isinstance(value, (str, bytes))


def _key(key: object) -> str:
    if not isinstance(key, str):
        raise DataFault(f"{key!r} cannot be a key of a TOML table.", hint="Keys are texts.")
    return key if _BARE.fullmatch(key) else _text(key, (key,))


def _inline(value: object, path: KeyPath) -> str:
    """Write one value on one line."""
    if isinstance(value, str):
        return _text(value, path)
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, Integral):
        return str(int(value))
    if isinstance(value, Real):
        return _number(float(value))
    if isinstance(value, Mapping):
        pairs = [f"{_key(key)} = {_inline(item, (*path, key))}" for key, item in value.items()]
        return f"{{ {', '.join(pairs)} }}" if pairs else "{}"
    if _is_list(value):
        items = [_inline(item, (*path, index)) for index, item in enumerate(value)]
        return f"[{', '.join(items)}]"
    raise DataFault(
        f"{dotted(path)}: a {type(value).__name__} has no form in TOML.",
        hint="Give a text, number, boolean, list or mapping, and leave out what is not set.",
    )


def _number(value: float) -> str:
    if math.isfinite(value):
        return repr(value)
    return "nan" if math.isnan(value) else ("inf" if value > 0 else "-inf")


def _text(value: str, path: KeyPath) -> str:
    """Write a basic string."""
    if any("\ud800" <= letter <= "\udfff" for letter in value):
        raise DataFault(
            f"{dotted(path)}: the text holds half a character (a lone surrogate).",
            hint="Give valid Unicode text.",
        )
    body = _SPECIAL.sub(
        lambda match: _ESCAPES.get(match.group(), f"\\u{ord(match.group()):04x}"), value
    )
    return f'"{body}"'
