"""The coordinates along which tables are splined, chosen so that transistors look straight."""

from __future__ import annotations

import numpy as np

from gmid.device.spline import Array

_PHI = 0.8
"""Surface potential in the coordinate sqrt(phi + vsb) of the body bias [V]."""

KNEE = 0.1
"""Voltage below which the coordinate ln(knee + vds) of the drain stops stretching [V]."""


def length_coordinate(length: Array) -> Array:
    """Map channel lengths [m] to the coordinate along which tables are splined: ln L.

    Parameters
    ----------
    length : ndarray
        Channel length [m].

    Returns
    -------
    ndarray
        Coordinate [-].

    Examples
    --------
    >>> float(length_coordinate(np.array(1.0)))
    0.0
    """
    return np.asarray(np.log(length))


def roll_off_coordinate(length: Array) -> Array:
    """Map channel lengths [m] to the coordinate along which the threshold is splined.

    Parameters
    ----------
    length : ndarray
        Channel length [m].

    Returns
    -------
    ndarray
        -L**(-1/2), in which the threshold's roll-off is close to straight.

    Examples
    --------
    >>> float(roll_off_coordinate(np.array(4.0)))
    -0.5
    """
    return np.asarray(-1.0 / np.sqrt(length))


def bulk_coordinate(vsb: Array, lowest: float) -> Array:
    """Map body biases [V] to sqrt(phi + vsb), in which the threshold is close to straight.

    Parameters
    ----------
    vsb : ndarray
        Source-bulk voltage [V], not below `lowest`.
    lowest : float
        Smallest body bias of the table [V]; phi grows where it is far below zero.

    Returns
    -------
    ndarray
        Coordinate [V**0.5].

    Examples
    --------
    >>> float(bulk_coordinate(np.array(0.2), 0.0))
    1.0
    """
    return np.asarray(np.sqrt(bulk_offset(lowest) + vsb))


def bulk_offset(lowest: float) -> float:
    """Give the phi of `bulk_coordinate` for the smallest body bias of a table [V].

    Parameters
    ----------
    lowest : float
        Smallest body bias [V].

    Returns
    -------
    float
        0.8 V, or more where the axis reaches below -0.4 V.

    Examples
    --------
    >>> bulk_offset(0.0)
    0.8
    """
    return max(_PHI, 0.4 - lowest)


def drain_coordinate(vds: Array) -> Array:
    """Map drain-source voltages [V] to ln(0.1 V + vds), which stretches triode.

    Parameters
    ----------
    vds : ndarray
        Drain-source voltage [V], not negative.

    Returns
    -------
    ndarray
        Coordinate [-].

    Examples
    --------
    >>> float(drain_coordinate(np.array(0.9)))
    0.0
    """
    return np.asarray(np.log(KNEE + vds))


def invert_drain(coordinate: Array) -> Array:
    """Undo `drain_coordinate`.

    Parameters
    ----------
    coordinate : ndarray
        Coordinate [-].

    Returns
    -------
    ndarray
        Drain-source voltage [V], not negative.

    Examples
    --------
    >>> float(invert_drain(np.array(0.0)))
    0.9
    """
    return np.maximum(np.exp(coordinate) - KNEE, 0.0)


def drain_stretch(vds: Array) -> Array:
    """Give the slope of `drain_coordinate`.

    Parameters
    ----------
    vds : ndarray
        Drain-source voltage [V], not negative.

    Returns
    -------
    ndarray
        Derivative of the coordinate by vds [1/V].

    Examples
    --------
    >>> float(drain_stretch(np.array(0.4)))
    2.0
    """
    return np.asarray(1.0 / (KNEE + vds))


def refine_drain(vds: Array) -> Array:
    """Put a point between any two of the drain axis, in the middle of their coordinates.

    Parameters
    ----------
    vds : ndarray, shape (n,)
        The drain axis [V].

    Returns
    -------
    ndarray, shape (2 n - 1,)
        The finer axis [V].

    Examples
    --------
    >>> refine_drain(np.array([0.0, 0.3])).round(9)
    array([0. , 0.1, 0.3])
    """
    fine = np.empty(2 * vds.size - 1)
    fine[::2] = vds
    fine[1::2] = np.sqrt((KNEE + vds[:-1]) * (KNEE + vds[1:])) - KNEE
    return fine
