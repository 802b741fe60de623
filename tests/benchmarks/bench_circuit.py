"""Bias, linearisation, response and noise of a batch of circuits, against the simulator.

Run by hand: ``python tests/benchmarks/bench_circuit.py [candidates]``.  The circuit is a
differential current-mirror stage with a common-mode loop, of the demo process in three corners;
the reference simulator does ``.op``, ``.ac`` and ``.noise`` of the same netlist, one by one.
Times are those of the processor, the least of three rounds.
"""

from __future__ import annotations

import dataclasses
import sys
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np

from gmid.circuit import Bias, Circuit, solve_bias, write_deck, write_elements
from gmid.device import Device
from gmid.network import Transfer, compute_noise, measure_loop
from gmid.simulation import run_deck
from gmid.sweep.importing import import_recipe
from gmid.sweep.recipe_file import read_recipe

HOME = Path(__file__).resolve().parents[2] / "demo" / "larch180"
CORNERS = (("tt", 27), ("ss", -40), ("ff", 125))
MIRROR = {f"{node}p": f"{node}n" for node in ("vi", "x", "y", "vo")}
ROUNDS = 3


def build(count: object, length: object, *, supply: float = 1.8) -> Circuit:
    """Put the stage together; count and length may have leading axes."""
    c = Circuit()
    c.add_voltage_source("vdd", "vdd", "0", supply)
    c.add_voltage_source("vcm", "vcm", "0", supply / 2)
    c.add_voltage_source("vip", "vip", "vcm", 0.0)
    c.add_voltage_source("vin", "vin", "vcm", 0.0)
    c.add_current_source("iref", "vdd", "bn", 2e-6)

    def add(name: str, device: str, drain: str, gate: str, source: str, units: int) -> None:
        c.add_transistor(name, device, polarity=device[0], drain=drain, gate=gate, source=source,
                         bulk="0" if device == "nmos" else "vdd", length=length,
                         count=np.multiply(count, units),
                         stack=2 if gate == "bn" else 1)  # fmt: skip

    add("mb", "nmos", "bn", "bn", "0", 2)
    add("mtail", "nmos", "tail", "bn", "0", 8)
    for side, other in ("pn", "np"):
        add(f"mpair{side}", "nmos", f"x{side}", f"vi{side}", "tail", 4)
        add(f"mload{side}", "pmos", f"x{side}", f"x{side}", "vdd", 4)
        add(f"mdirect{side}", "pmos", f"vo{side}", f"x{side}", "vdd", 8)
        add(f"mcopy{side}", "pmos", f"y{other}", f"x{side}", "vdd", 4)
        add(f"mturn{side}", "nmos", f"y{side}", f"y{side}", "0", 2)
        add(f"mopposite{side}", "nmos", f"vo{side}", f"y{side}", "0", 3)
        add(f"mcontrol{side}", "nmos", f"vo{side}", "cm", "0", 2)
        c.add_resistor(f"rs{side}", f"vo{side}", "sense", 4e5)
        c.add_capacitor(f"cs{side}", f"vo{side}", "sense", 5e-14)
        c.add_capacitor(f"cl{side}", f"vo{side}", "0", 1e-12)
    add("merror", "nmos", "et", "bn", "0", 4)
    for k, gate, out in ((1, "vcm", "ct"), (2, "sense", "cm")):
        add(f"me{k}", "nmos", f"e{k}", gate, "et", 2)
        add(f"md{k}", "pmos", f"e{k}", f"e{k}", "vdd", 1)
        add(f"mm{k}", "pmos", out, f"e{k}", "vdd", 1)
        add(f"mt{k}", "nmos", out, "ct", "0", 1)
    return c


def open_devices() -> list[dict[str, Device]]:
    """Read the demo's sweeps of the three corners."""
    recipe = read_recipe(HOME / "larch180.toml")
    wanted = tuple(
        entry for entry in recipe.sweeps
        if any(f"{device}_{corner}_{heat}" in str(entry.files[0])
               for device in ("nmos", "pmos") for corner, heat in CORNERS)
    )  # fmt: skip
    sweeps = import_recipe(dataclasses.replace(recipe, sweeps=wanted))
    return [
        {sweep.device: Device(sweep) for sweep in sweeps
         if (sweep.condition.corner, sweep.condition.temperature) == corner}
        for corner in CORNERS
    ]  # fmt: skip


