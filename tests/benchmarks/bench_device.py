"""Speed of device queries against scipy on the same table, in one run.

    python tests/benchmarks/bench_device.py

Prints ratios: forward and one point against a linear regular-grid interpolator of the same
quantities, the inverse against a bracketing root finder on the same spline; and times: what a
device costs when it is first asked, what an amplifier costs in all conditions, and the model
that a circuit's solver uses.  Processor time, the least of several runs.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any

import numpy as np
from scipy.interpolate import RegularGridInterpolator
from scipy.optimize import elementwise

from gmid.device import Device, open_table
from gmid.nomenclature import AXES

TABLE = Path(__file__).resolve().parents[2] / "tables" / "larch180.h5"
POINTS = 100_000


def best(job: Callable[[], Any], repeats: int = 3) -> float:
    """Least processor time of several runs [s]: other work on the machine counts little."""
    times = []
    for _ in range(repeats):
        begin = time.process_time()
        job()
        times.append(time.process_time() - begin)
    return min(times)


def draw(device: Device, count: int) -> dict[str, np.ndarray]:
    """Random bias points inside the table, lengths included."""
    random = np.random.default_rng(1)
    sweep = device.sweep
    bias = {name: random.uniform(getattr(sweep, name)[0], getattr(sweep, name)[-1], count)
            for name in AXES}  # fmt: skip
    return bias | {"vds": np.maximum(bias["vds"], 0.05)}


def linear(device: Device, names: Sequence[str]) -> RegularGridInterpolator:
    """A linear interpolator of some stored quantities at once."""
    sweep = device.sweep
    data = np.stack([sweep[name] for name in names], axis=-1)
    return RegularGridInterpolator([getattr(sweep, name) for name in AXES], data)


def forward(device: Device) -> float:
    """All stored quantities at many points: time of the linear interpolator over ours."""
    bias = draw(device, POINTS)
    names = tuple(device.sweep.values)
    rough = linear(device, names)
    where = np.stack([bias[name] for name in AXES], axis=-1)
    device.at(**bias).read(names)
    ours = best(lambda: device.at(**bias).read(names))
    theirs = best(lambda: rough(where))
    print(f"forward, {len(names)} quantities, {POINTS} points: {ours * 1e3:.0f} ms, "
          f"linear {theirs * 1e3:.0f} ms: {theirs / ours:.2f} times as fast")  # fmt: skip
    return theirs / ours


def one_point(device: Device) -> dict[str, float]:
    """Single points at one length, warm, never the same point again."""
    count = 300
    bias = draw(device, count)
    points = [{name: float(bias[name][k]) for name in AXES} for k in range(count)]
    points = [point | {"length": 0.5e-6} for point in points]
    where = [np.array([[point[name] for name in AXES]]) for point in points]
    stored = tuple(device.sweep.values)

    def one_by_one(point: dict[str, float]) -> None:
        found = device.at(**point)
        _ = found.id, found.gm

    cases: dict[str, tuple[Sequence[str], Callable[[dict[str, float]], Any]]] = {
        "id and gm together": (("id", "gm"), lambda point: device.at(**point).read(("id", "gm"))),
        "id, then gm": (("id", "gm"), one_by_one),
        f"all {len(stored)} stored": (stored, lambda point: device.at(**point).read(stored)),
        f"all {len(device.fields)} fields": (stored, lambda point: device.at(**point).to_dict()),
    }
    ratios = {}
    for what, (names, ask) in cases.items():
        rough = linear(device, names)
        ours = best(lambda ask=ask: [ask(point) for point in points], 9) / count
        theirs = best(lambda rough=rough: [rough(place) for place in where], 9) / count
        ratios[what] = theirs / ours
        print(f"one point, {what}: {ours * 1e6:.1f} us, linear {theirs * 1e6:.0f} us: "
              f"{theirs / ours:.1f} times as fast")  # fmt: skip
    return ratios


def inverse(device: Device) -> float:
    """Gate voltage of a gm/Id at many points, against a root finder on the same spline."""
    bias = draw(device, POINTS)
    del bias["vgs"]
    target = np.random.default_rng(2).uniform(5.0, 20.0, POINTS)
    device.at(gm_over_id=10.0, length=0.5e-6, vds=0.6)

    def gap(vgs: np.ndarray, target: np.ndarray, *where: np.ndarray) -> np.ndarray:
        length, vsb, vds = where
        point = device.at(length=length, vsb=vsb, vds=vds, vgs=vgs)
        return np.asarray(point.gm_over_id) - target

    ours = best(lambda: device.at(gm_over_id=target, **bias), 4)
    found = device.at(gm_over_id=target, **bias)
    residual = np.max(np.abs(found.gm_over_id / target - 1))
    start = (np.full(POINTS, 0.2), np.full(POINTS, float(device.sweep.vgs[-1])))
    order = (target, bias["length"], bias["vsb"], bias["vds"])
    theirs = best(lambda: elementwise.find_root(gap, start, args=order), 2)
    print(f"inverse, {POINTS} points: {ours * 1e3:.0f} ms, root finder {theirs * 1e3:.0f} ms: "
          f"{theirs / ours:.1f} times as fast; residual {residual:.1e}")  # fmt: skip
    return theirs / ours


def first_asked() -> None:
    """A device just opened: its first query, and models of three lengths."""
    jobs: dict[str, Callable[[Device], Any]] = {
        "inverse at one length": lambda d: d.at(gm_over_id=[5, 10, 20], length=0.5e-6, vds=0.6),
        "all quantities at one length": lambda d: d.at(vgs=[0.5, 0.6], length=0.5e-6, vds=0.6).read(
            d.fields
        ),
        "current at three lengths": lambda d: d.model(
            [0.3e-6, 0.5e-6, 1e-6]
        ).current_and_derivatives(0.6, 0.9, 0.0),
        "small signal at three lengths": lambda d: d.model([0.3e-6, 0.5e-6, 1e-6]).small_signal(
            0.6, 0.9, 0.0
        ),
        "all quantities at many lengths": lambda d: d.at(
            vgs=0.6, length=np.linspace(0.2e-6, 2e-6, 100), vds=0.6
        ).read(d.fields),
    }
    for what, job in jobs.items():
        took = best(lambda job=job: job(open_table(TABLE).device("nmos")), 5)
        print(f"first asked, {what}: {took * 1e3:.1f} ms")


def amplifier() -> None:
    """What a prediction needs of two devices in every condition of a table just opened."""
    lengths = {"nmos": np.array([0.4e-6, 0.6e-6, 1e-6]), "pmos": np.array([0.5e-6, 0.8e-6])}

    def job() -> None:
        table = open_table(TABLE)
        for condition in table.conditions():
            for name, used in lengths.items():
                device = table.device(
                    name, corner=condition.corner, temperature=condition.temperature
                )
                model = device.model(used)
                model.current_and_derivatives(0.6, 0.9, 0.0)
                model.small_signal(0.6, 0.9, 0.0)
                _ = device.at(vgs=0.6, vds=0.9, length=used[0]).vdsat

    took = best(job, 6)
    print(f"first asked, two devices in every condition: {took * 1e3:.0f} ms")


def solver(device: Device) -> None:
    """The model of a circuit's solver: 25 transistors, 1000 candidates."""
    model = device.model([0.3e-6, 0.5e-6, 1e-6])
    random = np.random.default_rng(3)
    shape = (1000, 25)
    bias = (random.uniform(0.4, 0.7, shape), random.uniform(0.1, 1.5, shape),
            random.uniform(0.0, 0.8, shape), random.integers(0, 3, shape))  # fmt: skip
    for job in (model.current_and_derivatives, model.small_signal):
        job(*bias)
        took = best(lambda job=job: job(*bias), 5)
        print(f"{job.__name__}: {took / 1000 * 1e6:.1f} us for 25 transistors")


def main() -> None:
    """Run everything on the demo table."""
    device = open_table(TABLE).device("nmos")
    first_asked()
    amplifier()
    forward(device)
    one_point(device)
    inverse(device)
    solver(device)


if __name__ == "__main__":
    main()
