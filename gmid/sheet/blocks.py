"""Blocks of which a sheet is laid out, the same for terminal, Markdown and HTML."""

from __future__ import annotations

from dataclasses import dataclass, field


@dataclass(frozen=True)
class Heading:
    """A heading; level 1 is the title.

    Examples
    --------
    >>> Heading("Filter", 2).level
    2
    """

    text: str
    level: int = 2


@dataclass(frozen=True)
class Paragraph:
    """Running text; `kind` is plain, verdict-met, verdict-missed or caution.

    Examples
    --------
    >>> Paragraph("Verify with the foundry's models.", "caution").kind
    'caution'
    """

    text: str
    kind: str = "plain"


@dataclass(frozen=True)
class Grid:
    """A table: heads, rows of cells, a caption; rows in `marked` are missed ones.

    Examples
    --------
    >>> Grid(("check", "margin"), (("gbw", "+4 %"),)).heads
    ('check', 'margin')
    """

    heads: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    caption: str = ""
    marked: frozenset[int] = field(default_factory=frozenset)
    on_terminal: bool = True


@dataclass(frozen=True)
class Picture:
    """A figure by the name of its file, without ending.

    Examples
    --------
    >>> Picture("open_loop", "Gain and phase").name
    'open_loop'
    """

    name: str
    caption: str


Block = Heading | Paragraph | Grid | Picture


def is_numeric(text: str) -> bool:
    """Tell whether a cell is set flush right.

    Parameters
    ----------
    text : str
        The cell.

    Returns
    -------
    bool
        Whether it starts like a number.

    Examples
    --------
    >>> is_numeric("12.3 MHz"), is_numeric("-"), is_numeric("pair")
    (True, True, False)
    """
    word = text.split(" ")[0].lstrip("+")
    if word in ("", "-"):
        return True
    try:
        float(word)
    except ValueError:
        return False
    return True


def flush_right(block: Grid) -> list[bool]:
    """Find the columns that are set flush right.

    Parameters
    ----------
    block : Grid
        The table.

    Returns
    -------
    list of bool
        One for each column.

    Examples
    --------
    >>> flush_right(Grid(("a", "b"), (("x", "1"),)))
    [False, True]
    """
    return [
        bool(block.rows) and all(is_numeric(row[column]) for row in block.rows)
        for column in range(len(block.heads))
    ]
