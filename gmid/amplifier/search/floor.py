"""The supply current below which no plan of this topology can come."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier.search.starts import Task
from gmid.device.device import Device

Array = NDArray[np.float64]

TOPOLOGY_FACTOR = 1.0
"""Largest gm_total over supply current, in gm/Id of the input pair [-].

With mirror ratios K and no current in `control`, ``gm_total = 2 K gm_pair`` from a supply current
of ``2 I (1 + K + copy)``: K gm/Id I over (1 + K + copy) I, which tends to one gm/Id as K grows.
"""


def measure_floor(task: Task, roles: Mapping[str, str]) -> float:
    """Give the floor of the supply current.

    Parameters
    ----------
    task : Task
        Its demands on `gm_total`, `gbw` and `dc_gain` count, and the load.
    roles : mapping of str to str
        Device by role; `pair`, or `n` and `p`, may stand in the input pair.

    Returns
    -------
    float
        Of the condition that needs most [A].

    Notes
    -----
    ``gm_total / (TOPOLOGY_FACTOR * largest gm/Id)`` with ``gm_total`` as asked for, or the one
    that carries the load alone at the unity-gain frequency and at DC. Ratios of 2 to 4 are
    usual: mirror ratios are finite, the input pair is not in the weakest inversion, outputs have
    capacitances of their own, and reference, bias and sensing take their share.

    Examples
    --------
    >>> from gmid.amplifier.search.example import example_search
    >>> floor = measure_floor(example_search().task, {"n": "nmos", "p": "pmos"})
    >>> floor == example_search().task.supply.reference_current
    True
    """
    wanted = [task.demands[name].value for name in ("gm_total",) if name in task.demands]
    if "gbw" in task.demands:
        w = 2 * np.pi * task.demands["gbw"].value
        wanted.append(float(np.hypot(w * task.load[0], 1.0 / task.load[1])))
    if "dc_gain" in task.demands:
        wanted.append(10 ** (task.demands["dc_gain"].value / 20) / task.load[1])
    needed = max(wanted, default=0.0)
    names = [roles[role] for role in ("pair", "n", "p") if role in roles]
    floors = []
    for _, devices in task.bench:
        best = max(largest_efficiency(devices[name]) for name in names)
        floors.append(needed / (TOPOLOGY_FACTOR * best))
    return max(max(floors), task.supply.reference_current)


def largest_efficiency(device: Device) -> float:
    """Find the largest gm/Id that a device has in saturation.

    Parameters
    ----------
    device : Device
        In one condition.

    Returns
    -------
    float
        [1/V].

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices
    >>> 20 < largest_efficiency(example_devices()["nmos"]) < 38.7
    True
    """
    sweep = device.sweep
    gates = sweep.vgs[(sweep.vgs >= 0.1) & (sweep.vgs <= 0.8)]
    drain = float(sweep.vds[np.argmin(np.abs(sweep.vds - 0.5))])
    point = device.at(length=sweep.length[:, None], vgs=gates, vds=drain, vsb=sweep.vsb[0])
    strong = np.asarray(point.id) > 1e-9
    return float(np.max(np.where(strong, point.gm_over_id, 0.0)))
