"""Small-signal values of transistors at their bias."""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np

from gmid.device.spline import Array, Indices


@dataclass(frozen=True, eq=False)
class SmallSignal:
    """Small-signal values of unit transistors at their bias.

    Parameters
    ----------
    gm, gds, gmb : ndarray, shape (...)
        Derivatives of the current into the drain by vgs, vds and -vsb [S].
    capacitance : ndarray, shape (..., 4, 4)
        dQi/dVj [F] with its true signs, in the order gate, drain, source, bulk.
    noise_thermal, noise_flicker : ndarray, shape (...)
        Densities of the drain current's noise [A^2/Hz], the flicker part at 1 Hz; zero where
        the table has none.

    Examples
    --------
    >>> zero = np.zeros(2)
    >>> SmallSignal(zero, zero, zero, np.zeros((2, 4, 4)), zero, zero).gm.shape
    (2,)
    """

    gm: Array
    gds: Array
    gmb: Array
    capacitance: Array
    noise_thermal: Array
    noise_flicker: Array

    def take(self, rows: Indices, share: Array) -> SmallSignal:
        """Take units, each with a share of its values.

        Parameters
        ----------
        rows : ndarray of int, shape (k,)
            Places on the first axis.
        share : ndarray, shape (k,)
            Factor of each [-].

        Returns
        -------
        SmallSignal
            Of those units.

        Examples
        --------
        >>> one = np.ones((1, 2))
        >>> small = SmallSignal(one, one, one, np.zeros((1, 2, 4, 4)), one, one)
        >>> small.take(np.array([0, 0]), np.array([0.5, 0.5])).gm.tolist()
        [[0.5, 0.5], [0.5, 0.5]]
        """
        return SmallSignal(
            *(
                getattr(self, field.name)[rows]
                * np.reshape(share, (-1, *(1,) * (getattr(self, field.name).ndim - 1)))
                for field in fields(self)
            )
        )
