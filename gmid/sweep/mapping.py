"""From text tables to rows: the recipe's expressions and patterns, applied."""

from __future__ import annotations

import re
from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gmid.condition import Condition
from gmid.errors import DataFault, GmidError, UnknownName, advise, raise_faults
from gmid.nomenclature import AXES, QUANTITIES, SWEEP_QUANTITIES
from gmid.quantity import UNIT_WORDS, parse_quantity, unit_power
from gmid.sweep.expression import parse_expression
from gmid.sweep.recipe import SweepRecipe, ValueSource
from gmid.sweep.rows import Array, Note, Rows
from gmid.sweep.texttable import Column, TextTable

_SQUARED = {"A^2/Hz": "A/rtHz"}
"""Units whose values must be squared to reach the unit of the quantity."""


def map_tables(recipe: SweepRecipe, tables: Sequence[TextTable]) -> list[Rows]:
    """Turn the text tables of one sweep into rows, one `Rows` for each condition.

    Parameters
    ----------
    recipe : SweepRecipe
        What to take from where.
    tables : sequence of TextTable
        All tables of the sweep's files.

    Returns
    -------
    list of Rows
        In the order in which the conditions first occur.

    Raises
    ------
    GmidError
        If a column, a pattern or a unit does not fit; every table's faults are told at once.

    Examples
    --------
    >>> from pathlib import Path
    >>> from gmid.sweep.model import UnitTransistor
    >>> table = TextTable("a.csv", [Column("vgs", "mV", np.array([100.0])),
    ...                             Column("id", "uA", np.array([2.0]))])
    >>> fixed = {"length": ValueSource(value=1e-6), "vds": ValueSource(value=0.6),
    ...          "vsb": ValueSource(value=0.0)}
    >>> recipe = SweepRecipe("nmos", UnitTransistor("n", 2e-6), (Path("a.csv"),), fixed)
    >>> map_tables(recipe, [table])[0].values["id"].tolist()
    [2e-06]
    """
    parts: dict[Condition, list[_Part]] = {}
    faults: list[GmidError] = []
    for table in tables:
        try:
            condition = _condition(recipe, table)
            parts.setdefault(condition, []).append(_Part.build(recipe, table))
        except GmidError as fault:
            faults.append(fault)
    raise_faults(_unique(faults))
    return [_join(recipe, condition, group) for condition, group in parts.items()]


def _unique(faults: Sequence[GmidError]) -> list[GmidError]:
    return list({str(fault): fault for fault in faults}.values())


def _condition(recipe: SweepRecipe, table: TextTable) -> Condition:
    corner, temperature = recipe.corner, recipe.temperature
    name = corner.value if corner.origin is None else _captured(corner, table)
    degrees = (
        temperature.value
        if temperature.origin is None
        else _number(_captured(temperature, table), "degC", temperature)
    )
    return Condition(str(name), float(degrees if degrees is not None else np.nan))


class _Part:
    """Axes and quantities of one text table."""

    def __init__(self, table: TextTable, taken: NDArray[np.intp] | None) -> None:
        self.table, self.taken = table, taken
        self.axes: dict[str, Array] = {}
        self.values: dict[str, Array] = {}
        self.converted: dict[str, dict[str, None]] = {}
        self.rows = table.rows if taken is None else int(taken.size)

    @classmethod
    def build(cls, recipe: SweepRecipe, table: TextTable) -> _Part:
        part = cls(table, _taken_rows(recipe, table))
        for name in AXES:
            source = recipe.axes.get(name) or _standard_column(name, table)
            if source is None:
                raise _no_axis(name, recipe, table)
            if source.restart is None:
                part.axes[name] = part.resolve(name, source)
        for name in AXES:
            source = recipe.axes.get(name)
            if source is not None and source.restart is not None:
                part.axes[name] = part.restarted(name, source, recipe)
        for name, source in _quantity_sources(recipe, table).items():
            if not source.derived:
                part.values[name] = part.resolve(name, source)
        return part

    def resolve(self, name: str, source: ValueSource) -> Array:
        """Values of an axis or a quantity on every row, in SI."""
        unit = QUANTITIES[name].unit
        if source.value is not None:
            return np.full(self.rows, float(source.value))
        if source.origin is not None:
            return np.full(self.rows, _number(_captured(source, self.table), unit, source))
        assert source.expression is not None
        expression = parse_expression(
            source.expression, self.table.names, where=self._place(source)
        )
        columns = {column: self.table.column(column) for column in expression.columns}
        lookup = {}
        for key, column in columns.items():
            values = self._numbers(column, source)
            if source.unit is None and (power := self._hint(name, key, column, expression.tree)):
                values = values * 10.0**power if power > 0 else values / 10.0**-power
            lookup[key] = values
        result = np.broadcast_to(expression.evaluate(lookup), (self.rows,))
        return _convert(result, source.unit, name, self)

    def _numbers(self, column: Column, source: ValueSource) -> Array:
        values = column.values if self.taken is None else column.values[self.taken]
        if values.dtype.kind == "c":
            raise DataFault(
                f"column {column.name!r} of {self.table.source} is complex.",
                where=source.where,
                hint="An axis or quantity needs a real column.",
            )
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
            if tree == ("column", key) and unit != wanted and _SQUARED.get(wanted) != unit:
                raise DataFault(
                    f"column {column.name!r} is in {column.unit}, but {name} is in {wanted}.",
                    where=self.table.source,
                    hint="Name another column in the recipe.",
                )
            if power:
                self.converted.setdefault(column.unit, {})[name] = None
            if tree == ("column", key) and _SQUARED.get(wanted) == unit:
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
        """Values of an axis that shows only by another axis beginning anew."""
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


