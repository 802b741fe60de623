"""The exported netlist taken apart: its device lines, its nodes, single devices on their own.

All of it reads the text that goes to the simulator and what the simulator answers; nothing is
taken from the prediction.
"""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier import AmplifierPlan, Supply, write_netlists
from gmid.condition import Condition
from gmid.simulation import DcResult, Simulation, run_deck
from reference.amplifier_cases import Case, find_devices, find_models

Array = NDArray[np.float64]

_STEPS = 200
_LEAK = 1e-15  # what the simulator adds beside a device that is off [S]
_RESISTIVE = 0.15
"""What is left of gds at vds = 0 at the edge of saturation, where no vdsat is in the table."""


@dataclass(frozen=True)
class Unit:
    """One device line."""

    name: str
    drain: str
    gate: str
    source: str
    bulk: str
    model: str
    sizes: Mapping[str, float]

    @property
    def sign(self) -> float:
        """-1 for a p-channel model."""
        return -1.0 if self.model.split("_")[1].startswith("p") else 1.0

    @property
    def text(self) -> str:
        """The line."""
        sizes = " ".join(f"{key}={value:.12g}" for key, value in self.sizes.items())
        ends = (self.name, self.drain, self.gate, self.source, self.bulk, self.model)
        return f"{' '.join(ends)} {sizes}"

    def voltages(self, nodes: Mapping[str, float]) -> tuple[float, float, float]:
        """Give vgs, vds and vsb as magnitudes."""
        at = {node: nodes[node] for node in (self.drain, self.gate, self.source, self.bulk)}
        source = at[self.source]
        return (self.sign * (at[self.gate] - source), self.sign * (at[self.drain] - source),
                self.sign * (source - at[self.bulk]))  # fmt: skip


@dataclass(frozen=True, eq=False)
class Flat:
    """The open-loop bench of an exported amplifier without its subcircuit."""

    units: tuple[Unit, ...]
    rest: tuple[str, ...]
    bench: str
    models: str

    def run(
        self, analysis: str, changes: Mapping[str, str] | None = None,
        units: Sequence[Unit] | None = None, more: Sequence[str] = (),
    ) -> Simulation:  # fmt: skip
        """Run it with another analysis, other lines of the bench and other devices."""
        body = [one.text for one in (self.units if units is None else units)]
        deck = self.bench
        for start, line in {".ac": analysis, **(changes or {})}.items():
            deck, count = re.subn(rf"^{re.escape(start)}.*$", line, deck, flags=re.MULTILINE)
            assert count == 1, start
        inside = "\n".join([*body, *self.rest, "vvss vss 0 dc 0", *more])
        deck, count = re.subn(r"^xa1 .*$", inside, deck, flags=re.MULTILINE)
        assert count == 1
        return run_deck(deck, files={"models.inc": self.models})

    def nodes(self, **options: object) -> dict[str, float]:
        """Give the node voltages of the bias point."""
        return read_nodes(self.run(".op", **options), 0)  # type: ignore[arg-type]


def read_nodes(result: Simulation, index: int) -> dict[str, float]:
    """Read the nodes of one point."""
    found = {
        name[2:-1]: float(values[index])
        for name, values in result.signals.items()
        if name.startswith("v(")
    }
    return {**found, "0": 0.0}


def parse_units(text: str) -> tuple[list[Unit], list[str]]:
    """Take a subcircuit apart: device lines, and all else that is inside."""
    whole = text.replace("\n+", " ")
    head, *lines, end = [line for line in whole.splitlines() if line and line[0] != "*"]
    assert head.startswith(".subckt")
    assert end.startswith(".ends")
    units, rest = [], []
    for line in lines:
        words = line.split()
        if line[0] not in "Mm":
            rest.append(line)
            continue
        sizes = {key: float(value) for key, value in (word.split("=") for word in words[6:])}
        assert set(sizes) == {"w", "l", "m"}, line
        units.append(Unit(*[word.lower() for word in words[:6]], sizes=sizes))  # type: ignore[arg-type]
    return units, rest


def flatten(case: Case, plan: AmplifierPlan, supply: Supply) -> Flat:
    """Export a plan and take it apart, in the condition and at the supply of a case."""
    files = write_netlists([plan], supply, find_devices(case.process, case.condition))
    units, rest = parse_units(files["amplifier.cir"])
    bench = files["bench_open_loop.cir"].replace(".include amplifier.cir\n", "")
    bench, count = re.subn(
        r"^\.param vsupply=.*$", f".param vsupply={case.level:.12g}", bench, flags=re.MULTILINE
    )
    assert count == 1
    return Flat(tuple(units), tuple(rest), bench,
                find_models(case.process, Condition.parse(case.condition)))  # fmt: skip


