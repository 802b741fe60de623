"""Characterise the transistors of `larch180` and write their sweeps as text.

    python demo/characterise.py [--out DIR] [--device nmos ...] [--jobs 2]

Each bias point is simulated once in the reference simulator (``pip install "gmid[simulate]"``):
its current at the operating point, small-signal values from the admittance matrix with gate,
drain and body driven in turn, and its drain-current noise at two frequencies.
"""

from __future__ import annotations

import argparse
import math
import sys
from concurrent.futures import ProcessPoolExecutor
from pathlib import Path

import numpy as np
from numpy.typing import ArrayLike, NDArray

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

from gmid.errors import GmidError, NoSolution, UsageFault
from gmid.simulation import AcResult, NoiseResult, Simulation, run_deck
from larch180 import layouts

Columns = dict[str, NDArray[np.float64]]

CAPACITANCES = ("cgg", "cgd", "cgs", "cdg", "cdd", "cds", "csg", "csd", "css")
QUANTITIES = ("id", "gm", "gds", "gmb", *CAPACITANCES, "noise_thermal", "noise_flicker")
DRIVEN = "gdb"  # terminals with a source; the transistor's source is ground
AC_FREQUENCY = 1.0e6
NOISE_FREQUENCIES = (1.0, 1.0e10)
BATCH = 200

HOME = Path(__file__).resolve().parent / "larch180"
DEVICES = {
    "nmos": ("larch_n", "n", "csv"),
    "pmos": ("larch_p", "p", "columns"),
    "nmos_low": ("larch_n_low", "n", "spice-raw"),
}
WRITERS = {
    "csv": layouts.write_csv,
    "columns": layouts.write_columns,
    "spice-raw": layouts.write_raw,
}
CONDITIONS = [
    ("tt", 27), ("ss", -40), ("ss", 125), ("ff", -40), ("ff", 125), ("sf", 27), ("fs", 27),
]  # fmt: skip
GRID = {
    "length": [0.18e-6, 0.2e-6, 0.25e-6, 0.35e-6, 0.55e-6, 1.05e-6, 2.0e-6],
    "vsb": [0.0, 0.3, 0.75, 1.4],
    "vds": [0.0, 0.04, 0.08, 0.13, 0.2, 0.28, 0.38, 0.5, 0.65, 0.82, 1.0, 1.25, 1.5, 1.75, 2.0],
    "vgs": [
        -0.2, -0.1, *(round(0.05 * step, 2) for step in range(17)),
        0.9, 1.0, 1.1, 1.25, 1.4, 1.6, 1.8, 2.0,
    ],
}  # fmt: skip


def characterise(
    models: str,
    model: str,
    *,
    polarity: str,
    length: ArrayLike,
    vgs: ArrayLike,
    vds: ArrayLike,
    vsb: ArrayLike,
    temperature: float = 27.0,
    width: float = 2.0e-6,
    batch: int = BATCH,
    gmin: float = 1.0e-15,
) -> Columns:
    """Simulate one transistor at any list of bias points.

    Parameters
    ----------
    models : str
        Text of the model cards.
    model : str
        Name of the model.
    polarity : {"n", "p"}, keyword-only
        Channel; p-channel voltages are given, and results returned, as magnitudes.
    length, vgs, vds, vsb : array_like
        Channel length [m] and voltages [V], broadcast against each other.
    temperature : float
        Temperature [degC].
    width : float
        Width of the device [m].
    batch : int
        Devices in one netlist.
    gmin : float
        Conductance the simulator adds across junctions [S].

    Returns
    -------
    dict of str to ndarray, shape (points...)
        The `QUANTITIES`: current [A], conductances [S], capacitances [F] (diagonal dQi/dVi,
        off-diagonal -dQi/dVj), drain-current noise [A^2/Hz], the flicker part at 1 Hz.

    Raises
    ------
    GmidError
        The simulation fails, or a value is not finite.
    """
    if polarity not in ("n", "p"):
        raise UsageFault(f"polarity is 'n' or 'p', not {polarity!r}.")
    axes = np.broadcast_arrays(*(np.asarray(a, dtype=float) for a in (length, vgs, vds, vsb)))
    flat = np.stack([axis.ravel() for axis in axes])
    if flat.shape[1] == 0:
        raise UsageFault("there are no bias points to characterise.")
    head = f"\n.include models\n.options temp={temperature:.10g} gmin={gmin:.3g}\n"
    sign = 1.0 if polarity == "n" else -1.0
    rows = [
        _simulate_batch(models, head, model, flat[:, start : start + batch], width, sign)
        for start in range(0, flat.shape[1], batch)
    ]
    table = {name: np.concatenate([row[name] for row in rows]) for name in QUANTITIES}
    for name, values in table.items():
        if not np.isfinite(values).all():
            raise NoSolution(f"{name} of {model} is not finite at some bias points.")
    return {name: values.reshape(axes[0].shape) for name, values in table.items()}


def _simulate_batch(
    models: str, head: str, model: str, points: NDArray[np.float64], width: float, sign: float
) -> Columns:
    """Run the four decks of one batch; `points` holds the rows length, vgs, vds, vsb."""
    files = {"models": models}
    count = points.shape[1]

    def run(driven: str, tail: str) -> Simulation:
        lines = _write_devices(model, points, width, sign, driven)
        deck = f"devices, {driven or 'noise'}{head}{lines}\n{tail}\n.end\n"
        return run_deck(deck, files=files)

    admittance = np.empty((3, 3, count), dtype=complex)
    for column, driven in enumerate(DRIVEN):
        answer = run(driven, f".ac lin 1 {AC_FREQUENCY:.17g} {AC_FREQUENCY:.17g}")
        assert isinstance(answer, AcResult)
        for row, terminal in enumerate(DRIVEN):
            admittance[row, column] = [-answer.current(f"v{terminal}{i}")[0] for i in range(count)]
    bias = run("", ".op")
    current = np.array([-sign * bias.current(f"vd{i}")[0] for i in range(count)])
    low, high = NOISE_FREQUENCIES
    noise = run("", f"{_write_collector(count)}\n.noise v(out) vref lin 2 {low:.17g} {high:.17g}")
    assert isinstance(noise, NoiseResult)
    density = np.array([noise.by_device[f"m{i}"] for i in range(count)]).T
    return {"id": current, **_read_admittance(admittance), **_split_noise(density)}


