"""Three ways in which simulators write sweeps, and the recipe that reads them back.

Each writer takes a table of `larch180` on its grid, arrays of shape (length, vsb, vds, vgs),
and gives the text of its files by name.
"""

from __future__ import annotations

import gzip
from collections.abc import Iterable, Mapping
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

Columns = Mapping[str, NDArray[np.float64]]
AXES = ("length", "vsb", "vds", "vgs")
SCALES = {"id": ("uA", 1e6), "gm": ("uS", 1e6), "gds": ("uS", 1e6), "gmb": ("uS", 1e6)}
NOISE = ("noise_thermal", "noise_flicker")
FINE = ("id", "gm", "gds", "gmb")
"""Quantities written with six significant digits; capacitances and noise have five."""


def write_csv(name: str, axes: Columns, values: Columns) -> dict[str, str]:
    """Write one comma-separated file with units in its headers.

    Parameters
    ----------
    name : str
        Stem of the file.
    axes, values : mapping of str to ndarray, shape (length, vsb, vds, vgs)
        Axes [m, V] and quantities in SI.

    Returns
    -------
    dict of str to str
        Text by file name.
    """
    heads = ["L (um)", "vsb (V)", "vds (V)", "vgs (V)"]
    columns = [axes["length"].ravel() * 1e6, *(axes[axis].ravel() for axis in AXES[1:])]
    for key, column in values.items():
        unit, scale = SCALES.get(key, ("A^2/Hz", 1.0) if key in NOISE else ("fF", 1e15))
        heads.append(f"{key} ({unit})")
        columns.append(column.ravel() * scale)
    formats = ["{:.6g}"] * 4 + ["{:.6g}" if key in FINE else "{:.5g}" for key in values]
    table = np.stack(columns, axis=1)
    rows = [",".join(_digits(row, formats)) for row in table]
    return {f"{name}.csv": "\n".join([",".join(heads), *rows, ""])}


def write_columns(name: str, axes: Columns, values: Columns) -> dict[str, str]:
    """Write a p-channel device as blank-separated columns, one file for each length.

    The signs are those of the simulator: the source is ground, gate and drain are negative, the
    body is positive, and the current into the drain is negative.

    Parameters
    ----------
    name : str
        Stem of the files.
    axes, values : mapping of str to ndarray, shape (length, vsb, vds, vgs)
        Axes [m, V] and quantities in SI, as magnitudes.

    Returns
    -------
    dict of str to str
        Text by file name; the length stands in the name.
    """
    heads = ["v(b)", "v(d)", "v(g)", *values]
    formats = ["{:g}"] * 3 + _exponents(values)
    files = {}
    for i, length in enumerate(axes["length"][:, 0, 0, 0]):
        columns = [axes["vsb"][i], -axes["vds"][i], -axes["vgs"][i], -values["id"][i]]
        columns += [values[key][i] for key in list(values)[1:]]
        table = np.stack([column.ravel() + 0.0 for column in columns], axis=1)
        rows = [" ".join(_digits(row, formats)) for row in table]
        word = f"{length * 1e6:.2f}".replace(".", "p")
        files[f"{name}_l{word}u.txt"] = "\n".join([" ".join(heads), *rows, ""])
    return files


def write_raw(name: str, axes: Columns, values: Columns) -> dict[str, str]:
    """Write one SPICE3 ASCII raw file that holds a plot for each length.

    Parameters
    ----------
    name : str
        Stem of the file.
    axes, values : mapping of str to ndarray, shape (length, vsb, vds, vgs)
        Axes [m, V] and quantities in SI.

    Returns
    -------
    dict of str to str
        Text by file name; the length stands in the title of each plot.
    """
    plots = []
    for i, length in enumerate(axes["length"][:, 0, 0, 0]):
        columns = [axes["vgs"][i], axes["vds"][i], -axes["vsb"][i], -values["id"][i]]
        columns += [values[key][i] for key in list(values)[1:]]
        table = np.stack([column.ravel() + 0.0 for column in columns], axis=1)
        plots.append(_write_plot(f"larch_n_low l={length * 1e6:g}u", list(values)[1:], table))
    return {f"{name}.raw": "".join(plots)}


