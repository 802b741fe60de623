"""Readers of sweep text: one module a layout, and the list of them."""

from __future__ import annotations

import inspect
from collections.abc import Mapping
from types import ModuleType
from typing import Any

from gmid.errors import DataFault, UnknownName, UsageFault, advise
from gmid.sweep.readers import (
    blocks,
    columns,
    csv,
    measured_blocks,
    measurement,
    operating_point,
    print_listing,
    spice_raw,
    stepped,
    typed_trace,
)
from gmid.sweep.readers.careful import ParametersBetween
from gmid.sweep.source import TextSource
from gmid.sweep.texttable import TextTable

_MODULES = (
    spice_raw,
    typed_trace,
    measured_blocks,
    measurement,
    stepped,
    print_listing,
    blocks,
    operating_point,
    csv,
    columns,
)

LAYOUTS: Mapping[str, ModuleType] = {module.LAYOUT: module for module in _MODULES}
"""Every layout by name.  A module has ``LAYOUT``, ``recognise(head)`` and ``read(source, ...)``."""

_LOG_WORDS = ("error", "aborted", "singular", "fatal", "failed")
_SURE = 0.3
_CERTAIN = 0.98


def recognise(source: TextSource) -> list[tuple[str, float]]:
    r"""Judge which layouts a file may have.

    Parameters
    ----------
    source : TextSource
        The file.

    Returns
    -------
    list of tuple of (str, float)
        Layouts with a confidence above 0, the likeliest first.

    Examples
    --------
    >>> from gmid.sweep.source import open_bytes
    >>> recognise(open_bytes(b"vgs,id\n0,1e-12\n", name="a.csv"))[0]
    ('csv', 0.8)
    """
    judged: list[tuple[str, float]] = []
    for name, module in LAYOUTS.items():
        judged.append((name, float(module.recognise(source.head))))
        if judged[-1][1] > _CERTAIN:
            break
    return sorted((pair for pair in judged if pair[1] > 0), key=lambda pair: -pair[1])


def read_text(source: TextSource, layout: str = "auto", **options: Any) -> list[TextTable]:
    r"""Read every table of a file.

    Parameters
    ----------
    source : TextSource
        The file.
    layout : str
        A key of `LAYOUTS`, or ``auto`` for the likeliest.
    **options
        Options of that layout's ``read``, such as ``columns`` and ``suffixes``.

    Returns
    -------
    list of TextTable
        At least one.

    Raises
    ------
    DataFault or Faults
        If the layout is not recognised or the file is at fault.
    UnknownName
        If there is no such layout.
    UsageFault
        If the layout has no such option.

    Examples
    --------
    >>> from gmid.sweep.source import open_bytes
    >>> data = b"vgs [V],id (uA)\n0,1e-6\n0.1,2e-6\n"
    >>> table = read_text(open_bytes(data, name="a.csv"))[0]
    >>> [(column.name, column.unit) for column in table.columns], table.layout
    ([('vgs', 'V'), ('id', 'uA')], 'csv')
    """
    is_free = layout == "auto"
    if is_free:
        judged = recognise(source)
        if not judged or judged[0][1] < _SURE:
            raise _unrecognised(source)
        layout = judged[0][0]
    if layout not in LAYOUTS:
        raise UnknownName(
            f"{layout!r} is not a layout.", where=source.name, hint=advise(layout, LAYOUTS)
        )
    read = LAYOUTS[layout].read
    known = [name for name in inspect.signature(read).parameters if name != "source"]
    for name in options:
        if name not in known:
            raise UsageFault(
                f"the layout {layout!r} has no option {name!r}.", where=source.name,
                hint=advise(name, known),
            )  # fmt: skip
    try:
        tables: list[TextTable] = read(source, **options)
    except ParametersBetween:
        if not is_free or layout not in (columns.LAYOUT, csv.LAYOUT) or "columns" in options:
            raise
        tables = blocks.read(source, **options)
    return tables


def _unrecognised(source: TextSource) -> DataFault:
    """Say what a text is that no layout claims; a log is known by its errors."""
    for number, line in enumerate(source.head_lines(), 1):
        if any(word in line.lower() for word in _LOG_WORDS):
            return DataFault(
                f"this is no table but a log: {line.strip()[:100]!r}.",
                where=source.where(number), hint="Correct that and simulate again.",
            )  # fmt: skip
    return DataFault(
        "the layout of the file is not recognised.",
        where=source.name,
        hint=f"Name it in the recipe: layout = one of {', '.join(LAYOUTS)}.",
    )
