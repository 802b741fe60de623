"""Joins rows that hold other quantities of the same bias points."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from gmid.errors import DataFault
from gmid.nomenclature import AXES
from gmid.sweep.rows import Note, Rows

_SNAP = 1e-6


def merge_rows(stacks: Sequence[Rows]) -> Rows:
    """Put the quantities of several `Rows` beside each other, point by point.

    Parameters
    ----------
    stacks : sequence of Rows
        Of one device and condition, with no quantity in common.

    Returns
    -------
    Rows
        On the points of the one that has `id`, or of the first.

    Raises
    ------
    DataFault
        If another lacks points, or has one twice with other values.

    Examples
    --------
    >>> from gmid.condition import Condition
    >>> from gmid.sweep.texttable import TextTable
    >>> axes = {name: np.array([0.0, 1.0]) for name in AXES}
    >>> turned = {name: axis[::-1] for name, axis in axes.items()}
    >>> piece, tt = [(0, TextTable("a.csv", []), None)], Condition("tt", 27.0)
    >>> one = Rows("n", tt, axes, {"id": np.array([1.0, 2.0])}, piece)
    >>> two = Rows("n", tt, turned, {"cgg": np.array([4.0, 3.0])}, piece)
    >>> merge_rows([one, two]).values["cgg"].tolist()
    [3.0, 4.0]
    """
    ordered = sorted(stacks, key=lambda rows: "id" not in rows.values)
    base = ordered[0]
    for other in ordered[1:]:
        here, there = _codes(base, other)
        order = np.argsort(there, kind="stable")
        found = np.searchsorted(there[order], here)
        found = np.minimum(found, there.size - 1)
        lacking = there[order][found] != here
        if lacking.any():
            row = int(np.argmax(lacking))
            raise DataFault(
                f"{', '.join(other.values)} of {base.label}: {int(lacking.sum())} of {base.size} "
                f"bias points are missing, first {base.point(row)}.",
                where=other.pieces[0][1].source,
                hint="Simulate them at the same points as the current.",
            )
        _check_repeats(other, there, order)
        spare = int((~np.isin(there, here)).sum())
        if spare:
            base.notes.append(Note("doubtful", f"{', '.join(other.values)}: {spare} rows have no "
                                   "current at their bias point and were left out."))  # fmt: skip
        for name, values in other.values.items():
            base.values[name] = values[order][found]
        base.notes += [note for note in other.notes if note not in base.notes]
    return base


def _codes(one: Rows, two: Rows) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
    """Give the bias points of both a number each, the same for the same point."""
    code = np.zeros(one.size + two.size, dtype=np.intp)
    for name in AXES:
        values = np.concatenate((one.axes[name], two.axes[name]))
        unique, inverse = np.unique(values, return_inverse=True)
        steps = np.diff(unique)
        span = float(unique[-1] - unique[0])
        real = steps[steps > 1e-9 * span]
        tolerance = _SNAP * float(real.min()) if real.size else 0.0
        group = np.concatenate(([0], np.cumsum(steps > tolerance)))
        code = code * (int(group[-1]) + 1) + group[inverse]
    return code[: one.size], code[one.size :]


def _check_repeats(rows: Rows, code: NDArray[np.intp], order: NDArray[np.intp]) -> None:
    again = np.flatnonzero(np.diff(code[order]) == 0)
    for name, values in rows.values.items():
        wrong = values[order[again]] != values[order[again + 1]]
        if wrong.any():
            row = int(order[again + 1][np.argmax(wrong)])
            raise DataFault(
                f"{rows.point(row)} occurs twice and {name} disagrees.", where=rows.where(row),
                hint="Remove one of them.",
            )  # fmt: skip
