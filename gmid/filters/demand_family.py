"""The amplifiers of a filter as a family of two coordinates.

u multiplies all 1/gm_total (in gm-c: 1/excess pole), v is 1/intrinsic gain of all.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike

from gmid.filters.closed_forms import find_pole_ratio
from gmid.filters.demand_loads import Load
from gmid.filters.demand_ports import Reciprocals
from gmid.network.pencil import FloatArray

APART = 1.5
"""How much better than asked one amplifier alone may be [-]."""


@dataclass(frozen=True, eq=False)
class Family:
    """All amplifiers of a filter as functions of the two coordinates (u, v).

    Parameters
    ----------
    gm : ndarray of float, shape (K,)
        1/gm_total at u = 1 [ohm].
    lag : ndarray of float, shape (K,)
        1/excess-phase pole at u = 1 [s/rad].
    is_fixed : bool
        Whether gm_total is that of the element, whatever u (gm-c).

    Examples
    --------
    >>> one = Family(np.array([1e3]), np.array([1e-9]), False)
    >>> one.at(np.array([0.5]), np.array([0.01])).gm.tolist()
    [[500.0]]
    """

    gm: FloatArray
    lag: FloatArray
    is_fixed: bool

    def at(self, u: ArrayLike, v: ArrayLike) -> Reciprocals:
        """Return the amplifiers at points.

        Parameters
        ----------
        u, v : array_like of float, shape (...)
            Coordinates.

        Returns
        -------
        Reciprocals
            Of shape (..., K).
        """
        u, v = (np.asarray(x, dtype=np.float64)[..., None] for x in np.broadcast_arrays(u, v))
        one = np.ones(self.gm.shape[-1])
        gm = self.gm * (np.ones_like(u) if self.is_fixed else u)
        return Reciprocals(gm, v * one, u * self.lag, 0.0 * u * one)

    def alone(self, u: FloatArray) -> Reciprocals:
        """Return sets in which only one amplifier is real, without loss.

        Parameters
        ----------
        u : ndarray of float, shape (K,)
            Coordinate of the one that is real.

        Returns
        -------
        Reciprocals
            Of shape (K, K).
        """
        one = np.eye(self.gm.size)
        gm = self.gm * (np.ones_like(one) if self.is_fixed else one * u)
        return Reciprocals(gm, 0.0 * one, one * u * self.lag, 0.0 * one)

    def weighted(self, weights: FloatArray) -> Family:
        """Return the family with every amplifier's part of u multiplied.

        Parameters
        ----------
        weights : ndarray of float, shape (K,)
            Factors [-].

        Returns
        -------
        Family
            The new one.
        """
        gm = self.gm if self.is_fixed else self.gm * weights
        return replace(self, gm=gm, lag=self.lag * weights)

    def list_corners(self, u: ArrayLike, v: ArrayLike) -> dict[str, Reciprocals]:
        """Return the sets of amplifiers at which the tolerance must be kept, by name.

        Parameters
        ----------
        u, v : array_like of float, shape (...)
            The points.

        Returns
        -------
        dict of str to Reciprocals
            As asked, with infinite gain, with infinite bandwidth, without excess phase, and
            with each amplifier in turn `APART` times better; each of shape (..., K).
        """
        u, v = (np.asarray(x, dtype=np.float64) for x in (u, v))
        asked = self.at(u, v)
        corners = {
            "as asked": asked, "infinite gain": self.at(u, 0.0 * v),
            "infinite bandwidth": self.at(0.0 * u, v),
            "no excess phase": replace(asked, pole=0.0 * asked.pole),
        }  # fmt: skip
        count = self.lag.shape[-1]
        for k in range(count):
            better = np.where(np.arange(count) == k, 1.0 / APART, 1.0)
            parts = {name: value * better for name, value in vars(asked).items()}
            if self.is_fixed:
                parts["gm"] = asked.gm
            corners[f"amplifier {k + 1} {APART} times better"] = Reciprocals(**parts)
        return corners


def make_family(
    realisation_gm: Sequence[float] | None, loads: Sequence[Load], phase_margin: float
) -> Family:
    """Set up amplifiers whose excess-phase pole follows the wanted phase margin of their loops.

    Parameters
    ----------
    realisation_gm : sequence of float, optional
        Transconductances of a gm-c filter [S]; without it the amplifiers are those of an
        active-RC filter.
    loads : sequence of Load
        What each sees.
    phase_margin : float
        Of each amplifier's own loop [deg].

    Returns
    -------
    Family
        At u = 1 each amplifier has 1 S, or a pole at 1 rad/s.

    Examples
    --------
    >>> load = Load(position="A1", feedback_capacitance=4e-12, load_capacitance=1e-12)
    >>> make_family(None, [load], 60.0).lag.round(15).tolist()
    [6.67e-13]
    """
    if realisation_gm is not None:
        gm = np.asarray(realisation_gm, dtype=np.float64)
        return Family(1.0 / gm, np.ones(gm.size), True)
    ratio = float(find_pole_ratio(phase_margin))
    lag = np.array([load.pole_capacitance / (load.beta * ratio) for load in loads])
    return Family(np.ones(lag.size), lag, False)


def stack_sets(sets: Iterable[Reciprocals]) -> Reciprocals:
    """Put sets of amplifiers on a new leading axis.

    Parameters
    ----------
    sets : iterable of Reciprocals
        Of shapes that broadcast.

    Returns
    -------
    Reciprocals
        Of shape (n, ..., K).

    Examples
    --------
    >>> one = Family(np.ones(2), np.ones(2), False)
    >>> stack_sets([one.at(1.0, 0.0), one.at(2.0, 0.0)]).gm.shape
    (2, 2)
    """
    listed = list(sets)
    keys = ("gm", "gain", "pole", "load")
    columns = ([getattr(one, key) for one in listed] for key in keys)
    return Reciprocals(*(np.stack(np.broadcast_arrays(*column)) for column in columns))
