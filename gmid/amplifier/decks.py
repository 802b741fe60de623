"""Netlists of an amplifier: the subcircuit that goes to the layout, and its benches.

A subcircuit holds transistors, resistors and capacitors only. Every bench is one deck with one
analysis; the user's `models.inc` brings the model cards and the temperature.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gmid.amplifier.plan import AmplifierPlan, Level, Supply
from gmid.amplifier.topology import NO_RESISTOR, PORTS, PROBE, build_core
from gmid.circuit.netlist import write_elements, write_subcircuit
from gmid.device.device import Device
from gmid.errors import DataFault
from gmid.sweep.model import UnitTransistor

FEEDBACK_SHARE = 0.5
"""Feedback capacitor of the step bench as a share of the load capacitance."""

RAMP = 10e-6
"""Rise of the supply in the start-up bench [s]."""

HOLD = 1e9
"""Brings the inputs of the step bench to their level [ohm]."""

SMALL_STEP = 0.01
"""Differential step that settles without slewing [V]."""

USUAL_STEP = 0.6
"""Peak of the large step where no swing is asked for [V]."""

_STEP_LENGTH = 100.0  # time for a step to settle, in units of 1/(2 pi gbw)
_STEP_POINTS = 1000


@dataclass(frozen=True)
class Bench:
    """What surrounds the amplifier in all of its decks.

    Parameters
    ----------
    plan : AmplifierPlan
        One amplifier; its numbers are scalars.
    supply : Supply
        What it is fed with.
    units : mapping of str to UnitTransistor
        Unit by device, with its netlist line.
    swing : float
        Differential step of the step bench [V].
    gbw : float
        Expected unity-gain frequency [Hz]; sets how far the sweeps go.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> bench = Bench(example_plan(), example_supply(), find_units(example_devices()))
    >>> bench.write("noise").splitlines()[-2]
    '.noise v(vdiff) vid dec 20 1 1e+08'
    """

    plan: AmplifierPlan
    supply: Supply
    units: Mapping[str, UnitTransistor]
    swing: float = USUAL_STEP
    gbw: float = 1e8

    def write(self, kind: str) -> str:
        """Write one deck.

        Parameters
        ----------
        kind : str
            One of `BENCHES`.

        Returns
        -------
        str
            Text of the deck.
        """
        body = BENCHES[kind](self)
        title = f"* {kind.replace('_', ' ')} bench of {self.plan.name}: {self.plan.variant}"
        head = [title, ".include models.inc", ".include amplifier.cir", *self._parameters()]
        return "\n".join([*head, *body, ".end", ""])

    def _parameters(self) -> list[str]:
        resistance = min(float(np.asarray(self.plan.load_resistance)), NO_RESISTOR)
        return [
            f".param vsupply={self.supply.voltage:.10g}",
            f".param cload={float(np.asarray(self.plan.load_capacitance)):.10g}",
            f".param rload={resistance:.10g}",
        ]

    @property
    def _reference(self) -> float:
        """Current of the reference source [A]."""
        return self.supply.reference_current * self.plan.multiple

    def _rails(self) -> list[str]:
        """Write the supply, the common-mode levels and the reference."""
        return [
            "vdd vdd 0 {vsupply}",
            *write_level("vcm", self.supply.common_mode),
            *write_level("vic", self.supply.input_level),
            f"iref {self._reference_ends()} {self._reference:.10g}",
        ]

    def _reference_ends(self) -> str:
        return "vdd iref" if self.plan.input_pair == "n" else "iref 0"

    def _inputs(self, *, ac: int = 1) -> list[str]:
        """Write the differential input and the two inputs it drives."""
        return [
            f"vid vid 0 dc 0{f' ac {ac}' if ac else ''}",
            "evip vip vic vid 0 0.5",
            "evin vin vic vid 0 -0.5",
        ]

    def _load(self, *, kept: float = 1.0) -> list[str]:
        """Write the load, and the differential output as a node."""
        value = "{cload}" if kept == 1.0 else f"{{cload*{kept:.10g}}}"
        return [
            f"clp vop 0 {value}",
            f"cln von 0 {value}",
            "rlp vop vcm {rload}",
            "rln von vcm {rload}",
            "evdiff vdiff 0 vop von 1",
        ]

    def _instance(self) -> str:
        """Write the line that calls the subcircuit."""
        return f"xa1 {' '.join(PORTS[:-1])} 0 {self.plan.name}"

    @property
    def _stop(self) -> float:
        return float(10.0 ** np.ceil(np.log10(100 * self.gbw)))


def write_level(name: str, level: Level) -> list[str]:
    """Write the source of a voltage that may follow the supply.

    Parameters
    ----------
    name : str
        Name of its node.
    level : Level
        The voltage.

    Returns
    -------
    list of str
        Lines of a deck.

    Examples
    --------
    >>> write_level("vcm", Level(0.5)), write_level("vcm", Level(0.0, 0.7))
    (['evcm vcm 0 vdd 0 0.5'], ['vcm vcm 0 0.7'])
    """
    if level.ratio == 0:
        return [f"v{name.removeprefix('v')} {name} 0 {level.offset:.10g}"]
    if level.offset == 0:
        return [f"e{name} {name} 0 vdd 0 {level.ratio:.10g}"]
    lift = f"v{name.removeprefix('v')}"
    return [
        f"e{name} {name}_0 0 vdd 0 {level.ratio:.10g}",
        f"{lift} {name} {name}_0 {level.offset:.10g}",
    ]


def _open_loop(bench: Bench) -> list[str]:
    lines = [*bench._rails(), *bench._inputs(), bench._instance(), *bench._load()]
    return [*lines, f".ac dec 50 1 {bench._stop:.10g}"]


def _noise(bench: Bench) -> list[str]:
    lines = [*bench._rails(), *bench._inputs(), bench._instance(), *bench._load()]
    return [*lines, ".noise v(vdiff) vid dec 20 1 1e+08"]


def _common_mode(bench: Bench) -> list[str]:
    core = build_core(bench.plan, vss="0", probe=True).without([PROBE])
    return [
        *bench._rails(),
        *bench._inputs(ac=0),
        *write_elements(core, bench.units),
        f"{PROBE} cm_drive cm_gate dc 0 ac 1",
        *bench._load(),
        "* loop gain: -v(cm_drive)/v(cm_gate)",
        f".ac dec 50 1 {bench._stop:.10g}",
    ]


def _step(bench: Bench) -> list[str]:
    feedback = FEEDBACK_SHARE * float(np.asarray(bench.plan.load_capacitance))
    lines = [*bench._rails(), bench._instance()]
    for side, far in ("pn", "np"):
        sign = "" if side == "p" else "-"
        lines += [
            f"estep{side} drive{side} vic step 0 {sign}0.5",
            f"cin{side} drive{side} vi{side} {feedback:.10g}",
            f"cfb{side} vo{far} vi{side} {feedback:.10g}",
            f"rhold{side} vi{side} vic {HOLD:.10g}",
        ]
    times, levels = step_wave(bench.gbw, bench.swing)
    points = " ".join(f"{t:.10g} {v:.6g}" for t, v in zip(times, levels, strict=True))
    return [
        *lines,
        "* a small step to settle, then from one end of the swing to the other",
        f"vstep step 0 dc 0 pwl({points})",
        "* the feedback capacitors load an output with half their value: cload is the sum",
        *bench._load(kept=1 - FEEDBACK_SHARE / 2),
        f".tran {times[2] - times[1]:.10g} {times[-1]:.10g}",
    ]


def find_step(plan: AmplifierPlan) -> float:
    """Give the peak of the large step of the step bench: the swing asked for.

    Parameters
    ----------
    plan : AmplifierPlan
        The amplifier.

    Returns
    -------
    float
        [V]; `USUAL_STEP` where the plan asks for no swing.

    Examples
    --------
    >>> from gmid.amplifier.example import example_plan
    >>> find_step(example_plan())
    0.6
    """
    return plan.demands["swing"].value if "swing" in plan.demands else USUAL_STEP


def find_edge(gbw: ArrayLike) -> NDArray[np.float64]:
    """Give how long an edge of the step bench takes.

    Parameters
    ----------
    gbw : array_like, shape (...)
        Expected unity-gain frequency [Hz].

    Returns
    -------
    ndarray, shape (...)
        [s].

    Examples
    --------
    >>> float(find_edge(1e7).round(12))
    1.592e-09
    """
    return np.asarray(_STEP_LENGTH / (2 * np.pi * _STEP_POINTS * np.asarray(gbw)))


def step_wave(gbw: float, swing: float) -> tuple[list[float], list[float]]:
    """Give the input of the step bench: up a little, down to one end, up to the other.

    Parameters
    ----------
    gbw : float
        Expected unity-gain frequency [Hz].
    swing : float
        Peak of the large steps [V].

    Returns
    -------
    times, levels : list of float
        Corners [s], [V]; edges lie between second and third, fourth and fifth, sixth and seventh.

    Examples
    --------
    >>> step_wave(1e7, 0.6)[1]
    [0.0, 0.0, 0.01, 0.01, -0.6, -0.6, 0.6, 0.6]
    """
    edge = float(find_edge(gbw))
    period = edge * _STEP_POINTS
    starts = [period * k + 0.1 * period for k in range(3)]
    times = [0.0]
    for start in starts:
        times += [start, start + edge]
    end = starts[-1] + period
    return [*map(float, times), float(end)], [
        0.0,
        0.0,
        *(SMALL_STEP,) * 2,
        *(-swing,) * 2,
        *(swing,) * 2,
    ]


def _startup(bench: Bench) -> list[str]:
    ramp = f"pwl(0 0 {RAMP:.6g} {{vsupply}})"
    current = f"pwl(0 0 {RAMP:.6g} {bench._reference:.10g})"
    return [
        f"vdd vdd 0 dc {{vsupply}} {ramp}",
        *write_level("vcm", bench.supply.common_mode),
        *write_level("vic", bench.supply.input_level),
        f"iref {bench._reference_ends()} dc {bench._reference:.10g} {current}",
        "* unity feedback",
        "evip vip vic von vop 0.5",
        "evin vin vic vop von 0.5",
        bench._instance(),
        *bench._load(),
        f".tran {RAMP / 200:.6g} {10 * RAMP:.6g}",
    ]


BENCHES: dict[str, Callable[[Bench], list[str]]] = {
    "open_loop": _open_loop,
    "common_mode": _common_mode,
    "noise": _noise,
    "step": _step,
    "startup": _startup,
}
"""Kinds of benches, and what writes the body of each."""


def find_units(devices: Mapping[str, Device]) -> dict[str, UnitTransistor]:
    """Collect the unit transistors of devices, which hold the netlist lines.

    Parameters
    ----------
    devices : mapping of str to Device
        Devices of a table.

    Returns
    -------
    dict of str to UnitTransistor
        By device.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices
    >>> find_units(example_devices())["nmos"].polarity
    'n'
    """
    return {name: device.unit for name, device in devices.items()}


def write_netlists(
    plans: Sequence[AmplifierPlan], supply: Supply, devices: Mapping[str, Device], *,
    gbw: Mapping[str, float] | None = None,
) -> dict[str, str]:  # fmt: skip
    """Write the subcircuits of amplifiers and all their benches.

    Parameters
    ----------
    plans : sequence of AmplifierPlan
        Distinct amplifiers; the first one's benches have the bare names.
    supply : Supply
        What they are fed with.
    devices : mapping of str to Device
        Where device lines and unit widths come from.
    gbw : mapping of str to float, optional
        Expected unity-gain frequency by plan [Hz]; 100 MHz otherwise.

    Returns
    -------
    dict of str to str
        Text by file name: ``amplifier.cir``, ``bench_open_loop.cir`` and so on.

    Raises
    ------
    DataFault
        If two amplifiers share a name, or a device has no netlist line.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> files = write_netlists([example_plan()], example_supply(), example_devices())
    >>> sorted(files)[:3]
    ['amplifier.cir', 'bench_common_mode.cir', 'bench_noise.cir']
    """
    names = [plan.name for plan in plans]
    for name in names:
        if names.count(name) > 1:
            raise DataFault(f"two amplifiers are named {name}.", hint="Give each its own name.")
    units = find_units(devices)
    texts = [write_subcircuit(build_core(plan), plan.name, PORTS, units) for plan in plans]
    found = {"amplifier.cir": "\n".join(texts)}
    for k, plan in enumerate(plans):
        bench = Bench(plan, supply, units, find_step(plan), (gbw or {}).get(plan.name, 1e8))
        tail = "" if k == 0 else f"_{plan.name}"
        found |= {f"bench_{kind}{tail}.cir": bench.write(kind) for kind in BENCHES}
    return found
