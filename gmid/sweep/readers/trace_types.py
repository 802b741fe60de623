"""The TYPE section of typed traces: units of simple types, fields of records."""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass, field

from gmid.errors import DataFault
from gmid.sweep.source import TextSource

_TOKEN = re.compile(r'"(?:[^"\\]|\\.)*"|[()]|[^\s()"]+')


@dataclass(frozen=True)
class Types:
    """What the types of a file mean.

    Parameters
    ----------
    units : dict of str to str or None
        Unit of each simple type.
    records : dict of str to list of (str, str or None)
        Names and units of the fields of each record type.

    Examples
    --------
    >>> Types().records
    {}
    """

    units: dict[str, str | None] = field(default_factory=dict)
    records: dict[str, list[tuple[str, str | None]]] = field(default_factory=dict)


def unquote(text: str) -> str:
    r"""Take quotes and backslash escapes off a name.

    Parameters
    ----------
    text : str
        Such as ``"g\<0\>"``.

    Returns
    -------
    str
        The name.

    Examples
    --------
    >>> unquote(r'"g\<0\>"'), unquote("27.0")
    ('g<0>', '27.0')
    """
    if len(text) > 1 and text[0] == text[-1] == '"':
        return re.sub(r"\\(.)", r"\1", text[1:-1])
    return text


def read_types(source: TextSource, lines: list[tuple[int, str]]) -> Types:
    r"""Read the TYPE section.

    Parameters
    ----------
    source : TextSource
        For messages.
    lines : list of (int, str)
        Numbered lines of the section.

    Returns
    -------
    Types
        Units and records.

    Raises
    ------
    DataFault
        If brackets do not close.

    Examples
    --------
    >>> from gmid.sweep.source import open_bytes
    >>> source = open_bytes(b"x", name="a.txt")
    >>> read_types(source, [(1, '"S" FLOAT DOUBLE PROP( "units" "S" )')]).units
    {'S': 'S'}
    """
    tokens = iter([(number, token) for number, text in lines for token in _TOKEN.findall(text)])
    types = Types()
    pending: tuple[int, str] | None = None
    last = lines[-1][0] if lines else 1
    while True:
        number, name = pending or next(tokens, (last, ""))
        if not name:
            return types
        tree, pending = _definition(source, tokens, number)
        key = unquote(name)
        if "STRUCT" in tree:
            members = tree[tree.index("STRUCT") + 1]
            types.records[key] = _fields(members if isinstance(members, list) else [])
        else:
            types.units[key] = _unit(tree)


def _definition(
    source: TextSource, tokens: Iterator[tuple[int, str]], number: int
) -> tuple[list[object], tuple[int, str] | None]:
    """Read words and bracketed lists up to the next quoted name outside brackets."""
    stack: list[list[object]] = [[]]
    for number, token in tokens:
        if token == "(":
            inner: list[object] = []
            stack[-1].append(inner)
            stack.append(inner)
            if len(stack) > 50:
                break
        elif token == ")":
            if len(stack) == 1:
                raise DataFault(
                    "a bracket closes that was not opened.", where=source.where(number),
                    hint="The TYPE section is damaged.",
                )  # fmt: skip
            stack.pop()
        elif token.startswith('"') and len(stack) == 1:
            return stack[0], (number, token)
        else:
            stack[-1].append(token)
    if len(stack) > 1:
        raise DataFault(
            "a bracket of the TYPE section is not closed.", where=source.where(number),
            hint="The file is damaged or cut off.",
        )  # fmt: skip
    return stack[0], None


def _unit(tree: list[object]) -> str | None:
    for position, part in enumerate(tree[:-1]):
        if part == "PROP":
            props = tree[position + 1]
            if isinstance(props, list) and '"units"' in props[:-1]:
                return unquote(str(props[props.index('"units"') + 1])) or None
    return None


def _fields(members: list[object]) -> list[tuple[str, str | None]]:
    """Names of a record's members with their units."""
    starts = [j for j, part in enumerate(members) if isinstance(part, str) and part.startswith('"')]
    found = []
    for start, end in zip(starts, [*starts[1:], len(members)], strict=True):
        found.append((unquote(str(members[start])), _unit(members[start + 1 : end])))
    return found
