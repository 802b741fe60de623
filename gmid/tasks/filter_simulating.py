"""A plan's whole filter in the reference simulator, beside what was predicted."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from gmid.amplifier.filtering.distortion import find_amplitude, measure_harmonic
from gmid.amplifier.filtering.positions import place_plans
from gmid.amplifier.filtering.realised import realise_filter
from gmid.device.device import Device
from gmid.filters.demand_types import FilterDemands
from gmid.quantity import format_quantity
from gmid.request.plans import PlanFile
from gmid.simulation.comparison import Comparison
from gmid.simulation.filters import simulate_filter

_POINTS = (0.1, 0.5, 0.9, 1.0)
"""Where the gain is shown, over the width of the passband [-]."""


def compare_filter(
    found: FilterDemands, file: PlanFile, devices: Mapping[str, Device], models: str, *,
    voltage: float, quick: bool = False,
) -> tuple[Comparison, ...]:  # fmt: skip
    """Simulate the filter of a plan and set its figures beside the predicted ones.

    Parameters
    ----------
    found : FilterDemands
        The filter.
    file : PlanFile
        Its amplifiers.
    devices : mapping of str to Device
        Of one condition.
    models : str
        Text of ``models.inc``.
    voltage : float
        Supply [V].
    quick : bool
        The response alone, without start-up and distortion.

    Returns
    -------
    tuple of Comparison
        Gain at some frequencies, and the largest difference over the passband; start-up and third
        harmonic.

    Examples
    --------
    >>> compare_filter.__name__
    'compare_filter'
    """
    made, supply, spec = found.realisation, file.request.supply, found.spec
    by_position = place_plans(file.plans, made)
    predicted = realise_filter(made, by_position, devices, supply, voltage=voltage)
    parts = ["ac"] if quick else ["ac", "startup"]
    tone = None
    if spec.swing is not None and not quick:
        parts.append("distortion")
        tone = (spec.harmonic_frequency, find_amplitude(predicted, spec.swing))
    seen = simulate_filter(
        made, file.plans, supply, devices, models, voltage=voltage, parts=parts, tone=tone
    )
    low, high = found.plane.fine.passband
    inside = (seen.frequency >= low) & (seen.frequency <= high)
    with np.errstate(divide="ignore"):
        ours = 20 * np.log10(np.abs(predicted.respond(seen.frequency[inside])))
    theirs = seen.gain_db[inside]
    rows = []
    for share in _POINTS:
        k = int(np.argmin(np.abs(seen.frequency[inside] - (low + share * (high - low)))))
        at = float(seen.frequency[inside][k])
        rows.append(
            Comparison(f"gain {format_quantity(at, 'Hz')}", float(ours[k]), float(theirs[k]), "dB")
        )
    k = int(np.argmax(np.abs(ours - theirs)))
    rows.append(Comparison(
        f"gain furthest off, {format_quantity(float(seen.frequency[inside][k]), 'Hz')}",
        float(ours[k]), float(theirs[k]), "dB",
    ))  # fmt: skip
    if not quick:
        rows.append(Comparison("startup_error", 0.0, seen.startup_error, "V"))
    if tone is not None:
        harmonic = measure_harmonic(
            predicted, devices, supply, frequency=tone[0], amplitude=tone[1]
        )
        rows.append(Comparison("third_harmonic", float(harmonic.decibels), seen.harmonic_db, "dB"))
    return tuple(rows)
