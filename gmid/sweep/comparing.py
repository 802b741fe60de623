"""The transconductance a text holds against the slope of the current it holds."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gmid.sweep.checks import conducting
from gmid.sweep.derive import SLOPES
from gmid.sweep.model import Array, Sweep


@dataclass(frozen=True, eq=False)
class SlopeComparison:
    """Transconductance along vgs, as held and as the current says.

    Parameters
    ----------
    vgs : ndarray, shape (n_vgs,)
        Gate-source voltages [V].
    length : ndarray, shape (n_length,)
        Channel lengths [m].
    vds, vsb : float
        Where the lines were taken [V].
    gm, slope : ndarray, shape (n_length, n_vgs)
        As held, and id d(ln id)/dvgs [S].
    ratio : ndarray, shape (n_length, n_vgs)
        The first over the second; not a number where the channel does not conduct, and at the
        ends of vgs, where one-sided slopes are poor.
    low, high : ndarray, shape (n_vgs,)
        Least and largest ratio over every length, vds and vsb.
    derived : bool
        Whether gm was itself derived from the current, so that nothing is compared.

    Examples
    --------
    >>> from gmid.device.example import example_sweep
    >>> compare_gm(example_sweep()).derived
    False
    """

    vgs: Array
    length: Array
    vds: float
    vsb: float
    gm: Array
    slope: Array
    ratio: Array
    low: Array
    high: Array
    derived: bool


def compare_gm(sweep: Sweep) -> SlopeComparison:
    """Compare gm with the slope of id in the middle of the vds axis, at the least vsb.

    Parameters
    ----------
    sweep : Sweep
        With `id` and `gm`, and four values of vgs at least.

    Returns
    -------
    SlopeComparison
        For a figure.

    Raises
    ------
    UnknownName
        If it has no gm.

    Examples
    --------
    >>> from gmid.device.example import example_sweep
    >>> found = compare_gm(example_sweep())
    >>> bool(np.nanmax(np.abs(found.ratio - 1)) < 0.02)
    True
    """
    held, slope = sweep["gm"], SLOPES["gm"](sweep)
    usable = conducting(sweep) & (slope > 0)
    usable[..., [0, -1]] = False
    ratio = _divide(held, slope, usable)
    every = ratio.reshape(-1, sweep.vgs.size)
    some = np.isfinite(every).any(axis=0)
    low, high = (np.full(sweep.vgs.size, np.nan) for _ in range(2))
    low[some], high[some] = np.nanmin(every[:, some], axis=0), np.nanmax(every[:, some], axis=0)
    middle = int(np.abs(sweep.vds - 0.5 * sweep.vds[-1]).argmin())
    line = np.s_[:, 0, middle, :]
    return SlopeComparison(
        sweep.vgs,
        sweep.length,
        float(sweep.vds[middle]),
        float(sweep.vsb[0]),
        held[line],
        slope[line],
        ratio[line],
        low,
        high,
        "gm" in sweep.derived,
    )


def _divide(upper: Array, lower: Array, usable: NDArray[np.bool_]) -> Array:
    out = np.full(upper.shape, np.nan)
    np.divide(upper, lower, out=out, where=usable)
    return out
