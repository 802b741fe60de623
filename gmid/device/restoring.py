"""From transformed quantities back to currents, conductances and densities."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from gmid.device.aligned import LOGARITHMIC
from gmid.device.channel import saturate
from gmid.device.spline import Array

ON_CURRENT = frozenset({"gm", "gmb", "noise_flicker"})
"""Quantities that are held relative to the channel's current."""


def restore(
    raw: Mapping[str, Array], vds: Array, rest: Array | None, thermal_voltage: float
) -> dict[str, Array]:
    """Turn transformed quantities back into currents, conductances and densities.

    Parameters
    ----------
    raw : mapping of str to ndarray
        Transformed quantities.
    vds : ndarray
        Drain-source voltage [V].
    rest : ndarray or None
        Current at vds = 0 [A].
    thermal_voltage : float
        kT/q [V].

    Returns
    -------
    dict of str to ndarray
        In SI; with ``gm``, ``gm_over_id`` comes along.

    Examples
    --------
    >>> restore({"gds": np.zeros(1)}, np.zeros(1), None, 0.026)
    {'gds': array([1.])}
    """
    found: dict[str, Array] = {}
    channel = np.exp(raw["id"]) * saturate(vds, thermal_voltage) if "id" in raw else np.zeros(1)
    for name, values in raw.items():
        if name == "id":
            found[name] = channel if rest is None else channel + rest
        elif name == "noise_flicker":
            found[name] = np.exp(values) * channel**2
        elif name in ON_CURRENT:
            found[name] = values * channel
        elif name in LOGARITHMIC:
            found[name] = np.exp(values)
        else:
            found[name] = values
    if "gm" in raw:
        ratio = raw["gm"]
        if rest is not None:
            total = channel + rest
            share = np.divide(channel, total, out=np.ones(total.shape), where=total > 0)
            ratio = ratio * share
        found["gm_over_id"] = ratio
    return found