def _write_plot(title: str, keys: list[str], table: NDArray[np.float64]) -> str:
    names = [("v(v-sweep)", "voltage"), ("v(d)", "voltage"), ("v(b)", "voltage")]
    names += [("i(vd)", "current"), *((f"@m1[{key}]", _raw_type(key)) for key in keys)]
    head = [
        f"Title: {title}",
        "Plotname: DC transfer characteristic",
        "Flags: real",
        f"No. Variables: {len(names)}",
        f"No. Points: {len(table)}",
        "Variables:",
        *(f"\t{i}\t{name}\t{kind}" for i, (name, kind) in enumerate(names)),
        "Values:",
    ]
    formats = ["{:.5e}"] * 3 + _exponents(["id", *keys])
    points = [f" {i}\t" + "\n\t".join(_digits(row, formats)) + "\n" for i, row in enumerate(table)]
    return "\n".join([*head, *points, ""])


def _raw_type(key: str) -> str:
    if key in NOISE:
        return "notype"
    return "capacitance" if key.startswith("c") else "admittance"


def _exponents(keys: Iterable[str]) -> list[str]:
    return ["{:.5e}" if key in FINE else "{:.4e}" for key in keys]


def _digits(row: NDArray[np.float64], formats: list[str]) -> list[str]:
    return [form.format(value) for form, value in zip(formats, row, strict=True)]


def save(folder: Path, files: Mapping[str, str]) -> int:
    """Compress files so that the same text gives the same bytes.

    Parameters
    ----------
    folder : Path
        Where they go; made if absent.
    files : mapping of str to str
        Text by name; ``.gz`` is added.

    Returns
    -------
    int
        Bytes written.
    """
    folder.mkdir(parents=True, exist_ok=True)
    size = 0
    for name, text in files.items():
        packed = gzip.compress(text.encode("ascii"), 9, mtime=0)
        (folder / f"{name}.gz").write_bytes(packed)
        size += len(packed)
    return size


RECIPE_HEAD = """\
# How to read the sweeps of larch180, an invented 1.8 V, 180 nm class process.
# Written by demo/characterise.py together with the sweeps.
format = 1

[table]
process = "larch180"
"""

RECIPE_SWEEP = """
[[sweep]]
files = "{folder}/{device}_{corner}_{temperature}{pattern}.gz"
layout = "{layout}"
device = "{device}"
polarity = "{polarity}"
width = "2 um"
fingers = 1
corner = "{corner}"
temperature = "{temperature} C"
{nominal}netlist = "M{{name}} {{d}} {{g}} {{s}} {{b}} {model} w={{width}} l={{length}} m={{count}}"
"""

MAPS = {
    "csv": """
[sweep.axes]
length = "L"
""",
    "columns": """
[sweep.axes]                      # native signs: the import turns them
length = { from = "name", pattern = '_l([\\dp]+)u', unit = "um" }
vsb = "-v(b)"
vds = "v(d)"
vgs = "v(g)"
""",
    "spice-raw": """
[sweep.axes]
length = { from = "title", pattern = 'l=([\\d.]+)u', unit = "um" }
vsb = "-v(b)"
vds = "v(d)"
vgs = "v(v-sweep)"

[sweep.quantities]
id = "-i(vd)"
""",
}


def write_recipe(
    devices: Mapping[str, tuple[str, str, str]],
    conditions: list[tuple[str, int]],
    quantities: tuple[str, ...],
    *,
    folder: str = "sweeps",
) -> str:
    """Give the recipe that reads every sweep.

    Parameters
    ----------
    devices : mapping of str to (str, str, str)
        Model, polarity and layout by device.
    conditions : list of (str, int)
        Corner and temperature [degC]; the first one is nominal.
    quantities : tuple of str
        The names every table has.
    folder : str, keyword-only
        Where the sweeps are, seen from the recipe.

    Returns
    -------
    str
        TOML.
    """
    patterns = {"csv": ".csv", "columns": "_l*.txt", "spice-raw": ".raw"}
    text = [RECIPE_HEAD]
    for device, (model, polarity, layout) in devices.items():
        for corner, temperature in conditions:
            nominal = "nominal = true\n" if (corner, temperature) == conditions[0] else ""
            text.append(
                RECIPE_SWEEP.format(
                    folder=folder, device=device, corner=corner, temperature=temperature,
                    pattern=patterns[layout], layout=layout, polarity=polarity, model=model,
                    nominal=nominal,
                )
                + MAPS[layout]
            )  # fmt: skip
            if layout == "spice-raw":
                text.append("".join(f'{key} = "@m1[{key}]"\n' for key in quantities[1:]))
    return "".join(text)
