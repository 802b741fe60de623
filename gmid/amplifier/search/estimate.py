"""Closed forms of the mirror amplifier on charts of unit transistors.

Good to some per cent and degrees: enough to choose what is worth an exact evaluation. Everything
is per side and per ampere in the input device until the tail current is settled.

References
----------
Half circuit of the fully differential current-mirror amplifier: every node a resistance and a
capacitance, mirrors as first-order sections; common practice.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier.plan import Requirement
from gmid.amplifier.search.charts import Reader
from gmid.amplifier.search.sketch import Charts, Sketch

Array = NDArray[np.float64]
Rows = NDArray[np.intp]

_DECIBEL = np.log(10.0) / 20.0
_RADIAN = np.pi / 180.0
_TAIL_DROP = 0.10


@dataclass(frozen=True, eq=False)
class Estimate:
    """What the closed forms say of a sketch at one point, per ampere of input current.

    Parameters
    ----------
    gm_total, own_conductance, own_capacitance : ndarray
        Of each side over the current [S/A], [F/A].
    first_pole, second_pole : ndarray
        Of `load` and of `turn` [rad/s].
    split : ndarray
        Share of the direct path in `gm_total` [-].
    cascode_pole : ndarray
        [rad/s], infinite without cascodes.
    noise : ndarray
        Input density squared times the current [V^2/Hz A].
    room : ndarray
        Least headroom that devices have at rest beyond vdsat [V].
    swing : ndarray
        Peak differential swing with no margin kept [V].
    ratios : tuple of ndarray
        Current ratios of both paths, Kd and Ko [-].
    balance : ndarray
        Current of `control` over that of `direct`, with what vds does to mirrors [-].
    """

    gm_total: Array
    own_conductance: Array
    own_capacitance: Array
    first_pole: Array
    second_pole: Array
    split: Array
    cascode_pole: Array
    noise: Array
    room: Array
    swing: Array
    ratios: tuple[Array, Array]
    balance: Array

    def forward(self, w: Array) -> Array:
        """Give the short-circuit transconductance over its value at DC, complex.

        Parameters
        ----------
        w : ndarray
            [rad/s].

        Returns
        -------
        ndarray of complex
            Broadcast with the sketch.
        """
        s = 1j * w
        second = self.split + (1 - self.split) / (1 + s / self.second_pole)
        return np.asarray(second / ((1 + s / self.first_pole) * (1 + s / self.cascode_pole)))


def estimate(charts: Charts, sketch: Sketch, noise_at: float) -> Estimate:
    """Apply the closed forms.

    Parameters
    ----------
    charts : Charts
        At one point.
    sketch : Sketch
        Candidates.
    noise_at : float
        Frequency of the noise demand [Hz].

    Returns
    -------
    Estimate
        Not-a-number beyond the tables.

    Examples
    --------
    >>> from gmid.amplifier.search.example import example_charts
    >>> one = np.ones(1, dtype=int)
    >>> sketch = Sketch(one, one, one, one, 1e-6 * one, 1e-6 * one, 1e-6 * one, 3.0 * one, one,
    ...                 np.array([0.2]))
    >>> found = estimate(example_charts(), sketch, 1e6)
    >>> bool(60 < found.gm_total[0] < 140), found.ratios[0].tolist()
    (True, [3.0])
    """
    kd, kc, share = sketch.direct, sketch.copy, sketch.share
    pair = _reader(charts, "pair", sketch.pair_length, sketch.pair_unit)
    load = _reader(charts, "mirror", sketch.mirror_length, sketch.mirror_unit)
    direct = _reader(charts, "direct", sketch.mirror_length, sketch.mirror_unit)
    copy = _reader(charts, "copy", sketch.mirror_length, sketch.mirror_unit)
    turn = _reader(charts, "turn", sketch.turn_length, sketch.turn_unit)
    out = _reader(charts, "opposite", sketch.turn_length, sketch.turn_unit)
    ko_ratio = (1 - share) * kd

    gl = load("gm") + load("gds") + pair("gds")
    gt = kc * (turn("gm") + turn("gds") + copy("gds"))
    along = kd * direct("gm") / gl
    through = kc * copy("gm") / gl * ko_ratio * out("gm") / gt
    total = (along + through) * pair("gm")
    go = kd * (direct("gds") + out("gds"))
    own = kd * (direct("cdd") + out("cdd"))
    along_gain = 1 + direct("gds") * (direct("vds") - load("vgs"))
    through_gain = 1 + copy("gds") * (charts.voltage - turn("vgs") - load("vgs"))
    through_gain = through_gain * (1 + out("gds") * (out("vds") - turn("vgs")))
    balance = 1 - (1 - share) * through_gain / along_gain
    cascode_pole = spare = np.asarray(np.inf)
    drop = (direct("vdsat"), out("vdsat"))
    if "direct_cascode" in charts.charts:
        upper = _reader(charts, "direct_cascode", sketch.cascode_length, sketch.mirror_unit)
        lower = _reader(charts, "opposite_cascode", sketch.cascode_length, sketch.turn_unit)
        go = kd * (_stacked(direct("gds"), upper) + _stacked(out("gds"), lower))
        own = kd * (upper("cdd") + lower("cdd"))
        cascode_pole = 0.5 * (
            upper("gm") / (upper("css") + direct("cdd")) + lower("gm") / (lower("css") + out("cdd"))
        )
        inner = [direct("vds"), out("vds")]
        spare = np.minimum(inner[0] - drop[0], inner[1] - drop[1])
        drop = (inner[0] + upper("vdsat"), inner[1] + lower("vdsat"))
    first = gl / (
        pair("cdd") + load("cgg") + load("cdd") - load("cgd") - load("cdg")
        + kc * copy("cgg") + kd * direct("cgg")
    )  # fmt: skip
    second = gt / (
        kc * (copy("cdd") + turn("cgg") + turn("cdd") - turn("cgd") - turn("cdg")) + kd * out("cgg")
    )
    quiet = [
        (along + through) ** 2 * (_noise(pair, noise_at) + _noise(load, noise_at)),
        (ko_ratio * out("gm") / gt) ** 2 * kc * (_noise(copy, noise_at) + _noise(turn, noise_at)),
        kd * (_noise(direct, noise_at) + _noise(out, noise_at)),
    ]
    room, swing = _voltages(charts, sketch, pair, load, turn, drop)
    room = np.minimum(room, spare)
    return Estimate(
        total, go, own, first, second, along / (along + through), cascode_pole,
        2 * (quiet[0] + quiet[1] + quiet[2]) / total**2, room, swing, (kd, ko_ratio), balance,
    )  # fmt: skip


def _reader(charts: Charts, group: str, which: Rows, unit: Array) -> Reader:
    """Read a group's chart per ampere; voltages as they are."""
    chart = charts.charts[group].at(which, unit)

    def read(name: str) -> Array:
        found = chart(name)
        return found if name in ("vgs", "vds", "vdsat") else found / unit

    return read


