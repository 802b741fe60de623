"""The capacitance matrix of a transistor, and what follows of it from what is stored.

Charge is conserved and only differences of voltage matter: rows and columns of dQi/dVj sum to
zero.  Nine independent entries therefore give all sixteen.
"""

from __future__ import annotations

from collections.abc import Mapping
from functools import lru_cache

import numpy as np

from gmid.device.spline import Array
from gmid.errors import UnknownName
from gmid.nomenclature import CAPACITANCES, TERMINALS
from gmid.sweep.model import Sweep

_SIGNS = np.where(np.eye(4, dtype=bool), 1.0, -1.0)
"""From stored values (diagonal dQi/dVi, others -dQi/dVj) to true derivatives."""


@lru_cache(maxsize=64)
def find_capacitances(stored: frozenset[str]) -> dict[str, dict[str, float]]:
    """Find which capacitances follow from those stored, and how.

    Parameters
    ----------
    stored : frozenset of str
        Names such as ``cgg``; others are ignored.

    Returns
    -------
    dict of str to dict of str to float
        For each capacitance to be had, the weights of the stored ones.

    Examples
    --------
    >>> find_capacitances(frozenset({"cgg", "cgd", "cgs"}))["cgb"]
    {'cgg': 1.0, 'cgd': -1.0, 'cgs': -1.0}
    """
    rules = np.zeros((8, 16))
    signs = _SIGNS.ravel()
    for index in range(16):
        row, column = divmod(index, 4)
        rules[row, index] = rules[4 + column, index] = signs[index]
    known = [index for index, name in enumerate(CAPACITANCES) if name in stored]
    unknown = [index for index in range(16) if index not in known]
    found = {CAPACITANCES[index]: {CAPACITANCES[index]: 1.0} for index in known}
    if not known or not unknown:
        return found
    inverse = np.linalg.pinv(rules[:, unknown])
    certain = inverse @ rules[:, unknown]
    weights = -inverse @ rules[:, known]
    for row, index in enumerate(unknown):
        alone = np.eye(len(unknown))[row]
        if np.allclose(certain[row], alone, atol=1e-9):
            found[CAPACITANCES[index]] = {
                CAPACITANCES[column]: round(float(weight), 9)
                for column, weight in zip(known, weights[row], strict=True)
                if abs(weight) > 1e-9
            }
    return found


def combine(name: str, values: Mapping[str, Array], stored: frozenset[str]) -> Array:
    """Compute a capacitance from stored ones.

    Parameters
    ----------
    name : str
        One that `find_capacitances` lists.
    values : mapping of str to ndarray
        Stored capacitances [F].
    stored : frozenset of str
        Names stored.

    Returns
    -------
    ndarray
        Capacitance [F].

    Examples
    --------
    >>> parts = {"cgg": np.array(3.0), "cgd": np.array(1.0), "cgs": np.array(1.5)}
    >>> float(combine("cgb", parts, frozenset(parts)))
    0.5
    """
    recipe = find_capacitances(stored)[name]
    return np.asarray(sum(weight * values[part] for part, weight in recipe.items()))


def assemble_matrix(sweep: Sweep, values: Mapping[str, Array] | None = None) -> Array:
    """Put the capacitance matrix together from stored entries.

    Parameters
    ----------
    sweep : Sweep
        Which capacitances are stored.
    values : mapping of str to ndarray, shape (...), optional
        Stored capacitances [F]; without them it is only checked that they suffice.

    Returns
    -------
    ndarray, shape (..., 4, 4)
        dQi/dVj [F], true signs, order gate, drain, source, bulk.

    Raises
    ------
    UnknownName
        If the stored ones do not determine all sixteen.

    Examples
    --------
    >>> from gmid.device.example import example_sweep
    >>> assemble_matrix(example_sweep())  # doctest: +ELLIPSIS
    Traceback (most recent call last):
    ...
    gmid.errors.UnknownName: nmos tt/27 stores only the capacitances cgg: the whole matrix ...
    """
    stored = frozenset(name for name in sweep.values if name in CAPACITANCES)
    recipes = find_capacitances(stored)
    if len(recipes) < len(CAPACITANCES):
        listed = [name for name in CAPACITANCES if name in stored]
        also = [name for name in CAPACITANCES if name in recipes and name not in stored]
        follow = f"; {' '.join(also)} follow from them" if also else ""
        raise UnknownName(
            f"{sweep.label} stores only the capacitances {' '.join(listed) or '(none)'}{follow}: "
            "the whole matrix needs nine independent ones.",
            hint="Import more of them, such as cgg cgd cgs cdg cdd cds csg csd css.",
        )
    if values is None:
        return np.zeros((4, 4))
    entries = {name: combine(name, values, stored) for name in CAPACITANCES}
    rows = [np.stack([entries[f"c{i}{j}"] for j in TERMINALS], axis=-1) for i in TERMINALS]
    return np.asarray(np.stack(rows, axis=-2) * _SIGNS)
