"""Small-signal runs and noise spectra: from frequency rows to one value a bias point.

An AC run that drives one terminal with 1 V gives the admittance ``Y = I / 1 V``: its real part
is a conductance, its imaginary part over ``2 pi f`` a capacitance, with the sign turned off the
diagonal.  A noise spectrum is the sum of a flat and a 1/f part, which a fit tells apart.
"""

from __future__ import annotations

import math
from collections.abc import Mapping

import numpy as np

from gmid.errors import DataFault
from gmid.nomenclature import AXES, CAPACITANCES
from gmid.quantity import format_quantity, unit_power
from gmid.sweep.parts import Part, list_columns
from gmid.sweep.recipe import SweepRecipe, ValueSource
from gmid.sweep.rows import Array, Note
from gmid.sweep.texttable import TextTable

_CONDUCTANCES = ("gm", "gds", "gmb")
_POWERS = {"A/rtHz": 2, "V/rtHz": 2, "A^2/Hz": 1, "V^2/Hz": 1}
_FREQUENCY_NAMES = ("frequency", "freq", "f", "hz")


def resolve_quantities(part: Part, sources: Mapping[str, ValueSource], recipe: SweepRecipe) -> None:
    """Find the quantities of a part whose axes are known, in place.

    Parameters
    ----------
    part : Part
        With axes.
    sources : mapping of str to ValueSource
        Where each quantity is.
    recipe : SweepRecipe
        For the frequency of admittances.

    Raises
    ------
    DataFault
        If an expression or a unit does not fit, or a spectrum cannot be fitted.

    Examples
    --------
    >>> from pathlib import Path
    >>> from gmid.sweep.model import UnitTransistor
    >>> from gmid.sweep.texttable import Column
    >>> table = TextTable("a.raw", [Column("frequency", "Hz", np.array([1e6])),
    ...                             Column("i(vg)", "A", np.array([-2e-9 - 6.283185307e-8j]))])
    >>> part = Part(table, None)
    >>> recipe = SweepRecipe("n", UnitTransistor("n", 2e-6), (Path("a.raw"),))
    >>> resolve_quantities(part, {"cgg": ValueSource(admittance="-i(vg)")}, recipe)
    >>> f"{part.values['cgg'][0]:.6g}"
    '1e-14'
    """
    spectra = {name: source for name, source in sources.items() if source.spectrum is not None}
    if spectra:
        _fit_spectra(part, sources, spectra)
        return
    if any(source.admittance is not None for source in sources.values()):
        _choose_frequency(part, recipe)
    for name, source in sources.items():
        if source.admittance is None:
            part.values[name] = part.resolve(name, source)
        else:
            part.values[name] = _by_admittance(part, name, source)


def find_frequency(table: TextTable, *, where: str | None = None) -> Array:
    """Find the column of frequencies.

    Parameters
    ----------
    table : TextTable
        The table.
    where : str, optional
        Place for messages.

    Returns
    -------
    ndarray, shape (n_rows,)
        Frequency [Hz].

    Raises
    ------
    DataFault
        If no column is called frequency or is in hertz.

    Examples
    --------
    >>> from gmid.sweep.texttable import Column
    >>> find_frequency(TextTable("a.csv", [Column("freq", "kHz", np.array([1.0]))])).tolist()
    [1000.0]
    """
    for column in table.columns:
        power = None if column.unit is None else unit_power(column.unit, "Hz")
        if power is not None or (column.unit is None and column.name.lower() in _FREQUENCY_NAMES):
            return np.asarray(column.values.real * 10.0 ** (power or 0), dtype=np.float64)
    raise DataFault(
        f"{table.source} has no column of frequencies.", where=where,
        hint=f"It must be called frequency or be in Hz. {list_columns(table)}",
    )  # fmt: skip


def _choose_frequency(part: Part, recipe: SweepRecipe) -> None:
    """Keep the rows at the frequency of the recipe."""
    frequency = find_frequency(part.table, where=recipe.where)
    frequency = frequency if part.taken is None else frequency[part.taken]
    there = np.unique(frequency)
    wanted = recipe.frequency
    if wanted is None and there.size > 1:
        raise DataFault(
            f"{part.table.source} has {there.size} frequencies from "
            f"{format_quantity(float(there[0]), 'Hz')} to "
            f"{format_quantity(float(there[-1]), 'Hz')}.",
            where=recipe.where, hint='Say which one: frequency = "1 MHz".',
        )  # fmt: skip
    nearest = float(there[np.argmin(np.abs(there - (wanted or there[0])))])
    if wanted is not None and abs(nearest - wanted) > 1e-3 * wanted:
        raise DataFault(
            f"{part.table.source} has no rows at {format_quantity(wanted, 'Hz')}; the nearest are "
            f"at {format_quantity(nearest, 'Hz')}.", where=recipe.where,
            hint="Give that frequency, or simulate the one wanted.",
        )  # fmt: skip
    if nearest <= 0:
        raise DataFault(f"a frequency of {nearest:g} Hz has no admittance.", where=recipe.where)
    part.keep(np.flatnonzero(frequency == nearest))


