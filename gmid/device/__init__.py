"""Devices: from grid data to operating points, forward and inverse, and to a solver's models.

Splines are built from a table's grid data in numpy alone, when a quantity is first asked for.

Examples
--------
>>> from gmid.device import Device
>>> from gmid.device.example import example_sweep
>>> nmos = Device(example_sweep())
>>> point = nmos.at(gm_over_id=[10, 20], length=1e-6, vds=0.6)
>>> point.vgs.round(3)
array([0.583, 0.42 ])
>>> point.scaled(id=10e-6).width.round(8)
array([2.390e-06, 2.551e-05])
"""

from __future__ import annotations

from gmid.device.device import DRIVES, Device
from gmid.device.model import DeviceModel
from gmid.device.opening import DeviceTable, open_table
from gmid.device.operating_point import OperatingPoint
from gmid.device.small_signal import SmallSignal

__all__ = [
    "DRIVES",
    "Device",
    "DeviceModel",
    "DeviceTable",
    "OperatingPoint",
    "SmallSignal",
    "open_table",
]