def _write_devices(
    model: str, points: NDArray[np.float64], width: float, sign: float, driven: str
) -> str:
    lines = []
    for i, (length, vgs, vds, vsb) in enumerate(points.T):
        lines.append(f"m{i} d{i} g{i} 0 b{i} {model} w={width:.12g} l={length:.12g} m=1")
        for terminal, level in zip(DRIVEN, (vgs, vds, -vsb), strict=True):
            drive = " ac 1" if terminal == driven else ""
            lines.append(f"v{terminal}{i} {terminal}{i} 0 dc {sign * level:.12g}{drive}")
    return "\n".join(lines)


def _write_collector(count: int) -> str:
    """Bring every drain current into one resistor of 1 ohm, whose voltage is the output."""
    lines = ["vref ref 0 dc 0 ac 1", "rref ref 0 1", "rout out 0 1"]
    return "\n".join(lines + [f"f{i} 0 out vd{i} 1" for i in range(count)])


def _read_admittance(reduced: NDArray[np.complex128]) -> Columns:
    """Complete the 3 x 3 matrix (gate, drain, body) by the source and take its parts."""
    full = np.zeros((4, 4, reduced.shape[2]), dtype=complex)
    full[:3, :3] = reduced
    full[3, :3] = -reduced.sum(axis=0)
    full[:, 3] = -full[:, :3].sum(axis=1)
    place = {"g": 0, "d": 1, "b": 2, "s": 3}
    values = {
        name: full[1, place[terminal]].real
        for name, terminal in (("gm", "g"), ("gds", "d"), ("gmb", "b"))
    }
    for name in CAPACITANCES:
        charge = full[place[name[1]], place[name[2]]].imag / (2 * math.pi * AC_FREQUENCY)
        values[name] = charge if name[1] == name[2] else -charge
    return values


def _split_noise(density: NDArray[np.float64]) -> Columns:
    """Split densities [A^2/Hz] at two frequencies into a white and a 1/f part."""
    low, high = NOISE_FREQUENCIES
    flicker = (density[0] - density[1]) / (1 / low - 1 / high)
    return {"noise_thermal": density[1] - flicker / high, "noise_flicker": flicker}


def sweep_device(device: str, corner: str, temperature: int) -> tuple[Columns, Columns]:
    """Characterise a device of `larch180` on the grid.

    Parameters
    ----------
    device : str
        A key of `DEVICES`.
    corner : str
        Process corner.
    temperature : int
        Temperature [degC].

    Returns
    -------
    axes, values : dict of str to ndarray, shape (length, vsb, vds, vgs)
        In SI, as magnitudes.
    """
    model, polarity, _ = DEVICES[device]
    models = (HOME / "models" / f"{corner}.inc").read_text(encoding="utf-8")
    mesh = np.meshgrid(*(np.asarray(GRID[name]) for name in layouts.AXES), indexing="ij")
    axes = dict(zip(layouts.AXES, mesh, strict=True))
    values = characterise(models, model, polarity=polarity, temperature=temperature, **axes)
    return axes, values


def write_sweep(job: tuple[str, str, int, Path]) -> tuple[str, int]:
    """Characterise one device in one condition and write its files.

    Parameters
    ----------
    job : (str, str, int, Path)
        Device, corner, temperature [degC] and folder.

    Returns
    -------
    (str, int)
        Stem of the files and their size in bytes.
    """
    device, corner, temperature, folder = job
    name = f"{device}_{corner}_{temperature}"
    writer = WRITERS[DEVICES[device][2]]
    return name, layouts.save(folder, writer(name, *sweep_device(device, corner, temperature)))


def main() -> int:
    """Write the sweeps and their recipe.

    Returns
    -------
    int
        Exit code.
    """
    parser = argparse.ArgumentParser(description="Write the sweeps of larch180 as text.")
    parser.add_argument("--out", type=Path, default=HOME, help="folder for recipe and sweeps/")
    parser.add_argument("--device", nargs="+", choices=list(DEVICES), default=list(DEVICES))
    parser.add_argument("--jobs", type=int, default=2, help="processes at work")
    options = parser.parse_args()
    folder = options.out / "sweeps"
    jobs = [(device, *condition, folder) for device in options.device for condition in CONDITIONS]
    total = 0
    try:
        with ProcessPoolExecutor(options.jobs) as pool:
            for name, size in pool.map(write_sweep, jobs):
                total += size
                sys.stdout.write(f"{name:20s} {size / 1e3:8.0f} kB\n")
                sys.stdout.flush()
    except GmidError as error:
        sys.stderr.write(f"{error}\n")
        return 1
    devices = {device: DEVICES[device] for device in options.device}
    recipe = layouts.write_recipe(devices, CONDITIONS, QUANTITIES)
    (options.out / "larch180.toml").write_text(recipe, encoding="utf-8")
    sys.stdout.write(f"{len(jobs)} sweeps, {total / 1e6:.2f} MB\n")
    return 0


if __name__ == "__main__":
    sys.exit(main())
