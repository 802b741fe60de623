"""From transformed grids to quantities at any bias inside the table.

Coefficients are made when a quantity is first asked for, and kept.  Few lengths are
collapsed first; many different ones are read from the four-dimensional splines.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np

from gmid.device.aligned import AT_REST
from gmid.device.collapsed import Collapsed, expand_spans
from gmid.device.coordinates import (
    bulk_coordinate,
    bulk_offset,
    drain_coordinate,
    length_coordinate,
    roll_off_coordinate,
)
from gmid.device.grid import Grid, Lines, spline_axes
from gmid.device.keeping import KEEPER, borrow
from gmid.device.restoring import ON_CURRENT, restore
from gmid.device.spline import Array, Indices, SplineAxis, natural_axis
from gmid.device.stack import Stack

_FEW_LENGTHS = 8
_POINTS_PER_LENGTH = 40
"""Collapse when no more lengths than this, or so many points for each."""


@dataclass(eq=False)
class Interpolant:
    """Splines of one device in one condition.

    Parameters
    ----------
    grid : Grid
        Transformed data on shifted axes.

    Examples
    --------
    >>> from gmid.device.aligned import AlignedGrid
    >>> from gmid.device.example import example_sweep
    >>> spline = Interpolant(AlignedGrid(example_sweep()))
    >>> one = np.ones(1)
    >>> found = spline.quantities(["id", "gm"], one * 0.7e-6, one * 0.7, one * 0.6, one * 0.0)
    >>> float((found["gm"] / found["id"])[0].round(2))
    6.57
    """

    grid: Grid
    _asked: set[str] = field(default_factory=set, init=False, repr=False)

    @cached_property
    def _number(self) -> int:
        return KEEPER.own(self)

    @cached_property
    def axes(self) -> tuple[SplineAxis, SplineAxis, SplineAxis, SplineAxis]:
        """Length, vsb, vds and gate in spline coordinates."""
        return spline_axes(self.grid)

    @cached_property
    def offset(self) -> float:
        """Phi of the body-bias coordinate [V]."""
        return bulk_offset(float(self.grid.sweep.vsb[0]))

    @cached_property
    def _roll_off(self) -> SplineAxis:
        return natural_axis(roll_off_coordinate(self.grid.sweep.length))

    @cached_property
    def _thresholds(self) -> Array:
        """Coefficients of the threshold, shape (n_length, n_vsb)."""
        along = self._roll_off.operator @ self.grid.threshold
        return np.asarray(along @ self.axes[1].operator.T)

    def threshold_lines(self, length: Array) -> Array:
        """Give the threshold's coefficients along vsb for some lengths.

        Parameters
        ----------
        length : ndarray, shape (k,)
            Channel lengths [m].

        Returns
        -------
        ndarray, shape (k, n_vsb)
            Coefficients [V].

        Examples
        --------
        >>> from gmid.device.aligned import AlignedGrid
        >>> from gmid.device.example import example_sweep
        >>> Interpolant(AlignedGrid(example_sweep())).threshold_lines(np.array([1e-6])).shape
        (1, 3)
        """
        span, place = self._roll_off.locate(roll_off_coordinate(length))
        found = np.zeros((length.size, self._thresholds.shape[1]))
        for step, weight in enumerate(self._roll_off.weights(span, place).T):
            found += weight[:, None] * self._thresholds.take(span + step, axis=0)
        return found

    def threshold(self, length: Array, vsb: Array) -> Array:
        """Give the shift of the gate axis, the constant-current threshold.

        Parameters
        ----------
        length, vsb : ndarray, shape (n,)
            Channel length [m] and body bias [V].

        Returns
        -------
        ndarray, shape (n,)
            Threshold [V].

        Examples
        --------
        >>> from gmid.device.aligned import AlignedGrid
        >>> from gmid.device.example import example_sweep
        >>> spline = Interpolant(AlignedGrid(example_sweep()))
        >>> low, high = spline.threshold(np.full(2, 1e-6), np.array([0.0, 1.0]))
        >>> float((high - low).round(3))
        0.25
        """
        lines = self.threshold_lines(length)
        axis = self.axes[1]
        span, place = axis.locate(bulk_coordinate(vsb, float(self.grid.sweep.vsb[0])))
        if axis.spans > 1:
            columns = span[:, None] + np.arange(axis.order)
            lines = np.take_along_axis(lines, columns, axis=1)
        return np.asarray(np.einsum("ns,ns->n", lines, axis.weights(span, place)))

    def stack(self, names: Sequence[str]) -> Stack:
        """Give the four-dimensional splines of some quantities.

        Parameters
        ----------
        names : sequence of str
            Quantities of the sweep, and ``rest``; alone, that has no vds.

        Returns
        -------
        Stack
            Made now, or when they were first asked for.

        Examples
        --------
        >>> from gmid.device.aligned import AlignedGrid
        >>> from gmid.device.example import example_sweep
        >>> Interpolant(AlignedGrid(example_sweep())).stack(["id", "gds"])
        Stack(3 x 25 x 102 x 3, 2 quantities)
        """
        key = tuple(names)
        kept: Stack | None = KEEPER.find(self._number, key)
        if kept is not None:
            return kept
        solved = self._solve(key, self.axes[0].operator)
        length, vsb, _, gate = self.axes
        made = Stack(length, vsb, self._across(key), gate, solved)
        return KEEPER.keep(self._number, key, made, solved.nbytes)

    def collapse(self, names: Sequence[str], length: Array) -> Collapsed:
        """Give the splines of some quantities at settled lengths.

        Parameters
        ----------
        names : sequence of str
            Quantities of the sweep, and ``rest``; alone, that has no vds.
        length : ndarray, shape (k,)
            Channel lengths [m].

        Returns
        -------
        Collapsed
            Made now, or kept from an earlier query.

        Examples
        --------
        >>> from gmid.device.aligned import AlignedGrid
        >>> from gmid.device.example import example_sweep
        >>> Interpolant(AlignedGrid(example_sweep())).collapse(["id"], np.array([1e-6])).lengths
        1
        """
        key = (tuple(names), length.tobytes())
        kept: Collapsed | None = KEEPER.find(self._number, key)
        if kept is not None:
            return kept
        axis = self.axes[0]
        span, place = axis.locate(length_coordinate(length))
        columns = span[:, None] + np.arange(axis.order)
        settling = np.einsum("kl,kln->kn", axis.weights(span, place), axis.operator[columns])
        made = Collapsed(
            self.axes[1],
            self._across(key[0]),
            self.axes[3],
            expand_spans(self._solve(key[0], settling), self.axes[1]),
            self.threshold_lines(length)[:, self._columns],
            self.offset,
        )
        return KEEPER.keep(self._number, key, made, made.coefficients.nbytes)

    def _across(self, names: tuple[str, ...]) -> SplineAxis:
        """Take the drain axis, which the current at vds = 0 alone has not."""
        return self._alone if names == ("rest",) else self.axes[2]

    @cached_property
    def _alone(self) -> SplineAxis:
        return natural_axis(np.zeros(1))

    @cached_property
    def _columns(self) -> Indices:
        """Coefficients along vsb that bear on each span."""
        vsb = self.axes[1]
        return np.arange(vsb.spans)[:, None] + np.arange(vsb.order)

    @cached_property
    def _refining(self) -> Array:
        """Matrix from values on the sweep's vds to coefficients along the drain."""
        return np.asarray(self.axes[2].operator @ self.grid.refinement)

    def _solve(self, names: tuple[str, ...], settling: Array) -> Array:
        """Solve for coefficients, the lengths first settled by rows of weights.

        The result has shape (rows, n_drain, n_gate, n_vsb, names).
        """
        _, vsb, vds, gate = self.axes
        rows, drains = len(settling), self._across(names).size
        coarse = borrow((len(names), rows, vsb.size, self._refining.shape[1], gate.size))
        others: dict[int, Array] = {}
        for place, (name, lines) in enumerate(zip(names, self._lines(names), strict=True)):
            coarse[place] = 0.0
            if name in AT_REST:
                others[place] = self._settle_lines(lines.parts[0], settling)
                continue
            if lines.coarse is not None:
                coarse[place] = self._settle_lines(lines.coarse, settling)
            if lines.fine is not None:
                others[place] = vds.operator @ self._settle_lines(lines.fine, settling)
        found = np.zeros((rows, drains, gate.size, vsb.size, len(names)))
        if names != ("rest",):
            for row, part in enumerate(coarse.swapaxes(0, 1)):
                lines_of_vds = np.ascontiguousarray(part.transpose(2, 3, 1, 0))
                np.matmul(
                    self._refining,
                    lines_of_vds.reshape(len(lines_of_vds), -1),
                    out=found[row].reshape(drains, -1),
                )
        for place, solved in others.items():
            found[..., place] += solved.transpose(0, 2, 3, 1)
        return found

    def _settle_lines(self, part: Array, settling: Array) -> Array:
        """Settle lengths and solve along vsb; shape (rows, n_vsb, n_vds, n_gate)."""
        vsb = self.axes[1]
        settled = (settling @ part.reshape(len(part), -1)).reshape(len(settling), vsb.size, -1)
        return (vsb.operator @ settled).reshape(len(settling), *part.shape[1:])

    def _lines(self, names: Sequence[str]) -> Iterator[Lines]:
        """Yield coefficients along the gate axis, which are kept if asked for again."""
        found = {name: KEEPER.find(self._number, ("lines", name)) for name in names}
        made = self.grid.lines([name for name in names if found[name] is None])
        for name in names:
            lines: Lines = found[name] or next(made)
            if found[name] is None and name in self._asked:
                size = sum(part.nbytes for part in lines.parts)
                KEEPER.keep(self._number, ("lines", name), lines, size)
            self._asked.add(name)
            yield lines

    def settle(self, names: Sequence[str], length: Array) -> tuple[Collapsed, Indices] | None:
        """Give the splines at the lengths of some points, if those are few.

        Parameters
        ----------
        names : sequence of str
            As for `collapse`.
        length : ndarray, shape (n,)
            Channel lengths [m].

        Returns
        -------
        spline : Collapsed
            At each length that occurs.
        which : ndarray of int, shape (n,)
            Which of them belongs to each point.  None in place of both where the lengths are
            too many for so few points.

        Examples
        --------
        >>> from gmid.device.aligned import AlignedGrid
        >>> from gmid.device.example import example_sweep
        >>> spline = Interpolant(AlignedGrid(example_sweep()))
        >>> spline.settle(["id"], np.array([1e-6, 2e-6, 1e-6]))[1]
        array([0, 1, 0])
        """
        if not np.any(length != length[:1]):
            return self.collapse(names, length[:1]), np.zeros(length.size, dtype=np.intp)
        most = max(_FEW_LENGTHS, length.size // _POINTS_PER_LENGTH)
        if len(set(length[: 2 * most].tolist())) > most:
            return None
        lengths, which = np.unique(length, return_inverse=True)
        if lengths.size > most:
            return None
        return self.collapse(names, lengths), which

    def tables(
        self, names: Sequence[str], length: Array, vgs: Array, vds: Array, vsb: Array
    ) -> Array:
        """Evaluate transformed quantities at scattered points.

        Parameters
        ----------
        names : sequence of str
            Quantities of the sweep, and ``rest``; alone, that has no vds.
        length, vgs, vds, vsb : ndarray, shape (n,)
            Channel length [m] and voltages [V], inside the table.

        Returns
        -------
        ndarray, shape (n, names)
            In the variables of the grid.

        Examples
        --------
        >>> from gmid.device.aligned import AlignedGrid
        >>> from gmid.device.example import example_sweep
        >>> spline = Interpolant(AlignedGrid(example_sweep()))
        >>> one = np.ones(1)
        >>> spline.tables(["gds"], one * 1e-6, one * 0.6, one, one * 0).shape
        (1, 1)
        """
        settled = self.settle(names, length)
        if settled is not None:
            spline, which = settled
            if vgs.size == 1:
                reader = spline.reader
                return reader.read(reader.locate(float(vgs[0]), float(vds[0]), float(vsb[0])))[None]
            return spline.values(spline.locate(which, vgs, vds, vsb))
        gate = vgs - self.threshold(length, vsb)
        bulk = bulk_coordinate(vsb, float(self.grid.sweep.vsb[0]))
        where = (length_coordinate(length), bulk, drain_coordinate(vds), gate)
        return self.stack(names).values(*where)

    def quantities(
        self, names: Sequence[str], length: Array, vgs: Array, vds: Array, vsb: Array
    ) -> dict[str, Array]:
        """Evaluate stored quantities at scattered points.

        Parameters
        ----------
        names : sequence of str
            Quantities of the sweep.
        length, vgs, vds, vsb : ndarray, shape (n,)
            Channel length [m] and voltages [V], inside the table.

        Returns
        -------
        dict of str to ndarray, shape (n,)
            In SI, of one unit; with ``gm``, ``gm_over_id`` comes along.

        Examples
        --------
        >>> from gmid.device.aligned import AlignedGrid
        >>> from gmid.device.example import example_sweep
        >>> spline = Interpolant(AlignedGrid(example_sweep()))
        >>> zero = np.zeros(1)
        >>> spline.quantities(["id"], zero + 1e-6, zero + 0.6, zero, zero)
        {'id': array([0.])}
        """
        wanted = list(names)
        if ON_CURRENT.intersection(wanted) and "id" not in wanted:
            wanted.insert(0, "id")
        if "id" in wanted and self.grid.has_rest:
            wanted += AT_REST if "gm" in wanted and self.grid.has_rest_gm else AT_REST[:1]
        found = self.tables(wanted, length, vgs, vds, vsb)
        raw = {name: found[:, column] for column, name in enumerate(wanted)}
        rest, rest_gm = (raw.pop(name, None) for name in AT_REST)
        return restore(raw, vds, rest, self.grid.condition.thermal_voltage, rest_gm)
