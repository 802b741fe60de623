"""A sheet as Markdown."""

from __future__ import annotations

import re
from collections.abc import Sequence

from gmid.sheet.blocks import Block, Grid, Heading, Paragraph, Picture, flush_right

_MARKS = {"verdict-met": "**", "verdict-missed": "**"}


def write_markdown(blocks: Sequence[Block]) -> str:
    """Write blocks as Markdown.

    Parameters
    ----------
    blocks : sequence of Block
        In the order of reading; figures are linked as SVG files beside the text.

    Returns
    -------
    str
        The text.

    Examples
    --------
    >>> print(write_markdown([Heading("Sheet", 1), Grid(("a", "b"), (("x", "1"),))]), end="")
    # Sheet
    <BLANKLINE>
    | a | b |
    |---|--:|
    | x | 1 |
    """
    return "\n\n".join(_write(block) for block in blocks) + "\n"


def _write(block: Block) -> str:
    if isinstance(block, Heading):
        return f"{'#' * block.level} {_escape(block.text)}"
    if isinstance(block, Paragraph):
        mark = _MARKS.get(block.kind, "")
        start = "> " if block.kind == "caution" else ""
        return f"{start}{mark}{_escape(block.text)}{mark}"
    if isinstance(block, Picture):
        caption = _escape(block.caption)
        return f"![{caption}]({block.name}.svg)\n\n*{caption}*"
    return _write_grid(block)


def _write_grid(block: Grid) -> str:
    rules = ["--:" if right else "---" for right in flush_right(block)]
    lines = [
        "| " + " | ".join(_cell(cell) for cell in block.heads) + " |",
        "|" + "|".join(rules) + "|",
        *("| " + " | ".join(_cell(cell) for cell in row) + " |" for row in block.rows),
    ]
    caption = f"*{_escape(block.caption)}*\n\n" if block.caption else ""
    return caption + "\n".join(lines)


def _cell(text: str) -> str:
    return _escape(text).replace("|", "\\|") or " "


def _escape(text: str) -> str:
    """Keep what would be marks or tags as it is written."""
    return re.sub(r"([\\`*<])", r"\\\1", text)
