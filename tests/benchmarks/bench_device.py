"""Speed of device queries against scipy on the same table, in one run.

    python tests/benchmarks/bench_device.py

Prints ratios: forward and one point against a linear regular-grid interpolator, the inverse
against a bracketing root finder on the same spline; and times: what a device costs when it is
first asked, and the model that a circuit's solver uses.
"""

from __future__ import annotations

import time
from collections.abc import Callable
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


def linear(device: Device) -> tuple[RegularGridInterpolator, tuple[str, ...]]:
    """A linear interpolator of all stored quantities at once."""
    sweep = device.sweep
    names = tuple(sweep.values)
    data = np.stack([sweep[name] for name in names], axis=-1)
    return RegularGridInterpolator([getattr(sweep, name) for name in AXES], data), names


def forward(device: Device) -> float:
    """All stored quantities at many points: time of the linear interpolator over ours."""
    bias = draw(device, POINTS)
    rough, names = linear(device)
    where = np.stack([bias[name] for name in AXES], axis=-1)
    device.at(**bias).read(names)
    ours = best(lambda: device.at(**bias).read(names))
    theirs = best(lambda: rough(where))
    print(f"forward, {len(names)} quantities, {POINTS} points: {ours * 1e3:.0f} ms, "
          f"linear {theirs * 1e3:.0f} ms: {theirs / ours:.2f} times as fast")  # fmt: skip
    return theirs / ours


def one_point(device: Device) -> float:
    """All stored quantities at one point, warm."""
    rough, names = linear(device)
    bias = {"length": 0.5e-6, "vsb": 0.1, "vds": 0.6, "vgs": 0.55}
    where = np.array([[bias[name] for name in AXES]])
    device.at(**bias).read(names)
    ours = best(lambda: [device.at(**bias).read(names) for _ in range(200)]) / 200
    theirs = best(lambda: [rough(where) for _ in range(200)]) / 200
    print(f"one point: {ours * 1e6:.0f} us, linear {theirs * 1e6:.0f} us: "
          f"{theirs / ours:.2f} times as fast")  # fmt: skip
    return theirs / ours


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

    ours = best(lambda: device.at(gm_over_id=target, **bias), 2)
    found = device.at(gm_over_id=target, **bias)
    residual = np.max(np.abs(found.gm_over_id / target - 1))
    start = (np.full(POINTS, 0.2), np.full(POINTS, float(device.sweep.vgs[-1])))
    order = (target, bias["length"], bias["vsb"], bias["vds"])
    theirs = best(lambda: elementwise.find_root(gap, start, args=order), 1)
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
    forward(device)
    one_point(device)
    inverse(device)
    solver(device)


if __name__ == "__main__":
    main()
