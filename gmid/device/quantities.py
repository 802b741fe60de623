"""Which quantities a table can answer, and how the derived ones follow from the stored."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from functools import lru_cache

from gmid.device.capacitance import combine, find_capacitances
from gmid.device.spline import Array
from gmid.nomenclature import CAPACITANCES
from gmid.sweep.model import Sweep

_NEEDS = {
    "gm_over_id": ("id", "gm"),
    "current_density": ("id",),
    "normalized_current": ("id",),
    "intrinsic_gain": ("id", "gm", "gds"),
    "ft": ("id", "gm", "cgg"),
}
"""Derived quantities and what they are made of."""

_ORDER = (
    "id", "gm", "gds", "gmb", "gm_over_id", "current_density", "normalized_current",
    "intrinsic_gain", "ft", "vdsat", "vth", *CAPACITANCES, "noise_thermal", "noise_flicker",
)  # fmt: skip


def list_quantities(sweep: Sweep) -> tuple[str, ...]:
    """List what can be answered from what a sweep stores.

    Parameters
    ----------
    sweep : Sweep
        With `id`.

    Returns
    -------
    tuple of str
        Names in the order in which answers give them.

    Examples
    --------
    >>> from gmid.device.example import example_sweep
    >>> list_quantities(example_sweep())[:5]
    ('id', 'gm', 'gds', 'gmb', 'gm_over_id')
    """
    stored = frozenset(sweep.values)
    there = set(stored) | set(find_capacitances(stored))
    there |= {name for name, parts in _NEEDS.items() if there.issuperset(parts)}
    return tuple(name for name in _ORDER if name in there)


def list_needs(names: Sequence[str], stored: frozenset[str]) -> list[str]:
    """List the stored quantities that some answers are made of.

    Parameters
    ----------
    names : sequence of str
        Answers, each of `list_quantities`.
    stored : frozenset of str
        What the sweep stores.

    Returns
    -------
    list of str
        Names of stored quantities, without repetition.

    Examples
    --------
    >>> list_needs(["ft"], frozenset({"id", "gm", "cgg"}))
    ['id', 'gm', 'cgg']
    """
    return list(_list_needs(tuple(names), stored))


@lru_cache(maxsize=256)
def _list_needs(names: tuple[str, ...], stored: frozenset[str]) -> tuple[str, ...]:
    found: list[str] = []
    for name in names:
        for part in _NEEDS.get(name, (name,)):
            found.extend(find_capacitances(stored)[part] if part in CAPACITANCES else [part])
    return tuple(dict.fromkeys(found))


def derive_answer(
    name: str, values: Mapping[str, Array], length: Array, width: float, stored: frozenset[str]
) -> Array:
    """Compute one answer from stored quantities.

    Parameters
    ----------
    name : str
        Of `list_quantities`.
    values : mapping of str to ndarray, shape (...)
        Stored quantities of one unit, and `gm_over_id` with `gm`.
    length : ndarray, shape (...)
        Channel length [m].
    width : float
        Width of the unit [m].
    stored : frozenset of str
        What the sweep stores.

    Returns
    -------
    ndarray, shape (...)
        In SI: `current_density` is id/W [A/m], `normalized_current` id L/W [A], `ft`
        gm/(2 pi cgg) [Hz].

    Examples
    --------
    >>> import numpy as np
    >>> values = {"id": np.array(1e-6)}
    >>> float(derive_answer("current_density", values, np.array(1e-6), 2e-6, frozenset(values)))
    0.5
    """
    if name == "current_density":
        return values["id"] / width
    if name == "normalized_current":
        return values["id"] * length / width
    if name == "intrinsic_gain":
        return values["gm"] / values["gds"]
    if name == "ft":
        gate = derive_answer("cgg", values, length, width, stored)
        return values["gm"] / (2 * math.pi * gate)
    if name in CAPACITANCES and name not in values:
        return combine(name, values, stored)
    return values[name]
