"""Run the netlists of an amplifier in the reference simulator and read off what was predicted.

The decks are those that `gmid.amplifier.write_netlists` writes; the model files are the user's.
"""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier.decks import find_step, step_wave, write_netlists
from gmid.amplifier.plan import AmplifierPlan, Supply
from gmid.amplifier.prediction import NOISE_FREQUENCIES
from gmid.amplifier.slewing import WINDOW
from gmid.amplifier.topology import build_core
from gmid.device.device import Device
from gmid.errors import NoSolution
from gmid.simulation.results import AcResult, DcResult, NoiseResult, Simulation, TransientResult
from gmid.simulation.runner import run_deck

Array = NDArray[np.float64]

PARTS = ("bias", "open_loop", "common_mode", "noise", "transfer", "step", "startup")
"""What may be simulated."""

_ANALYSIS = re.compile(r"^\.(ac|noise|tran|op|dc)\b.*$", re.MULTILINE)
_INSTANCE = "xa1."  # what the simulator puts before names inside the subcircuit


@dataclass(frozen=True, eq=False)
class SimulatedPlan:
    """What the simulator says of an amplifier in one condition at one supply.

    Parameters
    ----------
    node_voltages : dict of str to float
        By the names of the prediction [V].
    supply_current : float
        Drawn from the supply [A].
    dc_gain_db, gbw, phase_margin : float
        Of the open-loop bench [dB], [Hz], [deg].
    common_mode : tuple of float
        Loop gain at DC [dB], its unity-gain frequency [Hz] and phase margin [deg].
    noise_frequency, input_noise : ndarray, shape (nf,)
        [Hz], and density at the differential input [V/sqrt(Hz)].
    noise_shares : dict of str to ndarray, shape (nf,)
        Part of the output's power density by device, the names those of the prediction [-].
    output_swing : float
        Peak of the differential output at which its small-signal gain has fallen by 3 dB [V].
    slew_rate : float
        Of the differential output, about its middle [V/s].
    settling_time : float
        Of the small step, to 1 % [s].
    startup_error : float
        Largest distance of a node from its bias point at the end of the start-up bench [V].

    Examples
    --------
    >>> SimulatedPlan(dc_gain_db=45.0)
    SimulatedPlan(dc_gain_db=45)
    """

    node_voltages: dict[str, float] = field(default_factory=dict)
    supply_current: float = np.nan
    dc_gain_db: float = np.nan
    gbw: float = np.nan
    phase_margin: float = np.nan
    common_mode: tuple[float, float, float] = (np.nan, np.nan, np.nan)
    noise_frequency: Array = field(default_factory=lambda: np.zeros(0))
    input_noise: Array = field(default_factory=lambda: np.zeros(0))
    noise_shares: dict[str, Array] = field(default_factory=dict)
    output_swing: float = np.nan
    slew_rate: float = np.nan
    settling_time: float = np.nan
    startup_error: float = np.nan

    def __repr__(self) -> str:
        parts = [
            f"{name}={value:.6g}"
            for name, value in vars(self).items()
            if isinstance(value, float) and not np.isnan(value)
        ]
        return f"SimulatedPlan({', '.join(parts)})"


