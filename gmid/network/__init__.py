"""Linear nodal analysis: a network of stamps, its transfers, poles, noise and loop gains.

The package knows no transistor. Everything is batched over leading axes.

Examples
--------
>>> net = Network()
>>> net.add_voltage_source("vin", "in", "0")
>>> net.add_vccs("gm", ("0", "out"), ("in", "0"), 1e-3, pole=1e9)
>>> net.add_resistor("ro", "out", "0", 1e6)
>>> net.add_capacitor("cl", "out", "0", [1e-12, 2e-12])
>>> measure_loop(Transfer(net, "vin", "out")).phase_margin.round(1).tolist()
[51.9, 65.6]
"""

from __future__ import annotations

from gmid.network.loops import DoubleInjection, break_loop
from gmid.network.measures import (
    LoopMeasures,
    find_bandwidth,
    find_crossing,
    find_peak,
    measure_dc_gain,
    measure_gain,
    measure_loop,
)
from gmid.network.modes import Modes, find_poles, find_zeros
from gmid.network.network import Network
from gmid.network.noise import (
    IntegratedNoise,
    Noise,
    compute_noise,
    find_owner_share,
    integrate_noise,
)
from gmid.network.pencil import Pencil, solve_pencil
from gmid.network.response import Transfer, transfer, transfers
from gmid.network.stamps import GROUND, Element, NoiseSource
from gmid.network.structure import Structure

__all__ = [
    "GROUND",
    "DoubleInjection",
    "Element",
    "IntegratedNoise",
    "LoopMeasures",
    "Modes",
    "Network",
    "Noise",
    "NoiseSource",
    "Pencil",
    "Structure",
    "Transfer",
    "break_loop",
    "compute_noise",
    "find_bandwidth",
    "find_crossing",
    "find_owner_share",
    "find_peak",
    "find_poles",
    "find_zeros",
    "integrate_noise",
    "measure_dc_gain",
    "measure_gain",
    "measure_loop",
    "solve_pencil",
    "transfer",
    "transfers",
]