def _stacked(conductance: Array, cascode: Reader) -> Array:
    g, gds = conductance, cascode("gds")
    return np.asarray(g * gds / (cascode("gm") + cascode("gmb") + gds + g))


def _noise(part: Reader, frequency: float) -> Array:
    return np.asarray(part("noise_thermal") + part("noise_flicker") / frequency)


def _voltages(
    charts: Charts, sketch: Sketch, pair: Reader, load: Reader, turn: Reader,
    drop: tuple[Array, Array],
) -> tuple[Array, Array]:  # fmt: skip
    """Give the least headroom at rest, and the peak swing without margins."""
    vdd = charts.voltage
    tail = charts.input_level - pair("vgs")
    across = vdd - load("vgs") - tail
    rest = np.minimum(across - pair("vdsat"), vdd - turn("vgs") - load("vdsat"))
    rest = np.minimum(rest, tail - _TAIL_DROP)
    upper, lower = vdd - charts.own_level - drop[0], charts.own_level - drop[1]
    return rest, 2 * np.minimum(upper, lower)


def solve_current(
    found: Estimate, demands: Mapping[str, Requirement], load: tuple[float, float],
    extra: tuple[float, float],
) -> Array:  # fmt: skip
    """Give the input current that the demands need at one point.

    Parameters
    ----------
    found : Estimate
        Closed forms.
    demands : mapping of str to Requirement
        What is asked.
    load : tuple of float
        Capacitance and conductance at each output [F], [S].
    extra : tuple of float
        What sensing adds to them [F], [S].

    Returns
    -------
    ndarray
        Of one input device [A]; infinite where no current will do. A gain that none gives is
        left to `measure_shortfall`.

    Examples
    --------
    >>> from gmid.amplifier.search.example import example_charts
    >>> one = np.ones(1, dtype=int)
    >>> sketch = Sketch(one, one, one, one, 1e-6 * one, 1e-6 * one, 1e-6 * one, 3.0 * one, one,
    ...                 np.array([0.2]))
    >>> found = estimate(example_charts(), sketch, 1e6)
    >>> need = solve_current(found, {"gbw": Requirement(5e6)}, (1e-12, 1e-6), (0.0, 0.0))
    >>> bool(0.2e-6 < need[0] < 0.8e-6)
    True
    """
    capacitance, conductance = load[0] + extra[0], load[1] + extra[1]
    needs = [np.asarray(1e-8)]
    if "gbw" in demands:
        w = 2 * np.pi * demands["gbw"].value
        drive = (found.gm_total * np.abs(found.forward(np.asarray(w)))) ** 2
        a = drive - found.own_conductance**2 - (w * found.own_capacitance) ** 2
        b = found.own_conductance * conductance + w**2 * capacitance * found.own_capacitance
        c = conductance**2 + (w * capacitance) ** 2
        with np.errstate(invalid="ignore", divide="ignore"):
            needs.append(np.where(a > 0, (b + np.sqrt(b**2 + a * c)) / a, np.inf))
    if "gm_total" in demands:
        needs.append(demands["gm_total"].value / found.gm_total)
    if "input_noise" in demands:
        needs.append(found.noise / demands["input_noise"].value ** 2)
    if "slew_rate" in demands:
        flow = 2 * (found.ratios[0] + found.ratios[1])
        rate = demands["slew_rate"].value
        with np.errstate(divide="ignore", invalid="ignore"):
            left = flow - rate * found.own_capacitance
            needs.append(np.where(left > 0, rate * capacitance / left, np.inf))
    if "output_current" in demands:
        needs.append(demands["output_current"].value / (2 * np.minimum(*found.ratios)))
    if "dc_gain" in demands:
        needs.append(_carry(found, demands["dc_gain"].value, conductance))
    if "intrinsic_gain" in demands:
        needs.append(_carry(found, demands["intrinsic_gain"].value, extra[1]))
    result = needs[0]
    for need in needs[1:]:
        result = np.maximum(result, need)
    return result


