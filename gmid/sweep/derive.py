"""Quantities that a text does not hold, derived from those it holds, and marked so.

All derivatives are taken of logarithms, which stay smooth over the decades of weak
inversion where difference quotients of the current itself are far off.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from gmid.sweep.model import Array, Sweep
from gmid.sweep.rows import Note

VDSAT_FRACTION = 0.15
"""Part of its value at vds = 0 to which gds falls at the derived edge of saturation."""

_TINY = 1e-300


def derive_missing(
    sweep: Sweep, unwanted: frozenset[str] = frozenset()
) -> tuple[Sweep, list[Note]]:
    """Add `gm`, `gds`, `gmb` and `vdsat` where they are missing and can be derived.

    Parameters
    ----------
    sweep : Sweep
        With `id`.
    unwanted : frozenset of str
        Quantities to derive even though the sweep has them.

    Returns
    -------
    Sweep
        With the derived quantities marked in `Sweep.derived`.
    list of Note
        What was derived, and what could not be.

    Examples
    --------
    >>> from gmid.condition import Condition
    >>> from gmid.sweep.model import UnitTransistor
    >>> axis = np.linspace(0.0, 1.0, 6)
    >>> current = 1e-9 * np.exp(axis / 0.03) * np.ones((1, 1, 6, 1))
    >>> sweep = Sweep("n", Condition("tt", 27.0), UnitTransistor("n", 2e-6), np.array([1e-6]),
    ...               np.array([0.0]), axis, axis, {"id": current})
    >>> found, notes = derive_missing(sweep)
    >>> bool(np.allclose(found["gm"] / found["id"], 1 / 0.03))
    True
    """
    notes: list[Note] = []
    makers: dict[str, tuple[str, Callable[[Sweep], Array]]] = {
        "gm": ("id d(ln id)/dvgs, cubic spline", _derive_gm),
        "gds": (
            "derivative along vds of id, cubic spline of ln(id/(1-exp(-vds q/kT)))",
            _derive_gds,
        ),
        "gmb": ("-id d(ln id)/dvsb, cubic spline", _derive_gmb),
        "vdsat": (
            f"vds at which gds falls to {VDSAT_FRACTION:.0%} of its value at vds = 0",
            _derive_vdsat,
        ),
    }
    for name, (how, make) in makers.items():
        if name in sweep and name not in unwanted:
            continue
        reason = _hindrance(sweep, name)
        if reason:
            notes.append(Note("doubtful", f"{name} is missing and cannot be derived: {reason}."))
            continue
        values = make(sweep)
        sweep = replace(
            sweep,
            values={**sweep.values, name: values},
            derived={**sweep.derived, name: how},
        )
        notes.append(Note("derived", f"{name}: {how}."))
        if name == "vdsat":
            notes.extend(_vdsat_notes(sweep))
    return sweep, notes


def _hindrance(sweep: Sweep, name: str) -> str:
    axis = {"gm": "vgs", "gds": "vds", "gmb": "vsb", "vdsat": "vds"}[name]
    count = getattr(sweep, axis).size
    if name == "gmb" and count == 1:
        return "vsb has one point"
    if name != "gmb" and count < 4:
        return f"{axis} has only {count} points"
    if name == "vdsat" and sweep.vds[0] != 0:
        return f"vds begins at {sweep.vds[0]:g} V, not at 0"
    return ""


def _slope(array: Array, axis: Array, position: int) -> Array:
    from scipy.interpolate import make_interp_spline

    degree = min(3, axis.size - 1)
    spline = make_interp_spline(axis, array, k=degree, axis=position)
    return np.asarray(spline(axis, nu=1), dtype=np.float64)


def _log_slope(current: Array, axis: Array, position: int) -> Array:
    return _slope(np.log(np.maximum(current, _TINY)), axis, position)


def _derive_gm(sweep: Sweep) -> Array:
    current = sweep["id"]
    by_logarithm = current * _log_slope(current, sweep.vgs, 3)
    plain = _slope(current, sweep.vgs, 3)
    return np.where(np.min(current, axis=3, keepdims=True) > 0, by_logarithm, plain)


def _derive_gmb(sweep: Sweep) -> Array:
    current = sweep["id"]
    by_logarithm = -current * _log_slope(current, sweep.vsb, 1)
    plain = -_slope(current, sweep.vsb, 1)
    return np.where(np.min(current, axis=1, keepdims=True) > 0, by_logarithm, plain)


def _derive_gds(sweep: Sweep) -> Array:
    vt = sweep.condition.thermal_voltage
    start = int(np.searchsorted(sweep.vds, 1e-9))
    vds = sweep.vds[start:]
    current = sweep["id"][:, :, start:, :]
    positive = np.min(current, axis=2, keepdims=True) > 0
    fall = -np.expm1(-vds / vt)[:, None]
    q = np.log(np.maximum(current, _TINY) / fall)
    slope = _slope(q, vds, 2)
    rise = (np.exp(-vds / vt) / (vt * -np.expm1(-vds / vt)))[:, None]
    inner = np.where(positive, current * (slope + rise), _slope(current, vds, 2))
    if start == 0:
        return inner
    from scipy.interpolate import make_interp_spline

    at_zero = make_interp_spline(vds, q, k=min(3, vds.size - 1), axis=2)(sweep.vds[:start])
    edge = np.where(positive, np.exp(at_zero) / vt, inner[:, :, :1, :])
    return np.concatenate((edge, inner), axis=2)


SLOPES: dict[str, Callable[[Sweep], Array]] = {
    "gm": _derive_gm,
    "gds": _derive_gds,
    "gmb": _derive_gmb,
}
"""How each conductance follows from the current, for deriving and for checking it."""


def _derive_vdsat(sweep: Sweep) -> Array:
    """Find, on each line along vds, where gds crosses its fraction, linear in ln gds."""
    logs = np.log(np.maximum(sweep["gds"], _TINY))
    target = logs[:, :, :1, :] + np.log(VDSAT_FRACTION)
    below = logs <= target
    crossing = np.argmax(below, axis=2)
    reached = below.any(axis=2)
    high = np.maximum(crossing, 1)[:, :, None, :]
    upper = np.take_along_axis(logs, high, axis=2)
    lower = np.take_along_axis(logs, high - 1, axis=2)
    share = np.clip((lower - target) / np.maximum(lower - upper, _TINY), 0.0, 1.0)
    left, right = sweep.vds[high - 1], sweep.vds[high]
    edge = np.where(reached[:, :, None, :], left + share * (right - left), sweep.vds[-1])
    return np.broadcast_to(edge, sweep.shape).copy()


def _vdsat_notes(sweep: Sweep) -> list[Note]:
    capped = int(np.count_nonzero(sweep["vdsat"][:, :, 0, :] >= sweep.vds[-1]))
    if not capped:
        return []
    total = sweep["vdsat"][:, :, 0, :].size
    return [
        Note(
            "doubtful",
            f"vdsat: at {capped} of {total} points it lies beyond the largest vds, "
            f"{sweep.vds[-1]:g} V, which stands there in its place.",
        )
    ]