def _taken_rows(recipe: SweepRecipe, table: TextTable) -> NDArray[np.intp] | None:
    if not recipe.rows:
        return None
    keep = np.ones(table.rows, dtype=bool)
    for name, word in recipe.rows.items():
        keep &= np.char.lower(table.column(name).values.astype(str)) == word.lower()
    if not keep.any():
        wanted = ", ".join(f"{name} = {word}" for name, word in recipe.rows.items())
        raise DataFault(f"no row of {table.source} has {wanted}.", where=recipe.where)
    return np.flatnonzero(keep)


def _standard_column(name: str, table: TextTable) -> ValueSource | None:
    aliases = {"length": ("length", "l")}.get(name, (name,))
    for column in table.names:
        if column.lower() in aliases:
            return ValueSource(expression=f"`{column}`")
    return None


def _quantity_sources(recipe: SweepRecipe, table: TextTable) -> dict[str, ValueSource]:
    sources = dict(recipe.quantities)
    for name in SWEEP_QUANTITIES:
        if name not in sources and (found := _standard_column(name, table)) is not None:
            sources[name] = found
    if "id" not in sources:
        raise UnknownName(
            f"no column of {table.source} gives id, the drain current.",
            where=recipe.where,
            hint=f"Name it in the recipe: [sweep.quantities] id = ... {_columns(table)}",
        )
    return sources


def _no_axis(name: str, recipe: SweepRecipe, table: TextTable) -> UnknownName:
    return UnknownName(
        f"nothing tells the axis {name} of {table.source}.",
        where=recipe.where,
        hint=f'Give it in the recipe: [sweep.axes] {name} = "COLUMN", or {{ value = ... }}, '
        f"{{ from = ..., pattern = ... }}, {{ restart = ... }}. {_columns(table)}",
    )


def _columns(table: TextTable) -> str:
    shown = ", ".join(table.names[:20])
    return f"Columns: {shown}{', ...' if len(table.names) > 20 else ''}."


def _captured(source: ValueSource, table: TextTable) -> str:
    """Return what the pattern catches in the file's name, title, header, comment or step."""
    assert source.origin is not None
    assert source.pattern is not None
    text = table.source if source.origin == "name" else table.meta.get(source.origin, "")
    match = re.search(source.pattern, text, re.IGNORECASE)
    if match is None or not match.groups():
        raise DataFault(
            f"pattern {source.pattern!r} does not match the {source.origin} {text!r}"
            f" of {table.source}."
            if match is None
            else f"pattern {source.pattern!r} has no group to capture.",
            where=source.where,
            hint="Its first group must be the value.",
        )
    return match.group(1)


def _number(text: str, unit: str, source: ValueSource) -> float:
    """Read captured text, in which ``0p18`` is 0.18, ``m40`` -40, and the recipe gives the unit."""
    word = re.sub(r"^(\d+)p(\d+)$", r"\1.\2", text.strip(), flags=re.IGNORECASE)
    if unit in ("degC", "V"):
        word = re.sub(r"^(?:m|neg)(?=\d)", "-", word, flags=re.IGNORECASE)
    try:
        plain = float(word)
    except ValueError:
        if source.unit is not None:
            raise DataFault(
                f"{text!r} is not a number, though the recipe gives its unit as {source.unit}.",
                where=source.where,
            ) from None
        return parse_quantity(word, unit, where=source.where)
    if source.unit is None:
        if unit == "m":
            raise DataFault(
                f"the length {text!r} has no unit.",
                where=source.where,
                hint='Add one: unit = "um".',
            )
        return plain
    return parse_quantity(f"{word} {source.unit}", unit, where=source.where)


def _convert(values: Array, spelling: str | None, name: str, part: _Part) -> Array:
    if spelling is None:
        return np.asarray(values, dtype=np.float64)
    unit = QUANTITIES[name].unit
    power = unit_power(spelling, unit)
    squared = power is None and unit in _SQUARED
    if squared:
        power = unit_power(spelling, _SQUARED[unit])
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


def _join(recipe: SweepRecipe, condition: Condition, parts: Sequence[_Part]) -> Rows:
    for part in parts[1:]:
        if part.values.keys() != parts[0].values.keys():
            raise DataFault(
                f"{part.table.source} holds other quantities than {parts[0].table.source}: "
                f"{', '.join(sorted(part.values.keys() ^ parts[0].values.keys()))}.",
                where=recipe.where,
            )
    starts = np.cumsum([0, *(part.rows for part in parts)])
    converted: dict[str, dict[str, None]] = {}
    for part in parts:
        for unit, names in part.converted.items():
            converted.setdefault(unit, {}).update(names)
    notes = [
        Note("converted", f"from {unit}: {' '.join(names)}.") for unit, names in converted.items()
    ]

    def stacked(pick: str, name: str) -> Array:
        arrays = [getattr(part, pick)[name] for part in parts]
        return arrays[0] if len(arrays) == 1 else np.concatenate(arrays)

    return Rows(
        recipe.device,
        condition,
        {name: stacked("axes", name) for name in AXES},
        {name: stacked("values", name) for name in parts[0].values},
        [(int(start), part.table, part.taken) for start, part in zip(starts, parts, strict=False)],
        notes,
    )
