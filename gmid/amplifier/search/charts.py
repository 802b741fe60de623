"""Unit transistors along their current, for closed forms: one chart for a way of biasing.

A chart holds, for every length, what one unit does at currents in equal steps of the logarithm.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gmid.device.device import Device

Array = NDArray[np.float64]

_STEP = 0.1
_GATE_STEP = 0.02
_ROOM = 0.08

CURRENTS = np.exp(np.arange(np.log(2e-9), np.log(400e-6), _STEP))
"""Currents of one unit [A]."""

QUANTITIES = (
    "vgs", "vds", "gm", "gds", "gmb", "vdsat", "cgg", "cgd", "cgs", "cdd", "cdg", "css",
    "noise_thermal", "noise_flicker",
)  # fmt: skip
"""What a chart holds."""

_EXPONENTIAL = ("gm", "gds", "gmb", "noise_thermal", "noise_flicker")

Reader = Callable[[str], Array]


@dataclass(frozen=True, eq=False)
class Chart:
    """One device at one condition, biased in one way.

    Parameters
    ----------
    length : ndarray, shape (k,)
        [m].
    values : ndarray, shape (quantities, k, currents)
        Of one unit; not-a-number where the table has no such current.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices
    >>> chart = draw_chart(example_devices()["nmos"], [1e-6], "diode")
    >>> bool(15 < chart.read("gm", 0, 1e-6) / 1e-6 < 30)
    True
    """

    length: Array
    values: Array

    def read(self, name: str, which: ArrayLike, current: ArrayLike) -> Array:
        """Give a quantity at currents of one unit.

        Parameters
        ----------
        name : str
            One of `QUANTITIES`.
        which : array_like of int, shape (...)
            Which length.
        current : array_like, shape (...)
            Of one unit [A].

        Returns
        -------
        ndarray, shape (...)
            Not-a-number beyond the table.
        """
        return self.at(which, current)(name)

    def at(self, which: ArrayLike, current: ArrayLike) -> Reader:
        """Settle lengths and currents for several readings.

        Parameters
        ----------
        which : array_like of int, shape (...)
            Which length.
        current : array_like, shape (...)
            Of one unit [A].

        Returns
        -------
        callable
            Gives a quantity by its name, not-a-number beyond the table.
        """
        x = (np.log(np.maximum(current, 1e-15)) - np.log(CURRENTS[0])) / _STEP
        low = np.clip(np.floor(x), 0, CURRENTS.size - 2).astype(np.intp)
        share = np.where((x < 0) | (x > CURRENTS.size - 1), np.nan, x - low)
        index = np.asarray(which, dtype=np.intp) * CURRENTS.size + low

        def read(name: str) -> Array:
            table = self.values[QUANTITIES.index(name)].ravel()
            first = table.take(index)
            return np.asarray(first + (table.take(index + 1) - first) * share)

        return read


def draw_chart(
    device: Device, lengths: Sequence[float], way: str | float, *, vsb: float = 0.0
) -> Chart:
    """Draw the chart of a device.

    Parameters
    ----------
    device : Device
        In one condition.
    lengths : sequence of float
        [m].
    way : "diode", "edge" or float
        vds = vgs; vds a little above the edge of saturation; or vds itself [V].
    vsb : float
        Source-bulk voltage [V].

    Returns
    -------
    Chart
        For all currents of `CURRENTS`.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices
    >>> chart = draw_chart(example_devices()["nmos"], [0.5e-6, 1e-6], 0.9)
    >>> chart.values.shape[1]
    2
    """
    sweep = device.sweep
    bulk = float(np.clip(vsb, sweep.vsb[0], sweep.vsb[-1]))
    top = min(float(sweep.vgs[-1]), 1.6)
    least = max(float(sweep.vgs[0]), float(sweep.vds[0]), 0.0) if way == "diode" else 0.0
    gate = np.arange(least + 0.04, top, _GATE_STEP)
    long, gates = np.broadcast_arrays(np.asarray(lengths)[:, None], gate)
    drain: Array | str
    if way == "diode":
        drain = "diode"
    elif way == "edge":
        first = device.at(length=long, vgs=gates, vds=0.5, vsb=bulk)
        # where a device is off, a derived vdsat may be anything
        drain = np.minimum(np.maximum(first.vdsat, 0.0) + _ROOM, sweep.vds[-1])
    else:
        drain = np.full(gates.shape, float(np.clip(float(way), sweep.vds[0], sweep.vds[-1])))
    point = device.at(length=long, vgs=gates, vds=drain, vsb=bulk)
    known = [name for name in QUANTITIES if name in point.fields]
    read = point.read(["id", *known])
    current = np.log(read["id"])
    wanted = np.log(CURRENTS)
    values = np.zeros((len(QUANTITIES), len(lengths), CURRENTS.size))
    for name in known:
        table = np.broadcast_to(read[name], gates.shape)
        even = name in _EXPONENTIAL and bool(np.all(table > 0))
        table = np.log(table) if even else table
        for k in range(len(lengths)):
            row = np.interp(wanted, current[k], table[k], np.nan, np.nan)
            values[QUANTITIES.index(name), k] = np.exp(row) if even else row
    return Chart(np.asarray(lengths, dtype=np.float64), values)


class ChartBook:
    """Charts of a bench, each drawn once.

    Parameters
    ----------
    bench : sequence of mapping of str to Device
        Devices of every condition.
    """

    def __init__(self, bench: Sequence[Mapping[str, Device]]) -> None:
        self._bench = bench
        self._drawn: dict[tuple[object, ...], Chart] = {}

    def draw(
        self, condition: int, device: str, lengths: Sequence[float], way: str | float, *,
        vsb: float = 0.0,
    ) -> Chart:  # fmt: skip
        """Give a chart, as `draw_chart` does.

        Parameters
        ----------
        condition : int
            Position on the bench.
        device : str
            Name of the device.
        lengths : sequence of float
            [m].
        way : "diode", "edge" or float
            As in `draw_chart`.
        vsb : float
            Source-bulk voltage [V].

        Returns
        -------
        Chart
            The same one for the same question.
        """
        key = (condition, device, tuple(lengths), way, vsb)
        if key not in self._drawn:
            self._drawn[key] = draw_chart(self._bench[condition][device], lengths, way, vsb=vsb)
        return self._drawn[key]
