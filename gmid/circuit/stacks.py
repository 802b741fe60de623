"""A stack of units in series, seen from its four ends as one transistor."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


def conductance_matrix(gm: Array, gds: Array, gmb: Array) -> Array:
    """Write the conductances of a transistor as a matrix.

    Parameters
    ----------
    gm, gds, gmb : ndarray, shape (...)
        [S].

    Returns
    -------
    ndarray, shape (..., 4, 4)
        Derivatives of the currents into gate, drain, source and bulk by their voltages [S].

    Examples
    --------
    >>> conductance_matrix(*np.array([4.0, 1.0, 2.0]))[1].tolist()
    [4.0, 1.0, -7.0, 2.0]
    """
    found = np.zeros((*np.shape(gm), 4, 4))
    found[..., 1, 0], found[..., 1, 1], found[..., 1, 3] = gm, gds, gmb
    found[..., 1, 2] = -(gm + gds + gmb)
    found[..., 2, :] = -found[..., 1, :]
    return found


def combine_stack(gm: Sequence[Array], gds: Sequence[Array], gmb: Sequence[Array]) -> Array:
    """Combine the units of a stack into one transistor by eliminating the nodes between them.

    Parameters
    ----------
    gm, gds, gmb : sequence of ndarray, shape (...)
        Of each unit, the one at the drain first [S].

    Returns
    -------
    ndarray, shape (3, ...)
        gm, gds and gmb of the whole [S].

    Notes
    -----
    With the conductance that a unit shows at its source, ``gs = gm + gds + gmb``, two units give
    ``gds = gds1 gds2/(gs1 + gds2)`` and so on, from the source upwards.

    Examples
    --------
    >>> unit = np.array(1e-3), np.array(1e-5), np.array(0.0)
    >>> gm, gds, gmb = combine_stack(*zip(unit, unit, strict=True))
    >>> float(gds.round(12))
    9.8039e-08
    """
    upper = zip(reversed(gm[:-1]), reversed(gds[:-1]), reversed(gmb[:-1]), strict=True)
    total = np.stack([gm[-1], gds[-1], gmb[-1]])
    for unit_gm, unit_gds, unit_gmb in upper:
        # the inner node moves by (low - high)/(what loads it) for each voltage at the ends
        source = unit_gm + unit_gds + unit_gmb
        load = source + total[1]
        total = np.stack(
            [
                unit_gm - source * (unit_gm - total[0]) / load,
                unit_gds - source * unit_gds / load,
                unit_gmb - source * (unit_gmb - total[2]) / load,
            ]
        )
    return total