def least(work: Callable[[], object]) -> float:
    """Take the least processor time of some rounds [s]."""
    times = []
    for _ in range(ROUNDS):
        start = time.process_time()
        work()
        times.append(time.process_time() - start)
    return min(times)


def simulate(circuit: Circuit, devices: dict[str, Device], corner: tuple[str, int]) -> None:
    """Run operating point, response and noise in the reference simulator."""
    units = {name: device.unit for name, device in devices.items()}
    lines = write_elements(circuit, units)
    lines = [f"{line} ac 1" if line.startswith("vip ") else line for line in lines]
    for analysis in (".op", ".ac dec 10 1 1e9", ".noise v(seen) vip dec 1 1e3 1e6"):
        run_deck(
            write_deck("stage", analysis=analysis, includes=[f"{corner[0]}.inc"],
                       lines=[f".options temp={corner[1]}", *lines, "eseen seen 0 vop von 1"]),
            folder=HOME / "models",
        )  # fmt: skip


def main() -> None:
    """Print the figures."""
    n = int(sys.argv[1]) if len(sys.argv) > 1 else 1000
    rng = np.random.default_rng(1)
    circuit = build(rng.choice([1, 2, 3, 4], n), rng.choice([0.3e-6, 0.5e-6, 0.8e-6], n))
    corners = open_devices()
    solved = [solve_bias(circuit, devices, mirror=MIRROR).require() for devices in corners]
    nets = [bias.linearise(drives=["vip"]) for bias in solved]
    halves = [bias.linearise_half(drives=["vip"]) for bias in solved]
    out = ("vop", "von")

    def again() -> list[Bias]:
        return [
            solve_bias(circuit, devices, mirror=MIRROR, start=bias)
            for devices, bias in zip(corners, solved, strict=True)
        ]

    stages: dict[str, Callable[[], object]] = {
        "bias, both sides": lambda: [solve_bias(circuit, d) for d in corners],
        "bias, folded": lambda: [solve_bias(circuit, d, mirror=MIRROR) for d in corners],
        "one step": again,
        "one step, linearise": lambda: [
            bias.linearise(drives=["vip"]).assemble() for bias in again()
        ],
        "gain, gbw, phase margin": lambda: [
            measure_loop(Transfer(net, "vip", out)) for net in nets
        ],
        "noise at two frequencies": lambda: [compute_noise(net, out, [1e3, 1e6]) for net in nets],
        "gain, gbw, phase margin of half": lambda: [
            measure_loop(Transfer(net, "vip", "vop")) for net in halves
        ],
        "noise of half": lambda: [compute_noise(net, "vop", [1e3, 1e6]) for net in halves],
    }
    print(f"{len(circuit.nodes)} nodes, {len(circuit.transistors)} transistors, {n} candidates x "
          f"{len(corners)} corners; us for one candidate in one corner")  # fmt: skip
    times = {name: least(work) / n / len(corners) * 1e6 for name, work in stages.items()}
    for name, value in times.items():
        print(f"  {name:36s} {value:8.1f}")
    _, bias, step, linearise, gain, noise, half_gain, half_noise = times.values()
    item = circuit.item(0)
    theirs = least(lambda: [simulate(item, d, c) for d, c in zip(corners, CORNERS, strict=True)])
    theirs *= 1e6 / len(corners)
    print(f"  {'reference simulator':36s} {theirs:8.1f}")
    for name, last in (("whole", gain + noise), ("half", half_gain + half_noise)):
        total = bias + linearise - step + last
        print(
            f"  {f'all of it, {name} network':36s} {total:8.1f}   {theirs / total:.0f} times faster"
        )


if __name__ == "__main__":
    main()
