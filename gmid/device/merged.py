"""A device in several conditions, read from one array of coefficients.

The conditions share length, vds and vsb axes; each has its own shifted gate axis, whose spans are
equally wide, so that places are counted in spans from each one's lower end.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from gmid.device.collapsed import Collapsed
from gmid.device.model import DeviceModel
from gmid.device.spline import Array, Indices


@dataclass(frozen=True, eq=False)
class MergedSplines(Collapsed):
    """Splines of several conditions, the first condition's lengths before the next one's.

    Parameters
    ----------
    low, step, last : ndarray, shape (lengths,)
        Lower end of each gate axis, width of its spans [V], and how many there are.

    Examples
    --------
    >>> from gmid.device.device import Device
    >>> from gmid.device.example import example_sweep
    >>> model = Device(example_sweep()).model([0.5e-6, 1e-6])
    >>> MergedSplines.of([model.splines(("id",)), model.splines(("id",))]).lengths
    4
    """

    low: Array
    step: Array
    last: Array

    @classmethod
    def of(cls, parts: Sequence[Collapsed]) -> MergedSplines:
        """Put splines on the same axes of vsb and vds side by side.

        Parameters
        ----------
        parts : sequence of Collapsed
            One a condition.

        Returns
        -------
        MergedSplines
            With the gate axes filled up to the longest of them.
        """
        first = parts[0]
        longest = max((part.gate for part in parts), key=lambda gate: gate.size)
        shapes = [list(part.coefficients.shape) for part in parts]
        lengths = [shape[0] for shape in shapes]
        filled = np.zeros((sum(lengths), *shapes[0][1:3], longest.size, *shapes[0][4:]))
        start = 0
        for part, count in zip(parts, lengths, strict=True):
            filled[start : start + count, :, :, : part.gate.size] = part.coefficients
            start += count
        ends = [(part.gate.breaks[0], part.gate.breaks[-1], part.gate.spans) for part in parts]
        low, high, spans = np.repeat(np.array(ends, dtype=np.float64), lengths, axis=0).T
        return cls(
            first.vsb, first.vds, replace(longest, breaks=np.arange(longest.spans + 1.0)), filled,
            np.concatenate([part.threshold for part in parts]), first.offset,
            low, (high - low) / spans, spans,
        )  # fmt: skip

    def _along_gate(
        self, which: Indices, gate: Array
    ) -> tuple[Array, Array | float, Array | float]:
        step = self.step[which]
        return (gate - self.low[which]) / step, self.last[which], step


@dataclass(frozen=True, eq=False)
class MergedModel(DeviceModel):
    """A device in several conditions at the same lengths.

    Parameters
    ----------
    parts : tuple of DeviceModel
        One a condition.

    Examples
    --------
    >>> from gmid.device.device import Device
    >>> from gmid.device.example import example_sweep
    >>> model = Device(example_sweep()).model([0.5e-6, 1e-6])
    >>> MergedModel.of((model, model)).length.size
    4
    """

    parts: tuple[DeviceModel, ...] = ()

    @classmethod
    def of(cls, parts: Sequence[DeviceModel]) -> MergedModel | None:
        """Merge models whose tables have the same axes.

        Parameters
        ----------
        parts : sequence of DeviceModel
            One a condition.

        Returns
        -------
        MergedModel or None
            None where the axes differ.
        """
        grids = [part.interpolant.grid for part in parts]
        axes = [(one.sweep.vgs[[0, -1]], one.sweep.vds, one.sweep.vsb, one.drain) for one in grids]
        alike = all(
            np.array_equal(mine, other)
            for these in axes[1:]
            for mine, other in zip(axes[0], these, strict=True)
        )
        if not alike:
            return None
        length = np.concatenate([part.length for part in parts])
        return cls(parts[0].interpolant, length, tuple(parts))

    def splines(self, names: Sequence[str]) -> Collapsed:
        """Give the splines of all conditions.

        Parameters
        ----------
        names : sequence of str
            Quantities.

        Returns
        -------
        Collapsed
            Made when first asked for.
        """
        key = tuple(names)
        if key not in self._made:
            self._made[key] = MergedSplines.of([part.splines(key) for part in self.parts])
            for part in self.parts if len(key) > 1 else ():
                part.forget(key)
        return self._made[key]

    @property
    def is_uniform(self) -> bool:
        """Whether all conditions store the same quantities, so that small signals merge too."""
        grids = [part.interpolant.grid for part in self.parts]
        kinds = {(tuple(one.sweep.values), one.has_rest_gm) for one in grids}
        return len(kinds) == 1

    @property
    def has_rest(self) -> bool:
        """Whether any current flows at vds = 0, in any condition."""
        return any(part.has_rest for part in self.parts)

    def thermal_voltage(self, which: Indices) -> Array:
        """Give kT/q of each place.

        Parameters
        ----------
        which : ndarray of int, shape (n,)
            Places.

        Returns
        -------
        ndarray, shape (n,)
            [V].
        """
        sizes = [part.length.size for part in self.parts]
        each = np.array([float(np.max(part.thermal_voltage(which[:1]))) for part in self.parts])
        return np.asarray(np.repeat(each, sizes)[which])
