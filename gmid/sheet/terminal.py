"""A sheet's blocks on a terminal, fitted to the window; plain text when piped."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence

from gmid.sheet.blocks import Block, Grid, Heading, Paragraph, flush_right

_GAP = 2
_LEAST_TEXT = 30
"""Columns in which running text is still worth reading."""


def write_terminal(blocks: Sequence[Block], *, width: int = 100) -> str:
    """Write blocks as plain text; a table wider than the window goes on in further blocks.

    Parameters
    ----------
    blocks : sequence of Block
        Pictures are left out.
    width : int
        Columns of the window.

    Returns
    -------
    str
        The text.

    Examples
    --------
    >>> print(write_terminal([Heading("Sheet", 1), Grid(("a", "b"), (("x", "1"),))]), end="")
    Sheet
    =====
    <BLANKLINE>
    a  b
    x  1
    """
    parts = [_write(block, width) for block in blocks]
    return "\n\n".join(part for part in parts if part) + "\n"


def _write(block: Block, width: int) -> str:
    if isinstance(block, Heading):
        return f"{block.text}\n{('=' if block.level == 1 else '-') * len(block.text)}"
    if isinstance(block, Paragraph):
        return textwrap.fill(block.text, width)
    if isinstance(block, Grid):
        return _write_grid(block, width)
    return ""


def _write_grid(block: Grid, width: int) -> str:
    columns = range(len(block.heads))
    every = (block.heads, *block.rows)
    sizes = [max(len(row[column]) for row in every) for column in columns]
    right = flush_right(block)
    lines = textwrap.wrap(block.caption, width) if block.caption else []
    room = width - sum(sizes[:-1]) - _GAP * (len(sizes) - 1)
    if not right[-1] and sizes[-1] > room >= _LEAST_TEXT:
        sizes[-1] = room
        every = tuple(part for row in every for part in _wrap_last(row, room))
    for index, part in enumerate(_split(sizes, width)):
        if index:
            lines.append("")
        for row in every:
            cells = [row[k].rjust(sizes[k]) if right[k] else row[k].ljust(sizes[k]) for k in part]
            lines.append((" " * _GAP).join(cells).rstrip())
    return "\n".join(lines)


def _wrap_last(row: tuple[str, ...], room: int) -> list[tuple[str, ...]]:
    """Break running text in the last cell over several lines."""
    first, *more = textwrap.wrap(row[-1], room) or [""]
    empty = ("",) * (len(row) - 1)
    return [(*row[:-1], first), *((*empty, line) for line in more)]


def _split(sizes: Sequence[int], width: int) -> list[list[int]]:
    """Deal columns out to blocks that fit; the first column leads each."""
    parts, room = [[0]], width - sizes[0]
    for column in range(1, len(sizes)):
        need = sizes[column] + _GAP
        if need > room and len(parts[-1]) > 1:
            parts.append([0])
            room = width - sizes[0]
        parts[-1].append(column)
        room -= need
    return parts