def _carry(found: Estimate, gain_db: float, conductance: float) -> Array:
    """Give the current with which a conductance beside their own leaves a gain [A]."""
    left = found.gm_total / 10 ** (gain_db / 20) - found.own_conductance
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where(left > 0, conductance / left, 0.0)


def measure_shortfall(
    found: Estimate, current: Array, demands: Mapping[str, Requirement],
    load: tuple[float, float], extra: tuple[float, float], margin: float,
) -> Array:  # fmt: skip
    """Sum what is missed at one point with a given current, in the measure of `goals`.

    Parameters
    ----------
    found : Estimate
        Closed forms.
    current : ndarray
        Of one input device [A].
    demands : mapping of str to Requirement
        What is asked.
    load, extra : tuple of float
        As in `solve_current`.
    margin : float
        Headroom that every transistor keeps [V].

    Returns
    -------
    ndarray
        Zero where nothing is missed.

    Examples
    --------
    >>> from gmid.amplifier.search.example import example_charts
    >>> one = np.ones(1, dtype=int)
    >>> sketch = Sketch(one, one, one, one, 1e-6 * one, 1e-6 * one, 1e-6 * one, 3.0 * one, one,
    ...                 np.array([0.2]))
    >>> found = estimate(example_charts(), sketch, 1e6)
    >>> wanted = {"dc_gain": Requirement(100.0)}
    >>> bool(measure_shortfall(found, np.array([1e-6]), wanted, (1e-12, 0.0), (0.0, 0.0), 0.05) > 5)
    True
    """
    capacitance = load[0] + extra[0] + current * found.own_capacitance
    conductance = load[1] + extra[1] + current * found.own_conductance
    drive = current * found.gm_total
    missed = 10.0 * np.maximum(0.0, margin - found.room)
    if "dc_gain" in demands:
        gain = np.log(drive / conductance)
        missed = missed + np.maximum(0.0, demands["dc_gain"].value * _DECIBEL - gain)
    if "intrinsic_gain" in demands:
        gain = np.log(drive / (extra[1] + current * found.own_conductance))
        missed = missed + np.maximum(0.0, demands["intrinsic_gain"].value * _DECIBEL - gain)
    if "swing" in demands:
        lack = demands["swing"].value + 2 * margin - found.swing
        missed = missed + 2.0 * np.maximum(0.0, lack)
    if {"phase_margin", "excess_pole"} & set(demands):
        w = drive / capacitance
        for _ in range(3):
            w = w * np.abs(drive * found.forward(w) / (conductance + 1j * w * capacitance))
        lag = -np.angle(found.forward(w))
        if "phase_margin" in demands:
            phase = np.pi - np.arctan2(w * capacitance, conductance) - lag
            wanted = demands["phase_margin"].value * _RADIAN
            missed = missed + np.maximum(0.0, wanted - phase)
        if "excess_pole" in demands:
            pole = w / np.tan(np.clip(lag, 1e-6, 1.5)) / (2 * np.pi)
            wanted = demands["excess_pole"].value
            missed = missed + np.maximum(0.0, np.log(wanted / pole))
    return np.where(np.isfinite(missed), missed, 9.0)
