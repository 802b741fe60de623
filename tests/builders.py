"""Synthetic transistors with known formulas, written as text, for the tests.

The formulas are those of the literature: the EKV interpolation of the drain current (Enz,
Krummenacher, Vittoz 1995) and the square law.  Nothing here uses the package.
"""

from __future__ import annotations

import gzip
from dataclasses import dataclass
from pathlib import Path

import numpy as np

UT = 1.380649e-23 * 300.15 / 1.602176634e-19
"""kT/q at 27 C."""


@dataclass(frozen=True)
class Grid:
    """Axes of a synthetic sweep."""

    length: tuple[float, ...] = (0.18e-6, 0.36e-6, 0.72e-6)
    vsb: tuple[float, ...] = (0.0, 0.5, 1.0)
    vds: tuple[float, ...] = (0.0, 0.05, 0.1, 0.2, 0.4, 0.8, 1.2, 1.8)
    vgs: tuple[float, ...] = tuple(round(-0.2 + 0.05 * i, 3) for i in range(41))

    def mesh(self) -> list[np.ndarray]:
        """Every bias point, vgs fastest."""
        axes = (self.length, self.vsb, self.vds, self.vgs)
        return [axis.ravel() for axis in np.meshgrid(*axes, indexing="ij")]


def ekv(length, vsb, vds, vgs, *, n=1.3, vt0=0.42, width=2e-6, spec=0.6e-6, lam=0.04e-6):
    """EKV drain current and its derivatives (id, gm, gds, gmb), bulk-referenced, symmetric.

    id = 2 n beta UT^2 [F(xf) - F(xr)], F(v) = ln^2(1 + exp(v/2)), with channel-length
    modulation as a factor 1 + lam vds / length.
    """
    vp = (vgs + vsb - vt0) / n
    current = spec * width / length

    def f(v):
        return np.logaddexp(0, v / 2) ** 2

    def df(v):
        return np.logaddexp(0, v / 2) / (1 + np.exp(-v / 2))

    xf, xr = (vp - vsb) / UT, (vp - vsb - vds) / UT
    base = f(xf) - f(xr)
    clm = 1 + lam * vds / length
    id_ = current * base * clm
    gm = current * (df(xf) - df(xr)) / (n * UT) * clm
    gds = current * (df(xr) / UT * clm + base * lam / length)
    dvsb = current * clm * (df(xf) - df(xr)) * (1 / n - 1) / UT
    return id_, gm, gds, -dvsb


def square_law(length, vsb, vds, vgs, *, k=200e-6, vt0=0.4, width=2e-6):
    """Square-law current and conductances in saturation and triode, zero below threshold."""
    vov = np.maximum(vgs - vt0, 0.0)
    beta = k * width / length
    sat = vds >= vov
    id_ = np.where(sat, 0.5 * beta * vov**2, beta * (vov - vds / 2) * vds)
    gm = np.where(sat, beta * vov, beta * vds)
    gds = np.where(sat, 0.0, beta * (vov - vds))
    return id_, gm, gds, 0.2 * gm


def rows(grid: Grid, model=ekv) -> dict[str, np.ndarray]:
    """Columns of a whole sweep in SI."""
    length, vsb, vds, vgs = grid.mesh()
    id_, gm, gds, gmb = model(length, vsb, vds, vgs)
    return {"length": length, "vsb": vsb, "vds": vds, "vgs": vgs,
            "id": id_, "gm": gm, "gds": gds, "gmb": gmb}  # fmt: skip


def write_csv(path: Path, columns: dict[str, np.ndarray], *, digits: int = 17) -> Path:
    """CSV with standard names, SI."""
    lines = [",".join(columns)]
    lines += [",".join(f"{v:.{digits}g}" for v in row)
              for row in zip(*columns.values(), strict=True)]  # fmt: skip
    return write(path, "\n".join(lines) + "\n")


def write(path: Path, text: str) -> Path:
    """Text, compressed where the name says so."""
    if path.suffix == ".gz":
        path.write_bytes(gzip.compress(text.encode()))
    else:
        path.write_text(text, encoding="utf-8")
    return path


RECIPE = """\
format = 1
[table]
process = "{process}"

[[sweep]]
files = "{files}"
device = "{device}"
polarity = "{polarity}"
width = "2 um"
corner = "tt"
temperature = "27 C"
{more}
"""


def write_recipe(folder: Path, files: str, more: str = "", *, device="nmos", polarity="n",
                 process="ash90", name="recipe.toml") -> Path:  # fmt: skip
    """A recipe of one sweep."""
    text = RECIPE.format(files=files, more=more, device=device, polarity=polarity, process=process)
    return write(folder / name, text)
