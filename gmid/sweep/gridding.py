"""From rows to a full grid: snapping, duplicates, missing points."""

from __future__ import annotations

import math
from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from gmid.errors import DataFault, GmidError, raise_faults
from gmid.nomenclature import AXES, QUANTITIES
from gmid.quantity import format_quantity
from gmid.sweep.coverage import Coverage, Trail
from gmid.sweep.model import Sweep
from gmid.sweep.recipe import SweepRecipe
from gmid.sweep.rows import Array, Note, Rows, describe_point

SNAP = 1e-6
"""Axis values closer than this part of the smallest true step are one value."""

_SPARSEST, _SMALL = 50, 1_000_000
"""A grid of more points than this many a row, and than this many at all, is none."""

_SHOWN = 8
"""How many faulty points a message lists before it counts the rest."""


def build_sweep(rows: Rows, recipe: SweepRecipe, *, trail: Trail | None = None) -> Sweep:
    """Lay rows on their grid.

    Parameters
    ----------
    rows : Rows
        With signs normalised.
    recipe : SweepRecipe
        For the unit transistor and the `nominal` mark.
    trail : Trail, keyword-only, optional
        Told which points of the grid there are, before any that lack are an error.

    Returns
    -------
    Sweep
        With every quantity on the full grid.

    Raises
    ------
    GmidError
        If values are missing or not finite, points are missing, or points that occur twice
        disagree.  Lines and bias points are named.

    Examples
    --------
    >>> from pathlib import Path
    >>> from gmid.condition import Condition
    >>> from gmid.sweep.model import UnitTransistor
    >>> axes = {"length": np.full(2, 1e-6), "vsb": np.zeros(2), "vds": np.ones(2),
    ...         "vgs": np.array([0.5, 0.4])}
    >>> rows = Rows("n", Condition("tt", 27.0), axes, {"id": np.array([2e-6, 1e-6])}, [])
    >>> recipe = SweepRecipe("n", UnitTransistor("n", 2e-6), (Path("a.csv"),))
    >>> build_sweep(rows, recipe)["id"].ravel().tolist()
    [1e-06, 2e-06]
    """
    void = _list_void(rows, rows.values)
    if unknown := _list_void(rows, rows.axes):
        raise_faults(unknown + void)
    axes: dict[str, Array] = {}
    index = np.zeros(rows.size, dtype=np.intp)
    for name in AXES:
        axes[name], codes = _snap(rows, name)
        index = index * axes[name].size + codes
    _check_lengths(axes["length"], rows)
    shape = tuple(axes[name].size for name in AXES)
    total = math.prod(shape)
    _check_size(rows, axes, total)
    if trail is not None:
        trail.coverages.append(_cover(rows, axes, index))
    raise_faults(void)
    index = _unique_index(rows, index, axes, total)
    ordered = index.size == total and bool(np.all(np.diff(index) == 1))
    values = {
        name: (column.copy() if ordered else _scatter(column, index)).reshape(shape)
        for name, column in rows.values.items()
    }
    return Sweep(
        rows.device,
        rows.condition,
        recipe.unit,
        axes["length"],
        axes["vsb"],
        axes["vds"],
        axes["vgs"],
        values=values,
        nominal=recipe.nominal,
    )


def _scatter(column: Array, index: NDArray[np.intp]) -> Array:
    out = np.empty(int(index.max()) + 1)
    out[index] = column
    return out


def _list_void(rows: Rows, columns: Mapping[str, Array]) -> list[GmidError]:
    """List the columns that hold something else than finite numbers."""
    faults: list[GmidError] = []
    for name, values in columns.items():
        bad = np.flatnonzero(~np.isfinite(values))
        if bad.size:
            row = int(bad[0])
            more = f" and {bad.size - 1} more" if bad.size > 1 else ""
            place = "" if name in rows.axes else f" at {rows.point(row)}"
            faults.append(
                DataFault(
                    f"{name} is not a finite number{place}{more}.",
                    where=rows.where(row),
                    hint="Repair the sweep; nothing was imported.",
                )
            )
    return faults


def _check_size(rows: Rows, axes: dict[str, Array], total: int) -> None:
    """Refuse rows that lie on no grid: each with values of its own on two axes or more."""
    if total <= max(_SPARSEST * rows.size, _SMALL):
        return
    sizes = " x ".join(f"{axes[name].size} {name}" for name in AXES)
    raise DataFault(
        f"the {rows.size} rows of {rows.label} lie on no grid: their values would make "
        f"one of {sizes} points.",
        where=rows.where(0),
        hint="Forced values that repeat are wanted on every axis, not measured ones that scatter.",
    )


def _cover(rows: Rows, axes: dict[str, Array], index: NDArray[np.intp]) -> Coverage:
    shape = tuple(axes[name].size for name in AXES)
    sound = np.ones(rows.size, dtype=bool)
    for values in rows.values.values():
        sound &= np.isfinite(values)
    missing = np.ones(math.prod(shape), dtype=bool)
    missing[index[sound]] = False
    return Coverage(rows.device, rows.condition, axes, missing.reshape(shape))


