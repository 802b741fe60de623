"""From text tables to rows: tables chosen, unfolded, mapped part by part, joined."""

from __future__ import annotations

import re
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from gmid.condition import Condition
from gmid.errors import DataFault, GmidError, UnknownName, raise_faults
from gmid.nomenclature import AXES, SWEEP_QUANTITIES
from gmid.sweep.capture import captured, read_captured
from gmid.sweep.merging import merge_rows
from gmid.sweep.parts import Part, list_columns, standard_column
from gmid.sweep.recipe import SweepRecipe, ValueSource
from gmid.sweep.rows import Array, Note, Rows
from gmid.sweep.spectra import resolve_quantities
from gmid.sweep.texttable import TextTable
from gmid.sweep.unfolding import unfold_columns


def map_tables(
    recipe: SweepRecipe, tables: Sequence[TextTable], *, partial: bool = False
) -> list[Rows]:
    """Turn the text tables of one sweep into rows, one `Rows` for each condition.

    Parameters
    ----------
    recipe : SweepRecipe
        What to take from where.
    tables : sequence of TextTable
        All tables of the sweep's files.
    partial : bool
        Whether another sweep of the recipe may bring the current.

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
    >>> from gmid.sweep.texttable import Column
    >>> table = TextTable("a.csv", [Column("vgs", "mV", np.array([100.0])),
    ...                             Column("id", "uA", np.array([2.0]))])
    >>> fixed = {"length": ValueSource(value=1e-6), "vds": ValueSource(value=0.6),
    ...          "vsb": ValueSource(value=0.0)}
    >>> recipe = SweepRecipe("nmos", UnitTransistor("n", 2e-6), (Path("a.csv"),), fixed)
    >>> map_tables(recipe, [table])[0].values["id"].tolist()
    [2e-06]
    """
    parts: dict[Condition, list[Part]] = {}
    faults: list[GmidError] = []
    before: TextTable | None = None
    for table in _chosen(recipe, tables):
        if before is not None and before.source != table.source:
            before = None
        try:
            if _is_mapped(recipe, table):
                for piece in unfold_columns(recipe, table):
                    for condition, taken in _conditions(recipe, piece):
                        part = _build(recipe, piece, taken, before, partial=partial)
                        parts.setdefault(condition, []).append(part)
        except GmidError as fault:
            faults.append(fault)
        before = table if table.rows == 1 else before
    raise_faults(_unique(faults))
    return [_join(recipe, condition, group) for condition, group in parts.items()]


def _unique(faults: Sequence[GmidError]) -> list[GmidError]:
    return list({str(fault): fault for fault in faults}.values())


def _words(table: TextTable) -> str:
    return "\n".join(table.meta.get(key, "") for key in ("plot", "title"))


def _is_mapped(recipe: SweepRecipe, table: TextTable) -> bool:
    return recipe.plots is None or re.search(recipe.plots, _words(table), re.I) is not None


def _chosen(recipe: SweepRecipe, tables: Sequence[TextTable]) -> Sequence[TextTable]:
    """Check that the pattern of plots fits at least one table."""
    if recipe.plots is not None and not any(_is_mapped(recipe, table) for table in tables):
        names = dict.fromkeys(_words(table).replace("\n", " / ") for table in tables)
        raise DataFault(
            f"no plot or title matches plots = {recipe.plots!r}.", where=recipe.where,
            hint=f"There are: {'; '.join(list(names)[:8])}.",
        )  # fmt: skip
    return tables


def _conditions(
    recipe: SweepRecipe, table: TextTable
) -> list[tuple[Condition, NDArray[np.intp] | None]]:
    """Find the condition of a table, or of groups of its rows."""
    taken = _taken_rows(recipe, table)
    corner, temperature = recipe.corner, recipe.temperature
    if corner.expression is None and temperature.expression is None:
        name = corner.value if corner.origin is None else captured(corner, table)
        return [(Condition(str(name), _degrees(temperature, table)), taken)]
    part = Part(table, taken)
    names = np.full(part.rows, str(corner.value)) if corner.expression is None else np.char.strip(
        _column(corner, part).astype(str)
    )  # fmt: skip
    degrees = (
        np.full(part.rows, _degrees(temperature, table)) if temperature.expression is None
        else part.resolve("temperature", temperature)
    )  # fmt: skip
    found: list[tuple[Condition, NDArray[np.intp] | None]] = []
    rows = np.arange(part.rows) if taken is None else taken
    for name, value in dict.fromkeys(zip(names.tolist(), degrees.tolist(), strict=True)):
        here = (names == name) & (degrees == value)
        found.append((Condition(name, value), rows[here]))
    return found


def _column(corner: ValueSource, part: Part) -> NDArray[np.str_]:
    values = part.table.column((corner.expression or "").strip("`")).values
    return values if part.taken is None else values[part.taken]


def _degrees(temperature: ValueSource, table: TextTable) -> float:
    if temperature.origin is not None:
        return read_captured(captured(temperature, table), "degC", temperature)
    return float(temperature.value if temperature.value is not None else np.nan)


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


def _build(
    recipe: SweepRecipe, table: TextTable, taken: NDArray[np.intp] | None,
    before: TextTable | None, *, partial: bool,
) -> Part:  # fmt: skip
    part = Part(table, taken, before)
    part.find_axes(recipe)
    sources = dict(recipe.quantities)
    for name in SWEEP_QUANTITIES:
        if name not in sources and (found := standard_column(name, table)) is not None:
            sources[name] = found
    if "id" not in sources and not partial:
        raise UnknownName(
            f"no column of {table.source} gives id, the drain current.",
            where=recipe.where,
            hint=f"Name it in the recipe: [sweep.quantities] id = ... {list_columns(table)}",
        )
    wanted = {name: source for name, source in sources.items() if not source.derived}
    if not wanted:
        raise UnknownName(
            f"nothing tells a quantity of {table.source}.", where=recipe.where,
            hint=f"Name one in the recipe: [sweep.quantities]. {list_columns(table)}",
        )  # fmt: skip
    resolve_quantities(part, wanted, recipe)
    return part


def _join(recipe: SweepRecipe, condition: Condition, parts: Sequence[Part]) -> Rows:
    """Put parts with the same quantities below each other, and those with others beside them."""
    groups: dict[frozenset[str], list[Part]] = {}
    for part in parts:
        groups.setdefault(frozenset(part.values), []).append(part)
    stacks = [_stack(recipe, condition, group) for group in groups.values()]
    for other in stacks[1:]:
        if other.values.keys() & stacks[0].values.keys():
            one, two = stacks[0].pieces[0][1].source, other.pieces[0][1].source
            raise DataFault(
                f"{two} holds other quantities than {one}: "
                f"{', '.join(sorted(other.values.keys() ^ stacks[0].values.keys()))}.",
                where=recipe.where,
            )
    return merge_rows(stacks)


def _stack(recipe: SweepRecipe, condition: Condition, parts: Sequence[Part]) -> Rows:
    starts = np.cumsum([0, *(part.rows for part in parts)])
    converted: dict[str, dict[str, None]] = {}
    notes = list(dict.fromkeys(note for part in parts for note in part.notes))
    for part in parts:
        for unit, names in part.converted.items():
            converted.setdefault(unit, {}).update(names)
    notes += [
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
