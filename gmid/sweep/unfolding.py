"""Column blocks: one table per value that stands in the names of its columns."""

from __future__ import annotations

import re
from dataclasses import replace

from gmid.errors import DataFault
from gmid.sweep.recipe import SweepRecipe
from gmid.sweep.texttable import Column, TextTable


def unfold_columns(recipe: SweepRecipe, table: TextTable) -> list[TextTable]:
    """Cut a table into one for each value that a pattern catches in the names of its columns.

    Columns whose name does not match belong to every piece; in the others an asterisk takes the
    place of the value: ``@m1[gm]`` and ``@m2[gm]`` both become ``@m*[gm]``.

    Parameters
    ----------
    recipe : SweepRecipe
        At most one of its axes is taken from column names.
    table : TextTable
        As read.

    Returns
    -------
    list of TextTable
        The pieces, or the table itself.

    Raises
    ------
    DataFault
        If no name matches, or two axes are taken from names.

    Examples
    --------
    >>> from pathlib import Path
    >>> import numpy as np
    >>> from gmid.sweep.model import UnitTransistor
    >>> from gmid.sweep.recipe import ValueSource
    >>> names = ("vgs", "id L=1e-6", "id L=2e-6")
    >>> table = TextTable("a.csv", [Column(name, None, np.zeros(2)) for name in names])
    >>> length = ValueSource(origin="column", pattern="L=(.*)", unit="m")
    >>> recipe = SweepRecipe("n", UnitTransistor("n", 2e-6), (Path("a.csv"),), {"length": length})
    >>> [(piece.names, piece.meta["column"]) for piece in unfold_columns(recipe, table)]
    [(['vgs', 'id L=*'], '1e-6'), (['vgs', 'id L=*'], '2e-6')]
    """
    sources = [source for source in recipe.axes.values() if source.origin == "column"]
    if not sources:
        return [table]
    if len(sources) > 1:
        raise DataFault(
            "only one axis can be taken from the names of columns.", where=sources[1].where,
            hint="Write the others as columns or files of their own.",
        )  # fmt: skip
    pattern = re.compile(sources[0].pattern or "", re.IGNORECASE)
    common: list[Column] = []
    blocks: dict[str, list[Column]] = {}
    for column in table.columns:
        match = pattern.search(column.name)
        if match is None or match[1] is None:
            common.append(column)
            continue
        name = f"{column.name[: match.start(1)]}*{column.name[match.end(1) :]}"
        blocks.setdefault(match[1], []).append(replace(column, name=name))
    if not blocks:
        raise DataFault(
            f"pattern {pattern.pattern!r} matches no column of {table.source}.",
            where=sources[0].where, hint=f"Columns: {', '.join(table.names[:20])}.",
        )  # fmt: skip
    names = [column.name for column in next(iter(blocks.values()))]
    for value, block in blocks.items():
        if [column.name for column in block] != names:
            raise DataFault(
                f"the columns for {value!r} of {table.source} are not those for "
                f"{next(iter(blocks))!r}.", where=sources[0].where,
                hint=f"Wanted for each: {', '.join(names)}.",
            )  # fmt: skip
    return [
        replace(table, columns=[*common, *block], meta={**table.meta, "column": value})
        for value, block in blocks.items()
    ]
