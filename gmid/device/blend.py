"""A temperature between those of a table, interpolated only when it is asked for."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from gmid.condition import Condition
from gmid.device.aligned import AlignedGrid, gate_reach
from gmid.device.grid import Lines
from gmid.device.spline import Array, SplineAxis
from gmid.errors import DataFault, OutOfReach
from gmid.nomenclature import AXES
from gmid.sweep.model import Sweep


@dataclass(frozen=True, eq=False)
class BlendedGrid:
    """Several temperatures blended into one, on a common shifted gate axis.

    Parameters
    ----------
    parts : tuple of AlignedGrid
        The same device at rising temperatures, with the same reach.
    temperature : float
        Between them [degC].

    Notes
    -----
    The threshold is interpolated in the temperature, everything else in its inverse, in which
    the slope of weak inversion is straight: a parabola through three temperatures.

    Examples
    --------
    >>> from gmid.device.example import example_sweep
    >>> cold = example_sweep()
    >>> hot = replace(cold, condition=Condition("tt", 28.0))
    >>> BlendedGrid.of([hot, cold], 27.5).condition
    Condition('tt/27.5')
    """

    parts: tuple[AlignedGrid, ...]
    temperature: float

    @classmethod
    def of(cls, sweeps: Sequence[Sweep], temperature: float) -> BlendedGrid:
        """Blend sweeps of one device and corner.

        Parameters
        ----------
        sweeps : sequence of Sweep
            At two or more temperatures, on the same axes; the three nearest are used.
        temperature : float
            Between them [degC].

        Returns
        -------
        BlendedGrid
            The blend.

        Raises
        ------
        DataFault
            If the sweeps do not belong together.
        OutOfReach
            If the temperature lies outside theirs.

        Examples
        --------
        >>> from gmid.device.example import example_sweep
        >>> cold = example_sweep()
        >>> BlendedGrid.of([cold, replace(cold, condition=Condition("tt", 28.0))], 30.0)
        Traceback (most recent call last):
        ...
        gmid.errors.OutOfReach: 30 C is out of reach for nmos tt: the table covers 27 to 28 C.
        """
        ordered = sorted(sweeps, key=lambda sweep: sweep.condition.temperature)
        _check_family(ordered)
        first, last = (ordered[end].condition.temperature for end in (0, -1))
        if not first <= temperature <= last:
            name = f"{ordered[0].device} {ordered[0].condition.corner}"
            raise OutOfReach(
                f"{temperature:g} C is out of reach for {name}: "
                f"the table covers {first:g} to {last:g} C."
            )
        nearest = sorted(ordered, key=lambda s: abs(s.condition.temperature - temperature))[:3]
        nearest.sort(key=lambda sweep: sweep.condition.temperature)
        ends = [gate_reach(AlignedGrid(sweep)) for sweep in nearest]
        reach = (min(low for low, _ in ends), max(high for _, high in ends))
        return cls(tuple(AlignedGrid(sweep, reach) for sweep in nearest), temperature)

    @cached_property
    def sweep(self) -> Sweep:
        """The first part's sweep, under the blended condition; its values are not blended."""
        names = set.intersection(*(set(part.sweep.values) for part in self.parts))
        first = self.parts[0].sweep
        values = {name: first.values[name] for name in first.values if name in names}
        return replace(first, condition=self.condition, values=values, nominal=False)

    @property
    def condition(self) -> Condition:
        """The corner at the temperature asked for."""
        return replace(self.parts[0].condition, temperature=self.temperature)

    @cached_property
    def _weights(self) -> Array:
        kelvins = np.array([part.condition.kelvin for part in self.parts])
        return _lagrange(1.0 / kelvins, 1.0 / self.condition.kelvin)

    @cached_property
    def threshold(self) -> Array:
        """Shift of the gate axis [V], shape (n_length, n_vsb)."""
        kelvins = np.array([part.condition.kelvin for part in self.parts])
        weights = _lagrange(kelvins, self.condition.kelvin)
        return np.asarray(np.tensordot(weights, [part.threshold for part in self.parts], 1))

    @property
    def gate(self) -> SplineAxis:
        """The shifted gate axis [V]."""
        return self.parts[0].gate

    @property
    def drain(self) -> Array:
        """Points of the drain axis [V]."""
        return self.parts[0].drain

    @property
    def has_rest(self) -> bool:
        """Whether any current flows at vds = 0."""
        return any(part.has_rest for part in self.parts)

    @property
    def has_rest_gm(self) -> bool:
        """Whether that current follows the gate."""
        return any(part.has_rest_gm for part in self.parts)

    @property
    def notes(self) -> tuple[str, ...]:
        """That it is interpolated, and what the parts have to say."""
        temperatures = [f"{part.condition.temperature:g}" for part in self.parts]
        told = dict.fromkeys(note for part in self.parts for note in part.notes)
        listed = ", ".join(temperatures[:-1]) + " and " + temperatures[-1]
        return (f"interpolated between {listed} C", *told)

    @property
    def refinement(self) -> Array:
        """Matrix from values on the sweep's vds to values on `drain`."""
        return self.parts[0].refinement

    def lines(self, names: Sequence[str]) -> Iterator[Lines]:
        """Yield transformed quantities along the shifted gate axis.

        Parameters
        ----------
        names : sequence of str
            As for `AlignedGrid.lines`.

        Yields
        ------
        Lines
            The blend of the parts.

        Examples
        --------
        >>> from gmid.device.example import example_sweep
        >>> cold = example_sweep()
        >>> hot = replace(cold, condition=Condition("tt", 28.0))
        >>> next(BlendedGrid.of([cold, hot], 27.5).lines(["gmb"])).coarse.shape[:3]
        (3, 3, 13)
        """
        for parts in zip(*(part.lines(names) for part in self.parts), strict=True):
            yield Lines(
                _blend(self._weights, [part.coarse for part in parts]),
                _blend(self._weights, [part.fine for part in parts]),
            )


def _blend(weights: Array, parts: Sequence[Array | None]) -> Array | None:
    """Weigh and add what is there."""
    there = [w * part for w, part in zip(weights, parts, strict=True) if part is not None]
    return np.sum(there, axis=0) if there else None


def _check_family(ordered: Sequence[Sweep]) -> None:
    if len(ordered) < 2:
        raise DataFault("a temperature between tables needs at least two of them.")
    first = ordered[0]
    temperatures = [sweep.condition.temperature for sweep in ordered]
    if len(set(temperatures)) < len(temperatures):
        raise DataFault(f"{first.device} is given twice at one temperature.")
    for sweep in ordered[1:]:
        named = (sweep.device, sweep.condition.corner, sweep.unit)
        if named != (first.device, first.condition.corner, first.unit):
            raise DataFault(f"{sweep.label} and {first.label} are not the same device and corner.")
        for axis in AXES:
            if not np.array_equal(getattr(sweep, axis), getattr(first, axis)):
                raise DataFault(
                    f"{sweep.label} and {first.label} have different {axis} axes.",
                    hint="Interpolation between temperatures needs the same grid at each.",
                )


def _lagrange(points: Array, at: float) -> Array:
    """Weigh values at points for the polynomial through all of them."""
    return np.array(
        [
            np.prod([(at - other) / (here - other) for other in points if other != here])
            for here in points
        ]
    )
