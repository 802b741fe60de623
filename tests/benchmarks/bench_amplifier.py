"""A thousand amplifiers in three conditions, against the reference simulator one by one.

Run by hand: ``python tests/benchmarks/bench_amplifier.py [candidates]``. Ours: bias, small
signal, common-mode loop, noise of every candidate. The simulator: operating point, open-loop
AC, common-mode AC and noise of a few of them, the time of one times all. Decks are written
beforehand; times are the processor's, those of making the splines told apart.
"""

from __future__ import annotations

import sys
import time
from pathlib import Path

import numpy as np

ROOT = Path(__file__).resolve().parents[2]
sys.path.insert(0, str(ROOT))

from gmid.amplifier import AmplifierPlan, Supply, Variant, predict, write_netlists  # noqa: E402
from gmid.amplifier.drafting import Draft, draft_plan  # noqa: E402
from gmid.condition import Condition  # noqa: E402
from gmid.device import Device  # noqa: E402
from gmid.simulation import run_deck  # noqa: E402
from gmid.table.table import open_grid_data  # noqa: E402

CONDITIONS = ("tt/27", "ss/-40", "ff/125")
PLACES = ("pair", "load", "direct", "copy", "turn", "opposite", "control", "tail")
LENGTHS = (0.4e-6, 0.6e-6, 0.8e-6, 1.0e-6, 1.4e-6, 2.0e-6)
SIMULATED = 10


def vary(plan: AmplifierPlan, candidates: int) -> AmplifierPlan:
    """Move counts and lengths at random, always the same way."""
    random = np.random.default_rng(1)
    for place in PLACES:
        count = int(plan.count(place))
        plan = plan.with_place(
            place, count=random.integers(max(1, count - 1), count + 2, candidates)
        )
    mirror = random.choice(LENGTHS, candidates)
    for place in ("load", "direct", "copy"):
        plan = plan.with_place(place, length=mirror)
    return plan.with_place("pair", length=random.choice(LENGTHS, candidates))


def analyse(plan: AmplifierPlan, devices: dict[str, Device], supply: Supply) -> None:
    """Read all that is reported of the small signal."""
    found = predict(plan, devices, supply, voltage=supply.voltage)
    _ = found.signal, found.common_mode, found.noise([1e6]).input_density


def simulate(plan: AmplifierPlan, devices: dict[str, Device], supply: Supply, models: str) -> float:
    """Give the simulator's time for one candidate [s]."""
    files = {**write_netlists([plan], supply, devices), "models.inc": models}
    begin = time.process_time()
    for kind in ("open_loop", "common_mode", "noise"):
        run_deck(files[f"bench_{kind}.cir"], files=files)
    return time.process_time() - begin


def main(candidates: int = 1000) -> None:
    """Print the figures."""
    supply = Supply(1.8, 2e-6)
    table = open_grid_data(ROOT / "tables" / "larch180.h5")
    names = {"n": "nmos", "p": "pmos"}
    begin = time.process_time()
    process = {
        text: {name: Device(table.sweep(name, Condition.parse(text))) for name in names.values()}
        for text in CONDITIONS
    }
    plan = draft_plan(Draft(names, Variant(), 8e-6, 1e-12), process["tt/27"], supply)
    many = vary(plan, candidates)
    for devices in process.values():
        analyse(many, devices, supply)
    first = time.process_time() - begin
    begin = time.process_time()
    for devices in process.values():
        analyse(many, devices, supply)
    ours = time.process_time() - begin
    theirs = 0.0
    for text, devices in process.items():
        condition = Condition.parse(text)
        path = ROOT / "demo" / "larch180" / "models" / f"{condition.corner}.inc"
        models = f"{path.read_text()}\n.options temp={condition.temperature:g}\n"
        times = [simulate(plan, devices, supply, models) for _ in range(SIMULATED)]
        theirs += float(np.median(times)) * candidates
    print(f"{candidates} candidates x {len(process)} conditions")
    print(f"first time, with the splines: {first:6.2f} s")
    print(f"again:                        {ours:6.2f} s")
    print(f"reference simulator:          {theirs:6.1f} s, {theirs / ours:.0f} times as long")


if __name__ == "__main__":
    main(*(int(word) for word in sys.argv[1:2]))
