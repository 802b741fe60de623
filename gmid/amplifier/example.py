"""An invented amplifier on invented devices of closed formulas, for examples and trials."""

from __future__ import annotations

from dataclasses import replace
from functools import lru_cache

import numpy as np

from gmid.amplifier.plan import AmplifierPlan, Supply, TransistorPlan
from gmid.device.device import Device
from gmid.device.example import example_sweep
from gmid.sweep.model import UnitTransistor

_TEMPLATE = "M{name} {d} {g} {s} {b} example w={width} l={length} m={count}"

_PLACES = {
    "pair": ("nmos", 0.5e-6, 4), "tail": ("nmos", 2e-6, 8), "load": ("pmos", 1e-6, 2),
    "direct": ("pmos", 1e-6, 5), "copy": ("pmos", 1e-6, 2), "turn": ("nmos", 2e-6, 4),
    "opposite": ("nmos", 2e-6, 8), "control": ("nmos", 2e-6, 2), "error_tail": ("pmos", 2e-6, 2),
    "error_pair": ("pmos", 0.5e-6, 2), "error_load": ("nmos", 2e-6, 1),
    "bias_reference": ("nmos", 2e-6, 2), "bias_mirror": ("nmos", 2e-6, 2),
    "bias_load": ("pmos", 2e-6, 2),
}  # fmt: skip


def example_plan() -> AmplifierPlan:
    """Make a plain n-input amplifier for `example_devices` and `example_supply`.

    Returns
    -------
    AmplifierPlan
        All of it invented.

    Examples
    --------
    >>> example_plan()
    AmplifierPlan(a1: n-input, plain, resistors, 14 places)
    """
    transistors = {place: TransistorPlan(*numbers) for place, numbers in _PLACES.items()}
    return AmplifierPlan(
        "a1", transistors, load_capacitance=2e-12, load_resistance=1e6,
        error_resistance=50e3, error_capacitance=2e-12,
    )  # fmt: skip


def example_supply() -> Supply:
    """Make the supply of the example: 1.8 V and 2 uA, 10 % each.

    Returns
    -------
    Supply
        The supply.

    Examples
    --------
    >>> example_supply().voltage
    1.8
    """
    return Supply(1.8, 2e-6, tolerance=0.1, reference_tolerance=0.1)


@lru_cache(maxsize=1)
def example_devices() -> dict[str, Device]:
    """Make the devices of the example: `nmos`, and `pmos` with a third of its current.

    Returns
    -------
    dict of str to Device
        With capacitances: the gate's to the source, a constant overlap and junctions.

    Examples
    --------
    >>> sorted(example_devices())
    ['nmos', 'pmos']
    """
    base = example_sweep()
    found = {}
    for name, polarity, strength in (("nmos", "n", 1.0), ("pmos", "p", 1 / 3)):
        values = dict(base.values)
        for key in ("id", "gm", "gds", "gmb", "noise_thermal", "noise_flicker"):
            values[key] = values[key] * strength
        normal = base.values["id"] * base.length[:, None, None, None] / (2e-6 * 5.2e-7)
        values["vdsat"] = 0.026 * (4 + 2 * np.sqrt(np.maximum(normal, 0.0)))
        overlap, junction = 0.6e-15, 1.5e-15
        gate = values["cgg"]
        values |= {
            "cgg": gate + 2 * overlap, "cgd": overlap + 0 * gate, "cgs": gate + overlap,
            "cdg": overlap + 0 * gate, "cdd": overlap + junction + 0 * gate, "cds": 0 * gate,
            "csg": gate + overlap, "csd": 0 * gate, "css": gate + overlap + junction,
        }  # fmt: skip
        unit = UnitTransistor(polarity, 2e-6, netlist=_TEMPLATE)
        found[name] = Device(replace(base, device=name, unit=unit, values=values))
    return found
