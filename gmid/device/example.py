"""A long-channel device of closed formulas, for examples and for trying things out."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from gmid.condition import Condition
from gmid.sweep.model import Sweep, UnitTransistor


def example_sweep(
    *, length: Sequence[float] = (0.5e-6, 1e-6, 2e-6), vsb: Sequence[float] = (0.0, 0.5, 1.0)
) -> Sweep:
    """Make the sweep of an invented device that follows the EKV interpolation.

    Parameters
    ----------
    length : sequence of float
        Channel lengths [m].
    vsb : sequence of float
        Body biases [V].

    Returns
    -------
    Sweep
        With current, conductances, noise and `cgg` of a unit of 2 um at 27 C: threshold 0.4 V plus
        0.25 V for each volt of vsb, slope factor 1.3, 20 V of Early voltage per micron.

    References
    ----------
    Enz, Krummenacher and Vittoz, Analog Integr. Circuits Signal Process. 8 (1995) 83
    (from memory): i = ln(1 + exp(v/2))^2 in forward minus reverse.

    Examples
    --------
    >>> example_sweep().shape
    (3, 3, 13, 45)
    >>> list(example_sweep().values)
    ['id', 'gm', 'gmb', 'gds', 'cgg', 'noise_thermal', 'noise_flicker']
    """
    condition = Condition("tt", 27.0)
    vt, slope, width = condition.thermal_voltage, 1.3, 2e-6
    vds = np.array([0, 0.025, 0.05, 0.1, 0.15, 0.2, 0.3, 0.4, 0.6, 0.9, 1.2, 1.5, 1.8])
    vgs = np.linspace(-0.2, 2.0, 45)
    lengths, bulks, drains, gates = np.meshgrid(length, vsb, vds, vgs, indexing="ij")
    pinch = (gates - 0.4 - 0.25 * bulks) / slope
    forward, forward_slope = _interpolate(pinch / vt)
    reverse, reverse_slope = _interpolate((pinch - drains) / vt)
    scale = 2 * slope * 3e-4 * width / lengths * vt**2
    early = 1 + drains / (20e6 * lengths)
    channel = scale * (forward - reverse)
    values = {
        "id": channel * early,
        "gm": scale * (forward_slope - reverse_slope) / (slope * vt) * early,
        "gmb": 0.25 * scale * (forward_slope - reverse_slope) / (slope * vt) * early,
        "gds": scale * reverse_slope / vt * early + channel / (20e6 * lengths),
        "cgg": width * lengths * 8e-3 * (0.3 + 0.6 * forward_slope / (1 + forward_slope)),
    }
    values["noise_thermal"] = (
        8 / 3 * 1.380649e-23 * condition.kelvin * (values["gm"] + 1.5 * values["gds"])
    )
    values["noise_flicker"] = 1e-24 * values["gm"] ** 2 / (8e-3 * width * lengths)
    unit = UnitTransistor("n", width)
    return Sweep("nmos", condition, unit, np.asarray(length), np.asarray(vsb), vds, vgs, values)


def _interpolate(voltage: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Give the normalised current of a channel end and its slope."""
    soft = np.logaddexp(0.0, voltage / 2)
    return soft**2, soft / (1 + np.exp(-voltage / 2))
