"""Invented devices for circuit tests, from the formulas of `builders` on a fine grid."""

from __future__ import annotations

import numpy as np

import builders
from gmid.condition import Condition
from gmid.device import Device
from gmid.sweep.model import Sweep, UnitTransistor

CAPACITANCES = {
    "cgg": 10.0, "cgd": 2.0, "cgs": 6.0, "cdg": 3.0, "cdd": 4.5, "cds": -0.5,
    "csg": 5.0, "csd": 0.2, "css": 7.0,
}  # fmt: skip
"""Of a unit [fF]: not symmetric, as in saturation."""

TEMPLATE = "M{name} {d} {g} {s} {b} unit_n w={width} l={length} m={count}"


def make_device(
    name="nmos", polarity="n", *, vt0=0.42, spec=0.6e-6, lam=0.04e-6, corner="tt",
    length=(0.5e-6, 1e-6, 2e-6), netlist=TEMPLATE,
):  # fmt: skip
    """An EKV device (see `builders.ekv`) with constant capacitances and invented noise."""
    axes = (
        np.array(length), np.array([0.0, 0.2, 0.5, 0.9, 1.4]),
        np.array([0, 0.02, 0.04, 0.07, 0.1, 0.15, 0.2, 0.3, 0.45, 0.6, 0.9, 1.2, 1.6, 2.0]),
        np.round(np.arange(-0.2, 2.01, 0.025), 6),
    )  # fmt: skip
    long, vsb, vds, vgs = np.meshgrid(*axes, indexing="ij")
    id_, gm, gds, gmb = builders.ekv(long, vsb, vds, vgs, vt0=vt0, spec=spec, lam=lam)
    values = {"id": id_, "gm": gm, "gds": gds, "gmb": gmb}
    values |= {key: np.full(id_.shape, value * 1e-15) for key, value in CAPACITANCES.items()}
    values["noise_thermal"] = 1.6e-20 * (0.67 * gm + gds)
    values["noise_flicker"] = 1e-13 * gm**2 * 1e-6
    unit = UnitTransistor(polarity, 2e-6, netlist=netlist)
    return Device(Sweep(name, Condition(corner, 27.0), unit, *axes, values))


def forward_current(device, bias, name):
    """The current of an instance by a forward query of its table, at the solved voltages."""
    transistor = bias.circuit.find(name)
    here = [float(read(name)) for read in (bias.vgs, bias.vds, bias.vsb)]
    length = float(transistor.length)
    point = device.at(length=length, vgs=here[0], vds=here[1], vsb=here[2])
    return float(point.id) * float(transistor.count)