def simulate_plan(
    plan: AmplifierPlan, supply: Supply, devices: Mapping[str, Device], models: str, *,
    voltage: float | None = None, gbw: float = 1e8, parts: Sequence[str] = PARTS,
    noise_frequency: Sequence[float] = NOISE_FREQUENCIES,
) -> SimulatedPlan:  # fmt: skip
    """Run the netlists of an amplifier.

    Parameters
    ----------
    plan : AmplifierPlan
        One amplifier.
    supply : Supply
        What it is fed with.
    devices : mapping of str to Device
        Where the device lines come from.
    models : str
        Contents of `models.inc`: model cards of one corner and ``.options temp=``.
    voltage : float, optional
        Supply [V]; the nominal one by default.
    gbw : float
        Expected unity-gain frequency, for the length of sweeps [Hz].
    parts : sequence of str
        Of `PARTS`.
    noise_frequency : sequence of float
        Where the noise is wanted [Hz].

    Returns
    -------
    SimulatedPlan
        What was not asked for is not-a-number or empty.

    Raises
    ------
    MissingExtra
        If the simulator is not installed.
    NoSolution
        If it does not converge, or a gain never crosses 1.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> simulate_plan(example_plan(), example_supply(), example_devices(), "", parts=[])
    SimulatedPlan()
    """
    files = write_netlists([plan], supply, devices, gbw={plan.name: gbw})
    files["models.inc"] = models
    level = supply.voltage if voltage is None else voltage
    decks = _Decks(files, level, plan, gbw)
    found: dict[str, object] = {}
    for part in parts:
        found |= _READERS[part](decks, noise_frequency)
    return SimulatedPlan(**found)  # type: ignore[arg-type]


@dataclass(frozen=True)
class _Decks:
    """The files of one amplifier at one supply."""

    files: dict[str, str]
    voltage: float
    plan: AmplifierPlan
    gbw: float

    def run(self, kind: str, analysis: str | None = None) -> Simulation:
        deck = self.files[f"bench_{kind}.cir"]
        deck = re.sub(r"^\.param vsupply=.*$", f".param vsupply={self.voltage:.12g}", deck,
                      flags=re.MULTILINE)  # fmt: skip
        if analysis is not None:
            deck = _ANALYSIS.sub(analysis, deck)
        return run_deck(deck, files=self.files)

    @property
    def swing(self) -> float:
        return find_step(self.plan)


def _read_bias(decks: _Decks, _: Sequence[float]) -> dict[str, object]:
    result = decks.run("open_loop", ".op")
    nodes = {
        name[2:-1].removeprefix(_INSTANCE): float(values[0])
        for name, values in result.signals.items()
        if name.startswith("v(")
    }
    if "cm_drive" in nodes:
        nodes["cm_gate"] = nodes["cm_drive"]
    return {"node_voltages": nodes, "supply_current": -float(result.current("vdd")[0])}


def _read_open_loop(decks: _Decks, _: Sequence[float]) -> dict[str, object]:
    result = decks.run("open_loop")
    assert isinstance(result, AcResult)
    names = ("dc_gain_db", "gbw", "phase_margin")
    measured = measure_sampled(result.frequency, result.voltage("vdiff"))
    return dict(zip(names, measured, strict=True))


def _read_common_mode(decks: _Decks, _: Sequence[float]) -> dict[str, object]:
    result = decks.run("common_mode")
    assert isinstance(result, AcResult)
    gain = -result.voltage("cm_drive") / result.voltage("cm_gate")
    return {"common_mode": measure_sampled(result.frequency, gain)}


def _read_noise(decks: _Decks, frequency: Sequence[float]) -> dict[str, object]:
    result = decks.run("noise")
    assert isinstance(result, NoiseResult)
    x, at = np.log(result.frequency), np.log(np.asarray(frequency, dtype=np.float64))

    def read(power: Array) -> Array:
        return np.asarray(np.exp(np.interp(at, x, np.log(np.maximum(power, 1e-300)))))

    core = build_core(decks.plan)
    owners = {unit.name: one.name for one in core.transistors for unit in one.units}
    total = read(result.output)
    shares: dict[str, Array] = {}
    for device, power in result.by_device.items():
        part = device.lower().removeprefix(_INSTANCE).split(".")[0]
        name = owners.get(part[1:], part)
        shares[name] = shares.get(name, np.zeros(at.size)) + read(power) / total
    return {
        "noise_frequency": np.exp(at),
        "input_noise": np.sqrt(read(result.input)),
        "noise_shares": shares,
    }


