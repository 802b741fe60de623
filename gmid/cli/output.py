"""What every command shares: rows as aligned columns, CSV or JSON, notes on stderr, progress."""

from __future__ import annotations

import json
import shutil
import sys
import time
from collections.abc import Callable, Mapping, Sequence
from typing import Any

from gmid.errors import UsageFault
from gmid.sweep.listing import is_number

_GAP = 3
"""Columns between two cells on a terminal."""


def say(text: str) -> None:
    """Write a note to stderr, after what stdout has had, without disturbing piped output.

    Parameters
    ----------
    text : str
        One line.

    Examples
    --------
    >>> say("vsb = 0 V by default.")
    """
    sys.stdout.flush()
    sys.stderr.write(f"{text}\n")


def choose_form(*, as_json: bool, as_csv: bool) -> None:
    """Refuse two forms of output at once.

    Parameters
    ----------
    as_json, as_csv : bool, keyword-only
        What was asked for.

    Raises
    ------
    UsageFault
        If both were.

    Examples
    --------
    >>> choose_form(as_json=True, as_csv=True)
    Traceback (most recent call last):
    ...
    gmid.errors.UsageFault: --json and --csv exclude each other. Give one.
    """
    if as_json and as_csv:
        raise UsageFault("--json and --csv exclude each other.", hint="Give one.")


def write_json(data: Any) -> None:
    """Write one JSON document to stdout.

    Parameters
    ----------
    data : object
        Plain values, lists and dicts.

    Examples
    --------
    >>> write_json({"format": 1})
    {
      "format": 1
    }
    """
    sys.stdout.write(json.dumps(data, indent=2, allow_nan=False) + "\n")


def write_csv(rows: Sequence[Mapping[str, Any]]) -> None:
    """Write rows as CSV to stdout, numbers with all their digits.

    Parameters
    ----------
    rows : sequence of mapping
        All with the keys of the first.

    Examples
    --------
    >>> write_csv([{"vgs": 0.5, "corner": "tt"}])
    vgs,corner
    0.5,tt
    """
    import csv

    if not rows:
        return
    writer = csv.DictWriter(sys.stdout, fieldnames=list(rows[0]), lineterminator="\n")
    writer.writeheader()
    writer.writerows(rows)


def write_blocks(
    heads: Sequence[str], rows: Sequence[Sequence[str]], *, keys: Sequence[int]
) -> None:
    """Write columns of numbers; in a narrow window the columns go on in further blocks.

    Parameters
    ----------
    heads : sequence of str
        Column heads.
    rows : sequence of sequence of str
        Cells, which are never broken.
    keys : sequence of int, keyword-only
        Columns that tell the rows apart, repeated at the left of every block.

    Examples
    --------
    >>> write_blocks(["L [um]", "ID [uA]"], [["0.18", "1"]], keys=[0])
    L [um]  ID [uA]
      0.18        1
    """
    if not sys.stdout.isatty():
        write_columns(heads, rows)
        return
    blocks = _split_columns(heads, rows, keys, shutil.get_terminal_size().columns)
    for number, block in enumerate(blocks):
        if number:
            sys.stdout.write("\n")
        write_columns([heads[i] for i in block], [[row[i] for i in block] for row in rows])


def _split_columns(
    heads: Sequence[str], rows: Sequence[Sequence[str]], keys: Sequence[int], window: int
) -> list[list[int]]:
    """Deal the columns out to blocks that fit the window, keys first in each."""
    sizes = [max(len(row[i]) for row in (heads, *rows)) + _GAP for i in range(len(heads))]
    blocks: list[list[int]] = []
    room = 0
    for column in range(len(heads)):
        if column in keys:
            continue
        if not blocks or sizes[column] > room:
            blocks.append(list(keys))
            room = window - sum(sizes[key] for key in keys)
        blocks[-1].append(column)
        room -= sizes[column]
    return blocks or [list(keys)]


def write_columns(heads: Sequence[str], rows: Sequence[Sequence[str]]) -> None:
    """Write aligned columns to stdout: drawn on a terminal, plain when piped.

    Parameters
    ----------
    heads : sequence of str
        Column heads.
    rows : sequence of sequence of str
        Cells; those that look like numbers are set flush right.

    Examples
    --------
    >>> write_columns(["L", "id"], [["180 nm", "1 uA"]])
    L       id
    180 nm  1 uA
    """
    cells = [list(heads), *[list(row) for row in rows]]
    widths = [max(len(row[i]) for row in cells) for i in range(len(heads))]
    right = [bool(rows) and all(is_number(row[i]) for row in rows) for i in range(len(heads))]
    if sys.stdout.isatty():
        _draw(heads, rows, right)
        return
    for row in cells:
        line = "  ".join(
            cell.rjust(width) if flush else cell.ljust(width)
            for cell, width, flush in zip(row, widths, right, strict=True)
        )
        sys.stdout.write(line.rstrip() + "\n")


def _draw(heads: Sequence[str], rows: Sequence[Sequence[str]], right: Sequence[bool]) -> None:
    """Draw a table fitted to the terminal, with markup off so that [m] stays [m]."""
    from rich import box
    from rich.console import Console
    from rich.table import Table
    from rich.text import Text

    table = Table(box=box.SIMPLE_HEAD, show_edge=False, pad_edge=False)
    for head, flush in zip(heads, right, strict=True):
        table.add_column(Text(head), justify="right" if flush else "left", overflow="fold")
    for row in rows:
        table.add_row(*[Text(cell) for cell in row])
    width, height = shutil.get_terminal_size()
    console = Console(markup=False, highlight=False, file=sys.stdout, width=width, height=height)
    console.print(table)


def make_progress(*, every: float = 0.1) -> Callable[[str, int, int], None]:
    """Make a callback that shows progress on stderr.

    On a terminal one line is rewritten; elsewhere only lines at wide intervals appear.

    Parameters
    ----------
    every : float
        Least time between two updates [s].

    Returns
    -------
    callable
        Taking what is done, how many steps are done, and how many there are.

    Examples
    --------
    >>> make_progress()("reading", 0, 3)
    """
    begin = time.monotonic()
    last = [-1e9]
    live = sys.stderr.isatty()
    interval = every if live else 5.0

    def show(what: str, done: int, total: int) -> None:
        now = time.monotonic()
        if done < total and now - last[0] < interval:
            return
        if not live and (done >= total or now - begin < interval):
            return
        last[0] = now
        share = done / total if total else 1.0
        left = (now - begin) * (1 - share) / share if share > 0 else 0.0
        text = f"{done}/{total} {what}" + (f", about {left:.0f} s left" if done else "")
        if live:
            end = "\n" if done >= total else ""
            sys.stderr.write(f"\r\x1b[K{text[:100]}{end}")
        else:
            sys.stderr.write(f"{text}\n")
        sys.stderr.flush()

    return show
