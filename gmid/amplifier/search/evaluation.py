"""Exact evaluation of many candidates at chosen points: conditions, supplies, references."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier.plan import Supply
from gmid.amplifier.prediction import Prediction
from gmid.amplifier.search.goals import Goal, measure_margins
from gmid.amplifier.search.shared import SharedDevice
from gmid.amplifier.search.space import Rows, Space
from gmid.amplifier.symmetry import find_sides
from gmid.amplifier.topology import build_circuit
from gmid.circuit.bias import solve_bias

Array = NDArray[np.float64]

FAILED = -10.0
"""Margin of every goal where there is no bias point inside the tables."""

_CHUNK = 768
"""Bias points that are solved at a time."""
_FEW = 4


@dataclass(frozen=True, order=True)
class Point:
    """Where a candidate is evaluated.

    Parameters
    ----------
    condition : int
        Position of the condition on the bench.
    voltage : float
        Supply [V].
    reference : float
        Reference current over the nominal one [-].

    Examples
    --------
    >>> Point(0, 1.62).reference
    1.0
    """

    condition: int
    voltage: float
    reference: float = 1.0


@dataclass(frozen=True, eq=False)
class Outcome:
    """What evaluation found.

    Parameters
    ----------
    margins : ndarray, shape (n, points, goals)
        Margins.
    current : ndarray, shape (n, points)
        Supply current [A].
    area : ndarray, shape (n,)
        Gate area [m^2].

    Examples
    --------
    >>> Outcome(np.array([[[0.1, -0.2]]]), np.ones((1, 1)), np.ones(1)).violation
    array([0.2])
    """

    margins: Array
    current: Array
    area: Array

    @property
    def violation(self) -> Array:
        """Sum over goals of the worst shortfall, shape (n,)."""
        return np.asarray(np.maximum(-self.margins.min(axis=1), 0.0).sum(axis=-1))

    def take(self, index: Rows) -> Outcome:
        """Take some of the candidates.

        Parameters
        ----------
        index : ndarray of int
            Which.

        Returns
        -------
        Outcome
            Of those.
        """
        return Outcome(self.margins[index], self.current[index], self.area[index])


class Evaluator:
    """Evaluates candidates of one form.

    Parameters
    ----------
    space : Space
        What varies.
    devices : mapping of str to SharedDevice
        In all conditions.
    supply : Supply
        What the amplifier is fed with.
    goals : tuple of Goal
        What is to be reached.
    load : tuple of float
        Capacitance and resistance at each output [F], [ohm].
    """

    def __init__(
        self, space: Space, devices: Mapping[str, SharedDevice], supply: Supply,
        goals: tuple[Goal, ...], load: tuple[float, float],
    ) -> None:  # fmt: skip
        self.space = space
        self.devices = devices
        self.supply = supply
        self.goals = goals
        self.load = load
        self.spent = 0
        self._starts: dict[Point, dict[str, float]] = {}

    def evaluate(
        self, rows: Rows, points: Sequence[Point], watch: NDArray[np.bool_] | None = None
    ) -> Outcome:
        """Evaluate candidates at points.

        Parameters
        ----------
        rows : ndarray of int, shape (n, variables)
            Candidates.
        points : sequence of Point
            Where.
        watch : ndarray of bool, shape (points, goals), optional
            What is of interest; the rest may come out infinite. All by default.

        Returns
        -------
        Outcome
            Points in the order given.
        """
        everything = np.ones((len(points), len(self.goals)), dtype=bool)
        watch = everything if watch is None else watch
        margins = np.full((len(rows), len(points), len(self.goals)), FAILED)
        current = np.full((len(rows), len(points)), np.inf)
        area = np.full(len(rows), np.inf)
        most = max(1, _CHUNK // len(points))
        for first in range(0, len(rows), most):
            part = np.arange(first, min(first + most, len(rows)))
            good, found = self._solve(rows[part], tuple(points))
            if found is None:
                continue
            margins[part[good]] = measure_margins(found, self.goals, watch)
            current[part[good]] = found.supply_current
            area[part[good]] = found.gate_area[:, 0]
            self.spent += len(part) * len(points)
        margins[:, ~watch] = np.where(margins[:, ~watch] > FAILED, np.inf, FAILED)
        return Outcome(margins, current, area)

    def _solve(
        self, rows: Rows, points: tuple[Point, ...]
    ) -> tuple[NDArray[np.bool_], Prediction | None]:
        """Solve bias points; a candidate that lacks one at any of the points is left out."""
        place = np.array([point.condition for point in points])
        devices = {name: device.at_place(place) for name, device in self.devices.items()}
        voltage = np.array([point.voltage for point in points])
        reference = self.supply.reference_current * np.array([one.reference for one in points])
        start = self._start(points)
        good = np.ones(len(rows), dtype=bool)
        while good.any():
            plan = self.space.plan(
                rows[good], name="candidate", load_capacitance=self.load[0],
                load_resistance=self.load[1],
            )  # fmt: skip
            circuit = build_circuit(
                plan, voltage=voltage, vcm=self.supply.common_mode.at(voltage),
                input_level=self.supply.input_level.at(voltage), reference_current=reference,
            )  # fmt: skip
            bias = solve_bias(circuit, devices, start=start, mirror=find_sides(circuit))
            fine = bias.inside.all(axis=1)
            if fine.all():
                if len(rows) <= _FEW or start is None:
                    self._keep(points, bias.voltages)
                found = Prediction(plan, devices, self.supply, voltage, reference, bias)
                return good, found
            good[np.flatnonzero(good)[~fine]] = False
        return good, None

    def _start(self, points: tuple[Point, ...]) -> dict[str, Array] | None:
        """Give the node voltages to start from at some points, if they are known."""
        known = [self._starts.get(point) for point in points]
        if any(one is None for one in known):
            return None
        nodes = known[0] or {}
        return {node: np.array([(one or {})[node] for one in known]) for node in nodes}

    def _keep(self, points: tuple[Point, ...], voltages: Mapping[str, Array]) -> None:
        """Keep the first candidate's node voltages as later starts."""
        for k, point in enumerate(points):
            self._starts[point] = {node: float(value[0, k]) for node, value in voltages.items()}
