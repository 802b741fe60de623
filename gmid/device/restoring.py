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
    raw: Mapping[str, Array],
    vds: Array,
    rest: Array | None,
    thermal_voltage: Array | float,
    rest_gm: Array | None = None,
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
    thermal_voltage : ndarray or float
        kT/q [V].
    rest_gm : ndarray, optional
        Its slope by vgs [S].

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
        if rest_gm is not None:
            found["gm"] = found["gm"] + rest_gm
        found["gm_over_id"] = raw["gm"]
        if rest is not None:
            total = channel + rest
            ratio = np.array(np.broadcast_to(raw["gm"], total.shape))
            found["gm_over_id"] = np.divide(found["gm"], total, out=ratio, where=total > 0)
    return found
