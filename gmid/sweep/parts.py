"""Axes and quantities of the rows of one text table: the recipe's expressions and patterns."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gmid.errors import DataFault, UnknownName, advise
from gmid.nomenclature import AXES, QUANTITIES
from gmid.quantity import UNIT_WORDS, unit_power
from gmid.sweep.capture import captured, read_captured
from gmid.sweep.expression import parse_expression
from gmid.sweep.recipe import SweepRecipe, ValueSource
from gmid.sweep.rows import Array, Note
from gmid.sweep.texttable import Column, TextTable

SQUARED = {"A^2/Hz": "A/rtHz"}
"""Units whose values must be squared to reach the unit of the quantity."""


class Part:
    """Axes and quantities of rows of one text table.

    Parameters
    ----------
    table : TextTable
        Where they stand.
    taken : ndarray of int, optional
        The table's rows that are taken; all when None.
    before : TextTable, optional
        The nearest table above it in the file that has a single row, such as an operating point.

    Examples
    --------
    >>> table = TextTable("a.csv", [Column("vgs", "V", np.zeros(3))])
    >>> Part(table, np.array([0, 2])).rows
    2
    """

    def __init__(
        self, table: TextTable, taken: NDArray[np.intp] | None, before: TextTable | None = None
    ) -> None:
        self.table, self.taken, self.before = table, taken, before
        self.axes: dict[str, Array] = {}
        self.values: dict[str, Array] = {}
        self.converted: dict[str, dict[str, None]] = {}
        self.notes: list[Note] = []
        self.rows = table.rows if taken is None else int(taken.size)

    def keep(self, rows: NDArray[np.intp]) -> None:
        """Take some of the rows only.

        Parameters
        ----------
        rows : ndarray of int
            Positions among the rows taken so far.
        """
        self.taken = rows if self.taken is None else self.taken[rows]
        self.axes = {name: axis[rows] for name, axis in self.axes.items()}
        self.values = {name: values[rows] for name, values in self.values.items()}
        self.rows = int(rows.size)

    def find_axes(self, recipe: SweepRecipe) -> None:
        """Find the four axes on every row.

        Parameters
        ----------
        recipe : SweepRecipe
            Where they are.
        """
        for name in AXES:
            source = recipe.axes.get(name) or standard_column(name, self.table)
            if source is None:
                raise _no_axis(name, recipe, self.table)
            if source.restart is None:
                self.axes[name] = self.resolve(name, source)
        for name in AXES:
            source = recipe.axes.get(name)
            if source is not None and source.restart is not None:
                self.axes[name] = self.restarted(name, source, recipe)

    def resolve(self, name: str, source: ValueSource) -> Array:
        """Find the values of an axis or a quantity on every row, in SI.

        Parameters
        ----------
        name : str
            The axis or quantity.
        source : ValueSource
            Where it is.

        Returns
        -------
        ndarray, shape (n_rows,)
            The values.
        """
        unit = QUANTITIES[name].unit
        if source.value is not None:
            return np.full(self.rows, float(source.value))
        if source.origin is not None:
            return np.full(self.rows, read_captured(captured(source, self.table), unit, source))
        if source.preceding is not None:
            return np.full(self.rows, self._preceding(name, source))
        result = self.evaluate(name, source)
        if result.dtype.kind == "c":
            raise DataFault(
                f"{source.expression!r} is complex in {self.table.source}.",
                where=source.where,
                hint="Take its part with re(...), im(...) or abs(...), or read it as an "
                f'admittance: {name} = {{ admittance = "{source.expression}" }}.',
            )
        return convert(result, source.unit, name, self)

    def evaluate(self, name: str, source: ValueSource) -> NDArray[Any]:
        """Evaluate the expression of a source on every row.

        Parameters
        ----------
        name : str
            The axis or quantity.
        source : ValueSource
            With an expression.

        Returns
        -------
        ndarray, shape (n_rows,)
            Real or complex; columns scaled to SI by their own units where the source has none.
        """
        text = source.expression or source.admittance or source.spectrum or ""
        expression = parse_expression(text, self.table.names, where=self._place(source))
        columns = {column: self.table.column(column) for column in expression.columns}
        lookup = {}
        for key, column in columns.items():
            values = self._numbers(column)
            if source.unit is None and (power := self._hint(name, key, column, expression.tree)):
                values = values * 10.0**power if power > 0 else values / 10.0**-power
            lookup[key] = values
        return np.broadcast_to(expression.evaluate(lookup), (self.rows,))

    def _preceding(self, name: str, source: ValueSource) -> float:
        if self.before is None:
            raise DataFault(
                f"no table with a single row stands before plot or table "
                f"{self.table.meta.get('step', '')} of {self.table.source}.",
                where=source.where,
                hint="Write the operating point into the file too, or take the bias from titles.",
            )
        other = Part(self.before, None)
        plain = replace(source, expression=source.preceding, preceding=None)
        return float(other.resolve(name, plain)[0])

    def _numbers(self, column: Column) -> NDArray[Any]:
        values = column.values if self.taken is None else column.values[self.taken]
        if values.dtype.kind == "c":
            return values if values.imag.any() else values.real
        if values.dtype.kind not in "fiu":
            raise DataFault(
                f"column {column.name!r} holds words, not numbers: {str(values[0])!r}.",
                where=self.table.where(int(self.taken[0]) if self.taken is not None else 0),
            )
        return values

    def _hint(self, name: str, key: str, column: Column, tree: Any) -> int:
        """Power of ten by which the file's own unit must be scaled to SI."""
        if column.unit is None:
            return 0
        for unit in UNIT_WORDS:
            power = unit_power(column.unit, unit) if unit else None
            if power is None or (unit == "degC" and column.unit != "C"):
                continue
            wanted = QUANTITIES[name].unit
            if tree == ("column", key) and unit != wanted and SQUARED.get(wanted) != unit:
                raise DataFault(
                    f"column {column.name!r} is in {column.unit}, but {name} is in {wanted}.",
                    where=self.table.source,
                    hint="Name another column in the recipe.",
                )
            if power:
                self.converted.setdefault(column.unit, {})[name] = None
            if tree == ("column", key) and SQUARED.get(wanted) == unit:
                raise DataFault(
                    f"column {column.name!r} is in {column.unit}; {name} is a power density.",
                    where=self.table.source,
                    hint=f'Write {{ column = "{column.name}", unit = "{column.unit}" }}.',
                )
            return power
        raise DataFault(
            f"column {column.name!r} has a unit that is not known: {column.unit!r}.",
            where=self.table.source,
            hint=f'Give it in the recipe: {name} = {{ column = "{column.name}", unit = "..." }}.',
        )

    def restarted(self, name: str, source: ValueSource, recipe: SweepRecipe) -> Array:
        """Find the values of an axis that shows only by another axis beginning anew.

        Parameters
        ----------
        name : str
            The axis.
        source : ValueSource
            With `restart`.
        recipe : SweepRecipe
            For the axis inside it.

        Returns
        -------
        ndarray, shape (n_rows,)
            The values [SI].
        """
        assert source.restart is not None
        block = self._blocks(source, recipe, name)
        steps = np.asarray(source.restart)
        count = int(block[-1]) + 1
        if count % steps.size:
            raise DataFault(
                f"{source.outside} begins {count} times in {self.table.source}, which "
                f"{steps.size} values of {name} do not divide.",
                where=source.where,
                hint="Check the restart list against the sweep.",
            )
        return steps[block % steps.size]

    def _blocks(self, source: ValueSource, recipe: SweepRecipe, name: str) -> NDArray[np.intp]:
        inner = recipe.axes.get(source.outside)
        if inner is not None and inner.restart is not None:
            blocks = self._blocks(inner, recipe, source.outside)
            return np.asarray(blocks // len(inner.restart), dtype=np.intp)
        values = self.axes[source.outside]
        jumps = np.diff(values)
        if not np.any(jumps):
            raise DataFault(
                f"{source.outside} never moves, so {name} cannot follow its restarts.",
                where=source.where,
            )
        direction = np.sign(jumps[np.flatnonzero(jumps)[0]])
        starts = np.concatenate(([0], np.cumsum(jumps * direction < 0)))
        lengths = np.bincount(starts)
        if np.any(lengths != lengths[0]):
            odd = int(np.flatnonzero(lengths != lengths[0])[0])
            row = int(np.flatnonzero(starts == odd)[0])
            raise DataFault(
                f"a run of {source.outside} has {lengths[odd]} points where others have "
                f"{lengths[0]}.",
                where=self.table.where(row),
            )
        return np.asarray(starts, dtype=np.intp)

    def _place(self, source: ValueSource) -> str:
        return source.where or self.table.source


def standard_column(name: str, table: TextTable) -> ValueSource | None:
    """Look for a column that bears the standard name of an axis or a quantity.

    Parameters
    ----------
    name : str
        The standard name.
    table : TextTable
        Where to look.

    Returns
    -------
    ValueSource or None
        That column.

    Examples
    --------
    >>> standard_column("length", TextTable("a.csv", [Column("L", "um", np.ones(1))])).expression
    '`L`'
    """
    aliases = {"length": ("length", "l")}.get(name, (name,))
    for column in table.names:
        if column.lower() in aliases:
            return ValueSource(expression=f"`{column}`")
    return None


def _no_axis(name: str, recipe: SweepRecipe, table: TextTable) -> UnknownName:
    return UnknownName(
        f"nothing tells the axis {name} of {table.source}.",
        where=recipe.where,
        hint=f'Give it in the recipe: [sweep.axes] {name} = "COLUMN", or {{ value = ... }}, '
        f"{{ from = ..., pattern = ... }}, {{ restart = ... }}. {list_columns(table)}",
    )


def list_columns(table: TextTable) -> str:
    """List the columns of a table, for a hint.

    Parameters
    ----------
    table : TextTable
        The table.

    Returns
    -------
    str
        A sentence.

    Examples
    --------
    >>> list_columns(TextTable("a.csv", [Column("vgs", None, np.zeros(1))]))
    'Columns: vgs.'
    """
    shown = ", ".join(table.names[:20])
    return f"Columns: {shown}{', ...' if len(table.names) > 20 else ''}."


def convert(values: Array, spelling: str | None, name: str, part: Part) -> Array:
    """Scale values by the unit that the recipe gives.

    Parameters
    ----------
    values : ndarray
        As the file has them.
    spelling : str or None
        The unit; None leaves them as they are.
    name : str
        The axis or quantity.
    part : Part
        Takes the note of the conversion.

    Returns
    -------
    ndarray
        In SI.

    Raises
    ------
    DataFault
        If that is no unit of it.

    Examples
    --------
    >>> part = Part(TextTable("a.csv", []), None)
    >>> convert(np.array([1.0]), "um", "length", part).tolist()
    [1e-06]
    """
    if spelling is None:
        return np.asarray(values, dtype=np.float64)
    unit = QUANTITIES[name].unit
    power = unit_power(spelling, unit)
    squared = power is None and unit in SQUARED
    if squared:
        power = unit_power(spelling, SQUARED[unit])
    if power is None:
        raise DataFault(
            f"{spelling!r} is not a unit of {name}, which is in {unit or 'no unit'}.",
            where=part.table.source,
            hint=advise(spelling, UNIT_WORDS.get(unit, ())),
        )
    if power or squared:
        part.converted.setdefault(spelling, {})[name] = None
    scaled = values * 10.0**power if power >= 0 else values / 10.0**-power
    return np.asarray(scaled**2 if squared else scaled, dtype=np.float64)