def _snap(rows: Rows, name: str) -> tuple[Array, NDArray[np.intp]]:
    """Return the axis and, for each row, its index along it."""
    import pandas as pd

    codes, found = pd.factorize(rows.axes[name])
    order = np.argsort(found)
    ordered = np.asarray(found, dtype=np.float64)[order]
    steps = np.diff(ordered)
    span = ordered[-1] - ordered[0]
    tolerance = SNAP * _true_step(steps, span)
    group = np.concatenate(([0], np.cumsum(steps > tolerance)))
    rank = np.empty(order.size, dtype=np.intp)
    rank[order] = group
    firsts = ordered[np.flatnonzero(np.diff(group, prepend=-1))]
    step = float(np.diff(firsts).min()) if firsts.size > 1 else abs(float(firsts[0]))
    axis = np.array([_cleaned(value, step) for value in firsts.tolist()])
    merged = ordered.size - axis.size
    if merged:
        rows.notes.append(
            Note("snapped", f"{name}: {merged} value(s) within rounding of another were merged.")
        )
    return axis, rank[codes]


def _true_step(steps: Array, span: float) -> float:
    """Smallest step that is not mere rounding."""
    real = steps[steps > 1e-9 * span] if span > 0 else steps
    return float(real.min()) if real.size else 0.0


def _cleaned(value: float, step: float) -> float:
    """Take off the rounding that sweeps accumulate: 0.6000000000000001 becomes 0.6."""
    if step == 0:
        return value
    short = round(value, 7 - math.floor(math.log10(step)))
    return short + 0.0 if abs(short - value) <= 1e-9 * step else value


def _check_lengths(length: Array, rows: Rows) -> None:
    bad = length[(length < 1e-9) | (length > 1e-3)]
    if bad.size:
        row = int(np.argmin(np.abs(rows.axes["length"] - bad[0])))
        raise DataFault(
            f"a length of {bad[0]:g} m is not plausible.",
            where=rows.where(row),
            hint='Give its unit in the recipe, such as length = { column = "L", unit = "um" }.',
        )


def _unique_index(
    rows: Rows, index: NDArray[np.intp], axes: dict[str, Array], total: int
) -> NDArray[np.intp]:
    """Check that each grid point occurs, and only once in different words."""
    hits = np.bincount(index, minlength=total)
    if np.any(hits == 0):
        raise _missing(rows, np.flatnonzero(hits == 0), axes, total)
    if np.any(hits > 1):
        _check_duplicates(rows, index, hits)
    return index


def _check_duplicates(rows: Rows, index: NDArray[np.intp], hits: NDArray[np.intp]) -> None:
    order = np.argsort(index, kind="stable")
    again = np.flatnonzero(np.diff(index[order]) == 0)
    first, second = order[again], order[again + 1]
    for name, values in rows.values.items():
        differing = np.flatnonzero(values[first] != values[second])
        if differing.size:
            one, two = int(first[differing[0]]), int(second[differing[0]])
            raise DataFault(
                f"{rows.point(two)} occurs twice and {name} disagrees: "
                f"{values[one]:.6g} at {rows.where(one)}, {values[two]:.6g} here"
                f"{_more(differing.size)}.",
                where=rows.where(two),
                hint="Remove one of them.",
            )
    rows.notes.append(
        Note("read", f"{int((hits - 1).sum())} bias points occur twice with equal values.")
    )


def _more(count: int) -> str:
    return f" ({count - 1} more like it)" if count > 1 else ""


def _missing(rows: Rows, holes: NDArray[np.intp], axes: dict[str, Array], total: int) -> DataFault:
    shape = tuple(axes[name].size for name in AXES)
    shown = []
    for hole in holes[:_SHOWN]:
        at = np.unravel_index(int(hole), shape)
        point = {name: float(axes[name][i]) for name, i in zip(AXES, at, strict=True)}
        shown.append(describe_point(point))
    rest = f"; and {holes.size - _SHOWN} more" if holes.size > _SHOWN else ""
    sizes = " x ".join(f"{axes[name].size} {name}" for name in AXES)
    alone = _sparse_axis(rows, axes)
    return DataFault(
        f"{rows.label} lacks {holes.size} of the {total} bias points of its grid "
        f"({sizes}): {'; '.join(shown)}{rest}.{alone}",
        where=rows.where(0),
        hint="Simulate them too, or leave out the partial lines of the sweep.",
    )


def _sparse_axis(rows: Rows, axes: dict[str, Array]) -> str:
    """Point at an axis value that occurs far more seldom than the others."""
    for name in AXES:
        axis = axes[name]
        nearest = (
            np.abs(rows.axes[name][:, None] - axis[None, :]).argmin(axis=1)
            if rows.size * axis.size < 5_000_000
            else np.zeros(0, dtype=np.intp)
        )
        if nearest.size == 0 or axis.size < 3:
            continue
        hits = np.bincount(nearest, minlength=axis.size)
        odd = int(hits.argmin())
        if hits[odd] < 0.5 * np.median(hits):
            value = format_quantity(float(axis[odd]), QUANTITIES[name].unit)
            return f" {name} = {value} occurs on only {hits[odd]} row(s)."
    return ""
