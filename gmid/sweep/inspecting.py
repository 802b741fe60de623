"""Looks at a text without a recipe: its layout, its tables, its columns and what they may be."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np

from gmid.sweep.readers import read_text, recognise
from gmid.sweep.readers.scan import HeaderMissing
from gmid.sweep.roles import Role, guess_role
from gmid.sweep.source import TextSource, open_source
from gmid.sweep.texttable import Column, TextTable


@dataclass(frozen=True)
class ColumnView:
    """What one column holds, over all tables of the same columns.

    Parameters
    ----------
    name : str
        As the file spells it.
    unit : str or None
        As the file spells it.
    kind : str
        ``real``, ``complex`` or ``words``.
    low, high : float or None
        Range of a real column, in the file's unit.
    distinct : int
        Number of different values.
    role : Role
        What it may be.
    words : tuple of str
        The first few different words of a column of words.
    value : object
        The value, where all rows have the same.

    Examples
    --------
    >>> ColumnView("vgs", "V", "real", 0.0, 1.8, 19, Role("vgs")).role.name
    'vgs'
    """

    name: str
    unit: str | None
    kind: str
    low: float | None
    high: float | None
    distinct: int
    role: Role
    words: tuple[str, ...] = ()
    value: Any = None


@dataclass(frozen=True)
class GroupView:
    """Tables of a file that have the same columns.

    Parameters
    ----------
    tables : tuple of TextTable
        In the order of the file.
    columns : tuple of ColumnView
        Over all of them.
    restarts : int
        How often the first column that runs begins in each table; 1 when it never begins anew.

    Examples
    --------
    >>> GroupView((), (), 1).rows
    0
    """

    tables: tuple[TextTable, ...]
    columns: tuple[ColumnView, ...]
    restarts: int

    @property
    def rows(self) -> int:
        """Number of rows of all tables."""
        return sum(table.rows for table in self.tables)


@dataclass(frozen=True)
class Inspection:
    """What a file is and what is in it.

    Parameters
    ----------
    name : str
        The file as the user named it.
    layout : str
        The likeliest layout, or the one that was forced.
    confidence : float
        From 0 to 1.
    runner_up : tuple of (str, float) or None
        The next one, where there is one.
    encoding : str
        Encoding of the text.
    packed : bool
        Whether it is compressed with gzip.
    groups : tuple of GroupView
        Its tables.
    has_header : bool
        Whether the columns have names of their own.
    suffixes : str or None
        Dialect in which number words were read.

    Examples
    --------
    >>> Inspection("a.csv", "csv", 0.8, None, "utf-8", False, ()).layout
    'csv'
    """

    name: str
    layout: str
    confidence: float
    runner_up: tuple[str, float] | None
    encoding: str
    packed: bool
    groups: tuple[GroupView, ...] = field(default=())
    has_header: bool = True
    suffixes: str | None = None


def inspect_file(path: str | Path, *, layout: str = "auto") -> Inspection:
    """Recognise a sweep file and look at its columns.

    Parameters
    ----------
    path : str or Path
        The file, plain or gzip.
    layout : str
        A layout to force, or ``auto``.

    Returns
    -------
    Inspection
        What is in it.

    Raises
    ------
    GmidError
        If it cannot be read, with the place of each fault.

    Examples
    --------
    >>> inspect_file("missing.csv")
    Traceback (most recent call last):
    ...
    gmid.errors.FileTrouble: missing.csv: there is no such file.
    """
    return inspect_source(open_source(path), layout=layout)


def inspect_source(source: TextSource, *, layout: str = "auto") -> Inspection:
    r"""Recognise a text that is open already.

    Parameters
    ----------
    source : TextSource
        The text.
    layout : str
        A layout to force, or ``auto``.

    Returns
    -------
    Inspection
        What is in it.

    Raises
    ------
    GmidError
        If it cannot be read.

    Examples
    --------
    >>> from gmid.sweep.source import open_bytes
    >>> found = inspect_source(open_bytes(b"vgs [V],id (uA)\n0,1\n0.5,2\n", name="a.csv"))
    >>> found.layout, [(c.name, c.low, c.high, c.role.name) for c in found.groups[0].columns]
    ('csv', [('vgs', 0.0, 0.5, 'vgs'), ('id', 1.0, 2.0, 'id')])
    """
    judged = recognise(source)
    if layout == "auto":
        chosen, confidence = judged[0] if judged else ("auto", 0.0)
    else:
        chosen, confidence = layout, dict(judged).get(layout, 0.0)
    others = [pair for pair in judged if pair[0] != chosen]
    has_header = True
    try:
        tables = read_text(source, layout=layout)
    except HeaderMissing as fault:
        has_header = False
        names = [f"column{j + 1}" for j in range(fault.width)]
        tables = read_text(source, layout=chosen, columns=names)
    return Inspection(
        source.name, tables[0].layout, confidence, others[0] if others else None,
        source.encoding, source.packed, tuple(_group(tables)), has_header,
    )  # fmt: skip


def _group(tables: Sequence[TextTable]) -> list[GroupView]:
    """Put tables with the same columns together."""
    groups: dict[tuple[str, ...], list[TextTable]] = {}
    for table in tables:
        groups.setdefault(tuple(table.names), []).append(table)
    return [_view(group) for group in groups.values()]


def _view(tables: Sequence[TextTable]) -> GroupView:
    columns = []
    for position, first in enumerate(tables[0].columns):
        parts = [table.columns[position].values for table in tables]
        kinds = {part.dtype.kind for part in parts}
        if len(kinds) > 1 and "U" in kinds:
            parts = [part.astype(str) for part in parts]
        columns.append(_column(first, np.concatenate(parts)))
    return GroupView(tuple(tables), tuple(columns), max(map(_restarts, tables)))


def _column(first: Column, values: Any) -> ColumnView:
    unique = np.unique(values)
    kind = {"c": "complex", "U": "words"}.get(values.dtype.kind, "real")
    return ColumnView(
        first.name, first.unit, kind,
        float(unique[0]) if kind == "real" else None,
        float(unique[-1]) if kind == "real" else None,
        int(unique.size), guess_role(Column(first.name, first.unit, values)),
        tuple(map(str, unique[:8])) if kind == "words" else (),
        unique[0].item() if unique.size == 1 else None,
    )  # fmt: skip


def _restarts(table: TextTable) -> int:
    """Count how often the fastest column begins, the first one that moves on nearly every row."""
    for column in table.columns:
        values = column.values
        if values.dtype.kind != "f" or values.size < 2:
            continue
        jumps = np.diff(values)
        moving = np.count_nonzero(jumps)
        if moving and moving >= 0.5 * jumps.size:
            sense = np.sign(jumps[np.flatnonzero(jumps)[0]])
            return int(np.count_nonzero(jumps * sense < 0)) + 1
    return 1
