"""Physics: whether what was read is the sweep of a transistor, in the units it claims.

Each check judges where it is meant: monotonicity and the q/(kT) bound only above a
thousandth of the current at threshold, for below that leakage and the simulator's own
conductances may rule.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from gmid.condition import BOLTZMANN
from gmid.errors import DataFault, GmidError
from gmid.nomenclature import AXES, TERMINALS
from gmid.sweep.derive import SLOPES
from gmid.sweep.model import Array, Sweep
from gmid.sweep.rows import Note, describe_point

THRESHOLD_CURRENT = 100e-9
"""Constant-current threshold: this times W/L [A], common practice."""

_LINES = 500
"""Lines along an axis on which a slope is compared."""

_ROUNDING = 3e-5
"""Relative slack for rounded digits and solver tolerance."""


def check_sweep(sweep: Sweep) -> tuple[list[GmidError], list[Note]]:
    """Judge a gridded sweep.

    Parameters
    ----------
    sweep : Sweep
        After signs, gridding and derivation.

    Returns
    -------
    list of GmidError
        Faults that forbid the import.
    list of Note
        What is doubtful but may be meant.

    Examples
    --------
    >>> from gmid.condition import Condition
    >>> from gmid.sweep.model import UnitTransistor
    >>> vgs = np.linspace(0.0, 1.0, 41)
    >>> id = 1e-6 * np.log1p(np.exp((vgs - 0.4) / 0.07)) ** 2
    >>> sweep = Sweep("n", Condition("tt", 27.0), UnitTransistor("n", 2e-6), np.array([1e-6]),
    ...               np.array([0.0]), np.array([1.0]), vgs, {"id": id.reshape(1, 1, 1, -1)})
    >>> check_sweep(sweep)
    ([], [])
    """
    faults: list[GmidError] = []
    notes: list[Note] = []
    on = conducting(sweep)
    if not on.any():
        faults.append(
            DataFault(
                f"no bias point of {sweep.label} conducts: the largest current is "
                f"{sweep['id'].max():.3g} A for W = {sweep.unit.width:g} m.",
                hint="Check the unit of id and the unit transistor's width.",
            )
        )
        return faults, notes
    for check in (_monotone, _bound, _positive, _consistent, _magnitudes, _sum_rules):
        check(sweep, on, faults, notes)
    return faults, notes


def conducting(sweep: Sweep) -> NDArray[np.bool_]:
    """Points above a thousandth of the constant-current threshold, in saturation or triode.

    Parameters
    ----------
    sweep : Sweep
        With `id`.

    Returns
    -------
    ndarray of bool, shape of the grid
        True where the physics of a conducting channel must hold.

    Examples
    --------
    >>> from gmid.condition import Condition
    >>> from gmid.sweep.model import UnitTransistor
    >>> one = np.ones(1)
    >>> sweep = Sweep("n", Condition("tt", 27.0), UnitTransistor("n", 2e-6), one * 1e-6, one * 0,
    ...               one, one, {"id": np.full((1, 1, 1, 1), 1e-6)})
    >>> bool(conducting(sweep).all())
    True
    """
    floor = 1e-3 * THRESHOLD_CURRENT * sweep.unit.width / sweep.length
    return np.asarray(sweep["id"] > floor[:, None, None, None])


def _point(sweep: Sweep, index: tuple[int, ...]) -> str:
    return describe_point(
        {name: float(getattr(sweep, name)[i]) for name, i in zip(AXES, index, strict=True)}
    )


def _first(mask: NDArray[np.bool_]) -> tuple[int, ...]:
    return tuple(int(i) for i in np.unravel_index(int(np.argmax(mask)), mask.shape))


def _monotone(
    sweep: Sweep, on: NDArray[np.bool_], faults: list[GmidError], notes: list[Note]
) -> None:
    current = sweep["id"]
    for name, position, sense in (("vgs", 3, 1.0), ("vds", 2, 1.0), ("vsb", 1, -1.0)):
        if current.shape[position] < 2:
            continue
        step = sense * np.diff(current, axis=position)
        here = np.delete(current, 0, axis=position)
        there = np.delete(current, -1, axis=position)
        larger = np.maximum(np.abs(here), np.abs(there))
        wrong = step < -_ROUNDING * larger
        conducts = np.delete(on, 0, axis=position) & np.delete(on, -1, axis=position)
        serious = wrong & conducts & (step < -1e-3 * larger)
        word = "rises" if sense < 0 else "falls"
        if np.count_nonzero(serious) > 0.01 * np.count_nonzero(conducts):
            where = _point(sweep, _first(serious))
            faults.append(
                DataFault(
                    f"id of {sweep.label} {word} with {name} at {np.count_nonzero(serious)} "
                    f"conducting points, first beyond {where}.",
                    hint="Check the signs and the reference of the axes, and the order of rows.",
                )
            )
        elif wrong.any():
            count = np.count_nonzero(wrong)
            inner = np.count_nonzero(wrong & conducts)
            where = f"{inner} of them conducting" if inner else "all of them in leakage"
            notes.append(Note("doubtful", f"id {word} with {name} at {count} points, {where}."))


def _bound(sweep: Sweep, on: NDArray[np.bool_], faults: list[GmidError], notes: list[Note]) -> None:
    if "gm" not in sweep:
        return
    limit = 1.0 / sweep.condition.thermal_voltage
    with np.errstate(divide="ignore", invalid="ignore"):
        ratio = np.where(on & (sweep["id"] > 0), sweep["gm"] / sweep["id"], 0.0)
    over = ratio > limit * 1.01
    if "gm" in sweep.derived and np.count_nonzero(over) < 0.01 * np.count_nonzero(on):
        return
    if over.any():
        index = tuple(int(i) for i in np.unravel_index(int(ratio.argmax()), ratio.shape))
        faults.append(
            DataFault(
                f"gm/id of {sweep.label} reaches {ratio.max():.4g} 1/V at "
                f"{_point(sweep, index)}, above q/kT = {limit:.4g} 1/V at "
                f"{sweep.condition.temperature:g} C.",
                hint="Check the temperature of the recipe and the units of gm and id.",
            )
        )


def _positive(
    sweep: Sweep, on: NDArray[np.bool_], faults: list[GmidError], notes: list[Note]
) -> None:
    saturated = on & (sweep.vds > 0.05)[:, None]
    for name in ("gm", "gds", "gmb"):
        if name not in sweep:
            continue
        wrong = saturated & (sweep[name] < 0)
        share = int(np.count_nonzero(wrong)) / max(1, int(np.count_nonzero(saturated)))
        if share > (0.05 if name in sweep.derived or name == "gmb" else 0.01):
            faults.append(
                DataFault(
                    f"{name} of {sweep.label} is negative at {np.count_nonzero(wrong)} "
                    f"conducting points, first at {_point(sweep, _first(wrong))}.",
                    hint=f"Check its column, or let it be derived: {name} = {{ derived = true }}.",
                )
            )
            continue
        void = saturated & (sweep[name] <= 0)
        if void.any():
            count = np.count_nonzero(void)
            notes.append(Note("doubtful", f"{name} is zero or negative at {count} points."))
    for name in ("noise_thermal", "noise_flicker"):
        if name in sweep and np.any(sweep[name] < 0):
            wrong = sweep[name] < 0
            faults.append(
                DataFault(f"{name} of {sweep.label} is negative at {_point(sweep, _first(wrong))}.")
            )


def _consistent(
    sweep: Sweep, on: NDArray[np.bool_], faults: list[GmidError], notes: list[Note]
) -> None:
    """Compare gm, gds and gmb with what the current says, at the median of many lines."""
    for name, axis, position in (("gm", "vgs", 3), ("gds", "vds", 2), ("gmb", "vsb", 1)):
        grid = getattr(sweep, axis)
        if name not in sweep or name in sweep.derived or grid.size < (3 if name == "gmb" else 4):
            continue
        thin, conducts = _thinned(sweep, on, name, position)
        slope = SLOPES[name](thin)
        usable = conducts & (slope > 0) & (thin[name] > 0)
        if name != "gm":
            usable = usable & (thin.vds > 0.1)[:, None]
        usable = _inner(usable, position)
        if np.count_nonzero(usable) < 5:
            continue
        ratio = float(np.median(thin[name][usable] / slope[usable]))
        decade = round(float(np.log10(ratio)))
        pure = abs(np.log10(ratio) - decade) < 0.06
        if decade and decade % 3 == 0 and pure:
            faults.append(
                DataFault(
                    f"{name} of {sweep.label} is {10.0**decade:g} times d id/d {axis}.",
                    hint=f"Its unit or that of id is wrong by {10.0**decade:g}: "
                    "give the right one in the recipe.",
                )
            )
        elif not 0.9 < ratio < 1.1:
            notes.append(
                Note(
                    "doubtful",
                    f"{name} is {ratio:.3g} times d id/d {axis} at the median; "
                    f"to take the slope instead: {name} = {{ derived = true }}.",
                )
            )


def _thinned(
    sweep: Sweep, on: NDArray[np.bool_], name: str, position: int
) -> tuple[Sweep, NDArray[np.bool_]]:
    """Keep one axis whole and so much of the others as a sound median needs."""
    index = [np.arange(size) for size in sweep.shape]
    others = [k for k in range(4) if k != position]
    while np.prod([index[k].size for k in others]) > _LINES:
        longest = max(others, key=lambda k: index[k].size)
        index[longest] = index[longest][::2]
    grid = np.ix_(*index)
    axes = {axis: getattr(sweep, axis)[kept] for axis, kept in zip(AXES, index, strict=True)}
    values = {key: sweep[key][grid] for key in ("id", name)}
    return replace(sweep, values=values, **axes), on[grid]


def _inner(mask: NDArray[np.bool_], position: int) -> NDArray[np.bool_]:
    """Leave out the ends of an axis, where one-sided slopes are poor."""
    inner = np.zeros(mask.shape[position], dtype=bool)
    inner[1:-1] = True
    return np.asarray(mask & inner.reshape([-1 if i == position else 1 for i in range(4)]))


def _magnitudes(
    sweep: Sweep, on: NDArray[np.bool_], faults: list[GmidError], notes: list[Note]
) -> None:
    area = sweep.unit.width * sweep.length[:, None, None, None]
    ceiling = 1.0 * area + 1e-8 * sweep.unit.width
    for name in ("cgg", "cdd", "css", "cbb"):
        if name not in sweep:
            continue
        values = sweep[name]
        if np.median(values[on]) <= 0 or np.any(
            values[on] > np.broadcast_to(ceiling, on.shape)[on]
        ):
            faults.append(
                DataFault(
                    f"{name} of {sweep.label} is {float(np.median(values[on])):.3g} F at the "
                    f"median for W = {sweep.unit.width:g} m: not plausible.",
                    hint="Check its unit and sign.",
                )
            )
    if "vth" in sweep and np.any(np.abs(sweep["vth"]) > 3):
        faults.append(DataFault(f"vth of {sweep.label} passes 3 V.", hint="Check its unit."))
    if "noise_thermal" in sweep and "gm" in sweep:
        kelvin = sweep.condition.kelvin
        saturated = on & (sweep.vds > 0.3)[:, None] & (sweep["gm"] > 0)
        if saturated.any():
            expected = 4 * BOLTZMANN * kelvin * sweep["gm"][saturated]
            ratio = float(np.median(sweep["noise_thermal"][saturated] / expected))
            if not 0.02 < ratio < 50:
                faults.append(
                    DataFault(
                        f"noise_thermal of {sweep.label} is {ratio:.3g} times 4kT gm.",
                        hint="It must be the density of the drain current in A^2/Hz; give the "
                        'unit in the recipe if it is not, such as unit = "A/rtHz".',
                    )
                )


def _sum_rules(
    sweep: Sweep, on: NDArray[np.bool_], faults: list[GmidError], notes: list[Note]
) -> None:
    """Rows of the capacitance matrix sum to zero: diagonal = sum of the row's others."""
    for row in TERMINALS:
        others = [f"c{row}{column}" for column in TERMINALS if column != row]
        whole = f"c{row}{row}"
        if whole not in sweep or any(name not in sweep for name in others):
            continue
        total: Array = sum((sweep[name] for name in others), np.zeros(sweep.shape))
        ratio = float(np.median(sweep[whole][on] / total[on]))
        if abs(ratio - 1) > 0.02:
            cause = (
                "it seems to leave out the overlap capacitances; better leave it out of the recipe"
                if ratio < 1
                else "check the columns"
            )
            notes.append(
                Note("doubtful", f"{whole} is {ratio:.3g} times {' + '.join(others)}: {cause}.")
            )