def by_instance(units: Sequence[Unit]) -> dict[str, list[Unit]]:
    """Gather the device lines of each instance, those of a stack from the drain on."""
    found: dict[str, list[Unit]] = {}
    for one in units:
        found.setdefault(re.sub(r"_\d+$", "", one.name[1:]), []).append(one)
    return found


def place_of(name: str, known: Sequence[str]) -> str:
    """Give the place that an instance belongs to: the longest whose name its own begins with."""
    return max((one for one in known if name.startswith(one)), key=len)


@dataclass(frozen=True, eq=False)
class Alone:
    """Devices on their own, each held at the voltages that it has in the amplifier."""

    units: tuple[Unit, ...]
    bias: Array
    models: str

    def _sweep(self, drain: Array, gate: Array, steps: str) -> tuple[Array, Array]:
        """Sweep x: each drain is at drain[0] + x drain[1], each gate alike; give x and currents."""
        lines = ["devices alone", ".include models.inc", f".options gmin={_LEAK:g}", "vx x 0 0"]
        for i, (unit, (_, _, vsb)) in enumerate(zip(self.units, self.bias, strict=True)):
            held = replace(
                unit, name=f"m{i}", drain=f"d{i}", gate=f"g{i}", source="0", bulk=f"b{i}"
            )
            lines += [held.text, f"vb{i} b{i} 0 dc {-unit.sign * vsb:.12g}"]
            for end, (level, slope) in (("d", drain[i]), ("g", gate[i])):
                lines += [f"e{end}{i} x{end}{i} 0 x 0 {unit.sign * slope:.12g}",
                          f"v{end}{i} {end}{i} x{end}{i} dc {unit.sign * level:.12g}"]  # fmt: skip
        result = run_deck("\n".join([*lines, f".dc vx {steps}", ".end", ""]),
                          files={"models.inc": self.models})  # fmt: skip
        assert isinstance(result, DcResult)
        currents = [-one.sign * result.current(f"vd{i}") for i, one in enumerate(self.units)]
        return result.swept, np.array(currents)

    def find_edges(self) -> Array:
        """Find the vds at which gds has fallen to 15 % of that at vds = 0 [V]."""
        from scipy.interpolate import CubicSpline

        vgs, vds, _ = self.bias.T
        top = np.maximum(vds, 0.4) + 0.2
        flat = np.zeros_like(top)
        x, currents = self._sweep(np.stack([flat, top], 1), np.stack([vgs, flat], 1),
                                  f"-0.01 1 {1 / _STEPS}")  # fmt: skip
        edges = []
        for current, scale in zip(currents, top, strict=True):
            slope = CubicSpline(x, current).derivative()
            fine = np.linspace(0.0, 1.0, 10 * _STEPS + 1)
            left = slope(fine) - _RESISTIVE * slope(0.0)
            k = int(np.argmax(left < 0))
            assert k > 0
            share = left[k - 1] / (left[k - 1] - left[k])
            edges.append(scale * (fine[k - 1] + share * (fine[k] - fine[k - 1])))
        return np.array(edges)

    def measure_conductances(self, step: float = 1e-3) -> tuple[Array, Array, Array]:
        """Measure gm and gds by small changes of gate and drain [S], and the currents [A]."""
        vgs, vds, _ = self.bias.T
        one, none = np.full_like(vgs, step), np.zeros_like(vgs)
        rises = []
        for gate, drain in ((one, none), (none, one)):
            _, currents = self._sweep(np.stack([vds, drain], 1), np.stack([vgs, gate], 1), "-1 1 1")
            rises.append((currents[:, 2] - currents[:, 0]) / (2 * step))
        return rises[0], rises[1], currents[:, 1]

    def measure_gain(self) -> Array:
        """Measure gm/gds [-]."""
        gm, gds, _ = self.measure_conductances()
        return gm / gds


def stand_alone(flat: Flat, nodes: Mapping[str, float], *, upper: bool = False) -> Alone:
    """Take every device out of an amplifier, of stacks perhaps only the one at the drain."""
    units = flat.units
    if upper:
        units = tuple(stack[0] for stack in by_instance(units).values())
    return Alone(units, np.array([unit.voltages(nodes) for unit in units]), flat.models)


def measure_headroom(flat: Flat, nodes: Mapping[str, float]) -> dict[str, float]:
    """Measure vds beyond the edge of saturation of every instance [V]; of a stack, its upper's."""
    alone = stand_alone(flat, nodes, upper=True)
    return dict(zip(by_instance(flat.units), alone.bias[:, 1] - alone.find_edges(), strict=True))