def _by_admittance(part: Part, name: str, source: ValueSource) -> Array:
    admittance = part.evaluate(name, source)
    if name in _CONDUCTANCES:
        return np.array(admittance.real, dtype=np.float64)
    if name not in CAPACITANCES:
        raise DataFault(
            f"{name} cannot be read from an admittance.", where=source.where,
            hint="Only gm, gds, gmb and the capacitances can.",
        )  # fmt: skip
    frequency = find_frequency(part.table)
    frequency = frequency if part.taken is None else frequency[part.taken]
    sign = 1.0 if name[1] == name[2] else -1.0
    return np.asarray(sign * admittance.imag / (2 * math.pi * frequency), dtype=np.float64)


def _fit_spectra(
    part: Part, sources: Mapping[str, ValueSource], spectra: Mapping[str, ValueSource]
) -> None:
    others = [name for name in sources if name not in spectra]
    if others:
        raise DataFault(
            f"{', '.join(others)} cannot be read from the rows of a spectrum.",
            where=spectra[next(iter(spectra))].where,
            hint="Give the spectrum a [[sweep]] of its own, with the same device and condition.",
        )  # fmt: skip
    wrong = [name for name in spectra if not name.startswith("noise_")]
    if wrong:
        raise DataFault(
            f"{wrong[0]} cannot be read from a spectrum.", where=spectra[wrong[0]].where,
            hint="Only noise_thermal and noise_flicker can.",
        )  # fmt: skip
    frequency = find_frequency(part.table)
    frequency = frequency if part.taken is None else frequency[part.taken]
    densities = {name: _density(part, name, source) for name, source in spectra.items()}
    points = np.stack([part.axes[name] for name in AXES], axis=1)
    _, first, group = np.unique(points, axis=0, return_index=True, return_inverse=True)
    fitted = {name: np.empty(first.size) for name in spectra}
    worst = 0.0
    for k in range(first.size):
        rows = np.flatnonzero(group.ravel() == k)
        for name, density in densities.items():
            thermal, flicker, error = fit_noise(frequency[rows], density[rows])
            fitted[name][k] = thermal if name == "noise_thermal" else flicker
            worst = max(worst, error)
    if math.isinf(worst):
        raise DataFault(
            f"the spectrum of {part.table.source} cannot be split into a flat and a 1/f part: it "
            "has fewer than two frequencies or values that are not positive.",
            where=next(iter(spectra.values())).where, hint="Simulate more frequencies.",
        )  # fmt: skip
    order = np.argsort(first)
    part.keep(first[order])
    part.values = {name: values[order] for name, values in fitted.items()}
    level = "doubtful" if worst > 0.05 else "read"
    part.notes.append(
        Note(
            level,
            f"noise: thermal and flicker part fitted to spectra, worst deviation {worst:.1%}.",
        )
    )


def fit_noise(frequency: Array, density: Array) -> tuple[float, float, float]:
    """Split a spectrum into a flat and a 1/f part, by least squares of relative deviations.

    Parameters
    ----------
    frequency : ndarray, shape (n,)
        Frequencies [Hz].
    density : ndarray, shape (n,)
        Power density [A^2/Hz].

    Returns
    -------
    thermal, flicker, error : float
        Flat part [A^2/Hz], 1/f part at 1 Hz [A^2/Hz], largest relative deviation [-]; the
        deviation is infinite where no fit is possible.

    Examples
    --------
    >>> f = np.array([1.0, 1e3, 1e6])
    >>> thermal, flicker, error = fit_noise(f, 2e-24 + 3e-20 / f)
    >>> f"{thermal:.3g} {flicker:.3g}", error < 1e-9
    ('2e-24 3e-20', True)
    """
    if np.unique(frequency).size < 2 or (frequency <= 0).any() or (density <= 0).any():
        return math.nan, math.nan, math.inf
    shape = np.stack([1 / density, 1 / (frequency * density)], axis=1)
    scale = np.abs(shape).max(axis=0)
    found, *_ = np.linalg.lstsq(shape / scale, np.ones(density.size), rcond=None)
    thermal, flicker = (found / scale).tolist()
    if thermal < 0:
        thermal, flicker = 0.0, float(shape[:, 1].sum() / (shape[:, 1] ** 2).sum())
    elif flicker < 0:
        thermal, flicker = float(shape[:, 0].sum() / (shape[:, 0] ** 2).sum()), 0.0
    error = float(np.abs((thermal + flicker / frequency) / density - 1).max())
    return thermal, flicker, error


def _density(part: Part, name: str, source: ValueSource) -> Array:
    """Turn the column of a spectrum into a power density of the drain current."""
    values = np.asarray(part.evaluate(name, source).real, dtype=np.float64)
    if source.unit not in _POWERS:
        raise DataFault(
            f"the spectrum for {name} needs its unit.", where=source.where,
            hint=f"One of {', '.join(_POWERS)}.",
        )  # fmt: skip
    values = values ** _POWERS[source.unit]
    if source.unit.startswith("V"):
        if source.resistance is None:
            raise DataFault(
                f"a voltage spectrum for {name} needs the resistance that the noise current "
                "flows in.", where=source.where, hint='Such as resistance = "1 kohm".',
            )  # fmt: skip
        values = values / source.resistance**2
    return values
