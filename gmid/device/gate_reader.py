"""Lines over vgs read on the shifted gate axis, for all lengths and body biases at once.

At a larger body bias the threshold is higher, so that the upper end of the shifted axis lies
beyond the data there, where those of the next smaller body bias still reach.  What differs
between the two is continued in a straight line, not the line itself: that is closer by an order.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gmid.device.curves import slope_operator
from gmid.device.reading import Reading, cubic_reading, quintic_reading
from gmid.device.spline import Array

_DECAY = 30
"""Coefficients beyond a point over which its bearing on them decays to rounding."""

_FADING = 0.02
"""Way beyond the data over which their curvature is still believed [V]."""


@dataclass(frozen=True, eq=False)
class GateReader:
    """Matrices from values along vgs to coefficients along the shifted gate axis.

    Parameters
    ----------
    own : ndarray, shape (2, n_length, n_vsb, n_gate, n_vgs)
        For values and for slopes, by which the lines of each length and body bias are multiplied.
    beyond : ndarray, shape (2, n_length, (n_vsb - 1) * m, n_vsb * n_vgs)
        What is read beyond the data, at the last m points of all body biases but the first, of
        the lines of all.
    tail : ndarray, shape (m, k)
        From there to the last k coefficients.

    Examples
    --------
    >>> vgs, places = np.linspace(0.0, 2.0, 9), np.linspace(0.0, 2.0, 5) + np.zeros((1, 1, 5))
    >>> reader = make_reader(vgs, places, np.eye(5), np.zeros((1, 1)))
    >>> reader.read(vgs[None, None, None] ** 2)[0, 0].round(9)
    array([[0.  , 0.25, 1.  , 2.25, 4.  ]])
    """

    own: Array
    beyond: Array
    tail: Array

    def read(self, lines: Array, *, slopes: bool = False) -> Array:
        """Read lines, or their slopes.

        Parameters
        ----------
        lines : ndarray, shape (n_length, n_vsb, n_lines, n_vgs)
            Values along vgs.
        slopes : bool, keyword-only
            Whether to read slopes.

        Returns
        -------
        ndarray, shape (n_length, n_vsb, n_lines, n_gate)
            Coefficients along the gate axis.
        """
        kind = int(slopes)
        found = np.asarray(lines @ self.own[kind].swapaxes(-1, -2))
        if len(self.tail):
            lengths, bulks, count, points = lines.shape
            side = lines.transpose(0, 2, 1, 3).reshape(lengths, count, bulks * points)
            side = side @ self.beyond[kind].swapaxes(-1, -2)
            side = side.reshape(lengths, count, bulks - 1, -1).swapaxes(1, 2)
            found[:, 1:, :, -self.tail.shape[1] :] += side @ self.tail
        return found


def find_beyond(vgs: Array, places: Array, threshold: Array) -> NDArray[np.bool_]:
    """Find the points beyond the data of a body bias where those of the next smaller one help.

    Parameters
    ----------
    vgs : ndarray, shape (n_vgs,)
        The gate axis [V].
    places : ndarray, shape (n_length, n_vsb, n)
        Gate voltages at the points of the shifted axis [V].
    threshold : ndarray, shape (n_length, n_vsb)
        Its shift [V].

    Returns
    -------
    ndarray of bool, shape (n_length, n_vsb, n)
        True there.

    Examples
    --------
    >>> threshold = np.array([[0.4, 0.5]])
    >>> places = threshold[..., None] + np.array([0.0, 0.5, 0.6])
    >>> find_beyond(np.array([0.0, 1.05]), places, threshold)[0].astype(int)
    array([[0, 0, 0],
           [0, 0, 1]])
    """
    found = np.asarray(places > vgs[-1])
    found[:, 0] = False
    found[:, 1:] &= (np.diff(threshold, axis=1) > 0)[..., None]
    return found


def make_reader(vgs: Array, places: Array, operator: Array, threshold: Array) -> GateReader:
    """Look the places up once, for every quantity.

    Parameters
    ----------
    vgs : ndarray, shape (n_vgs,)
        The gate axis [V].
    places : ndarray, shape (n_length, n_vsb, n)
        Gate voltages at the points of the shifted axis [V].
    operator : ndarray, shape (n_gate, n)
        From values there to coefficients.
    threshold : ndarray, shape (n_length, n_vsb)
        Shift of the axis [V].

    Returns
    -------
    GateReader
        Of not-a-knot cubic splines, straight beyond the data where nothing else is known.

    Examples
    --------
    >>> vgs, threshold = np.linspace(0.0, 1.0, 9), np.array([[0.4, 0.5]])
    >>> places = threshold[..., None] + np.array([0.0, 0.5, 0.6])
    >>> lines = (vgs - threshold[..., None]) ** 2
    >>> reader = make_reader(vgs, places, np.eye(3), threshold)
    >>> reader.read(lines[:, :, None])[0, :, 0].round(9) + 0.0
    array([[0.  , 0.25, 0.36],
           [0.  , 0.25, 0.36]])
    """
    beyond = find_beyond(vgs, places, threshold)
    lengths, bulks, count = places.shape
    most = int(np.max(beyond.sum(axis=-1), initial=0))
    own = np.empty((2, lengths, bulks, len(operator), vgs.size))
    side = np.zeros((2, lengths, bulks, most, bulks, vgs.size))
    joints = _find_joints(vgs, places)
    for length, here in enumerate(places):
        reading = cubic_reading(vgs, here)
        rows = np.stack((reading.values[0], reading.slopes[0]))
        rows[:, beyond[length]] = 0.0
        np.matmul(operator, rows, out=own[:, length])
        if most:
            joint = joints.values[0][length], joints.slopes[0][length]
            last = rows[:, :, count - most :], here[:, count - most :] - vgs[-1]
            _continue(vgs, last, joint, beyond[length, :, count - most :], side[:, length])
    shape = (2, lengths, (bulks - 1) * most, bulks * vgs.size)
    tail = operator.T[count - most :, -(most + _DECAY) :]
    return GateReader(own, side[:, :, 1:].reshape(shape), np.ascontiguousarray(tail))


def _find_joints(vgs: Array, places: Array) -> Reading:
    """Read where the data of a body bias end on those of the next smaller one."""
    return cubic_reading(vgs, vgs[-1] - np.diff(places[:, :, 0], axis=1))


def _continue(
    vgs: Array,
    last: tuple[Array, Array],
    joint: tuple[Array, Array],
    beyond: NDArray[np.bool_],
    side: Array,
) -> None:
    """Fill in how the last points of each body bias follow from all lines of one length."""
    rows, ways = last
    end = slope_operator(vgs)[-1]
    whole = np.zeros(side.shape)
    bulks = np.arange(len(ways))
    whole[:, bulks, :, bulks] = rows.swapaxes(0, 1)
    for bulk in bulks[1:]:
        chosen = beyond[bulk]
        way = ways[bulk, chosen, None]
        found = whole[:, bulk - 1, chosen]
        for line, slope in ((bulk - 1, -joint[1][bulk - 1]), (bulk, end)):
            found[0, :, line] += way * slope
            found[1, :, line] += slope
        found[0, :, bulk - 1] -= joint[0][bulk - 1]
        found[0, :, bulk, -1] += 1.0
        whole[:, bulk, chosen] = side[:, bulk, chosen] = found


def continue_current(
    vgs: Array, places: Array, threshold: Array, lines: tuple[Array, Array], read: Array
) -> None:
    """Continue values and slopes beyond the data of a body bias by those of the next smaller one.

    Parameters
    ----------
    vgs : ndarray, shape (n_vgs,)
        The gate axis [V].
    places : ndarray, shape (n_length, n_vsb, n)
        Gate voltages at the points of the shifted axis [V].
    threshold : ndarray, shape (n_length, n_vsb)
        Shift of the axis [V].
    lines : tuple of ndarray, shape (n_length, n_vsb, n_lines, n_vgs)
        Values along vgs and their slopes.
    read : ndarray, shape (2, n_length, n_vsb, n_lines, n)
        Values and slopes at the places, of quintic splines; it is overwritten beyond the data.

    Examples
    --------
    >>> vgs, threshold = np.linspace(0.0, 1.0, 9), np.array([[0.4, 0.5]])
    >>> places = threshold[:, :, None] + np.array([0.0, 0.5, 0.6])
    >>> over, read = vgs - threshold[:, :, None, None], np.zeros((2, 1, 2, 1, 3))
    >>> read[0], read[1] = [[[[0, 0.25, 0.36]]]], [[[[0, 1.0, 1.2]]]]
    >>> read[:, 0, 1, :, 2] = 0.0
    >>> continue_current(vgs, places, threshold, (over**2, 2 * over), read)
    >>> read[:, 0, 1, 0].round(9)
    array([[0.  , 0.25, 0.36],
           [0.  , 1.  , 1.2 ]])
    """
    beyond = find_beyond(vgs, places, threshold)
    if not beyond.any():
        return
    values, slopes = lines
    joints, end = quintic_reading(vgs, vgs[-1] - np.diff(places[:, :, 0], axis=1)), vgs[-1]
    step, tilt = (
        lines[kind][:, 1:, :, -1:] - values[:, :-1] @ on_values[..., None]
        - slopes[:, :-1] @ on_slopes[..., None]
        for kind, (on_values, on_slopes) in enumerate((joints.values, joints.slopes))
    )  # fmt: skip
    curve = slopes[:, 1:] @ slope_operator(vgs)[-1][:, None]
    curve -= slopes[:, :-1] @ _find_joints(vgs, places).slopes[0][..., None]
    for length, bulk in np.argwhere(beyond.any(axis=-1)):
        chosen = beyond[length, bulk]
        first = int(np.argmax(chosen))
        way, here = places[length, bulk, first:] - end, (length, bulk - 1)
        fade = -_FADING * np.expm1(-way / _FADING)
        before = read[:, length, bulk - 1, :, first:]
        bend = _FADING * curve[here]
        read[0, length, bulk, :, first:] = (
            before[0] + step[here] + tilt[here] * way + bend * (way - fade)
        )
        read[1, length, bulk, :, first:] = before[1] + tilt[here] + curve[here] * fade