def _read_transfer(decks: _Decks, _: Sequence[float]) -> dict[str, object]:
    tiny = decks.run("open_loop", ".dc vid 0 2e-06 1e-06").voltage("vdiff")
    end = 2.5 * decks.voltage / (abs(float(tiny[2] - tiny[0])) / 2e-6)
    result = decks.run("open_loop", f".dc vid 0 {end:.10g} {end / 500:.10g}")
    assert isinstance(result, DcResult)
    output = result.voltage("vdiff")
    middle, gain = 0.5 * (output[1:] + output[:-1]), np.diff(output) / np.diff(result.swept)
    k = int(np.argmax(gain < gain[0] * np.sqrt(0.5)))
    if k == 0:
        raise NoSolution("the gain does not fall by 3 dB within the sweep of the input.")
    swing = np.interp(gain[0] * np.sqrt(0.5), gain[[k, k - 1]], middle[[k, k - 1]])
    return {"output_swing": float(swing)}


def _read_step(decks: _Decks, _: Sequence[float]) -> dict[str, object]:
    result = decks.run("step")
    assert isinstance(result, TransientResult)
    time, output = result.time, result.voltage("vdiff")
    corners, _levels = step_wave(decks.gbw, decks.swing)
    small = (time >= corners[2]) & (time <= corners[3])
    y, final = output[small], output[small][-1]
    outside = np.abs(y / final - 1.0) > 0.01
    k = y.size - 1 - int(np.argmax(outside[::-1]))
    settled = time[small][k] - 0.5 * (corners[1] + corners[2])
    large = time >= corners[6]
    t, y = time[large], output[large]
    start = int(np.argmin(y))
    a, b = (start + int(np.argmax(y[start:] > share * decks.swing)) for share in (-WINDOW, WINDOW))
    return {"settling_time": float(settled), "slew_rate": float((y[b] - y[a]) / (t[b] - t[a]))}


def _read_startup(decks: _Decks, _: Sequence[float]) -> dict[str, object]:
    rest, ramp = decks.run("startup", ".op"), decks.run("startup")
    names = [name for name in rest.signals if name.startswith("v(")]
    errors = [abs(float(ramp.signals[name][-1] - rest.signals[name][0])) for name in names]
    return {"startup_error": max(errors)}


_READERS = {
    "bias": _read_bias,
    "open_loop": _read_open_loop,
    "common_mode": _read_common_mode,
    "noise": _read_noise,
    "transfer": _read_transfer,
    "step": _read_step,
    "startup": _read_startup,
}


def measure_sampled(frequency: Array, gain: NDArray[np.complex128]) -> tuple[float, float, float]:
    """Measure DC gain, unity-gain frequency and phase margin of a sampled response.

    Parameters
    ----------
    frequency : ndarray, shape (n,)
        Rising [Hz]; the first one is taken for DC.
    gain : ndarray of complex, shape (n,)
        The response.

    Returns
    -------
    tuple of float
        Gain [dB], frequency [Hz], margin [deg]; between samples by a cubic in log frequency.

    Raises
    ------
    NoSolution
        If the gain never falls through 1.

    Examples
    --------
    >>> f = np.logspace(0, 8, 401)
    >>> [round(value, 3) for value in measure_sampled(f, 1e3 / (1 + 1j * f / 1e3))]
    [60.0, 999999.5, 90.057]
    """
    size, phase = np.log(np.abs(gain)), np.unwrap(np.angle(gain))
    below = np.nonzero((size[1:] <= 0) & (size[:-1] > 0))[0]
    if not below.size:
        raise NoSolution("the gain does not fall through 1 within the sweep.")
    near = slice(max(int(below[0]) - 1, 0), int(below[0]) + 3)
    x = np.log(frequency[near])
    centre = x.mean()
    crossing = np.polyval(np.polyfit(size[near], x - centre, x.size - 1), 0.0)
    start = np.pi * np.round(phase[0] / np.pi)  # the phase at DC
    lag = np.polyval(np.polyfit(x - centre, phase[near], x.size - 1), crossing) - start
    margin = 180.0 + float(np.rad2deg(lag))
    return 20.0 * float(size[0]) / float(np.log(10.0)), float(np.exp(crossing + centre)), margin
