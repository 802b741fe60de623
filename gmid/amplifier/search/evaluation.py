"""Exact evaluation of many candidates at chosen points: conditions, supplies, references."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier.crew import Crew
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

_CHUNK = 384
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


@dataclass(frozen=True, eq=False)
class Setting:
    """What candidates of every form are evaluated with.

    Parameters
    ----------
    devices : mapping of str to SharedDevice
        In all conditions.
    supply : Supply
        What the amplifier is fed with.
    goals : tuple of Goal
        What is to be reached.
    load : tuple of float
        Capacitance and resistance at each output [F], [ohm].

    Examples
    --------
    >>> from gmid.amplifier.search.example import example_search
    >>> example_search().setting.load
    (1e-12, 1000000.0)
    """

    devices: Mapping[str, SharedDevice]
    supply: Supply
    goals: tuple[Goal, ...]
    load: tuple[float, float]


@dataclass(frozen=True, eq=False)
class Job:
    """Some candidates of a form at some points.

    Parameters
    ----------
    space : Space
        Form and what varies.
    rows : ndarray of int, shape (n, variables)
        Candidates.
    points : tuple of Point
        Where.
    watch : ndarray of bool, shape (points, goals)
        What is of interest.
    start : dict of str to ndarray, shape (points,), optional
        Node voltages to start from [V].

    Examples
    --------
    >>> from gmid.amplifier.search.example import example_space
    >>> space = example_space()
    >>> Job(space, space.largest[None], (Point(0, 1.8),), np.ones((1, 1), bool), None).size
    1
    """

    space: Space
    rows: Rows
    points: tuple[Point, ...]
    watch: NDArray[np.bool_]
    start: dict[str, Array] | None

    @property
    def size(self) -> int:
        """Number of bias points."""
        return len(self.rows) * len(self.points)


@dataclass(frozen=True, eq=False)
class Answer:
    """What came out for the candidates of a job that have a bias point everywhere.

    Parameters
    ----------
    good : ndarray of bool, shape (n,)
        Which those are.
    outcome : Outcome, optional
        Of them.
    voltages : dict of str to ndarray, shape (points,), optional
        Node voltages of the first of them [V].

    Examples
    --------
    >>> Answer(np.zeros(2, dtype=bool)).outcome is None
    True
    """

    good: NDArray[np.bool_]
    outcome: Outcome | None = None
    voltages: dict[str, Array] | None = None


def evaluate_job(setting: Setting, job: Job) -> Answer:
    """Solve bias points and measure margins; leave out candidates that lack one at any point.

    Parameters
    ----------
    setting : Setting
        What they are evaluated with.
    job : Job
        What is to be evaluated.

    Returns
    -------
    Answer
        Margins that are not of interest may come out infinite.

    Examples
    --------
    >>> from gmid.amplifier.search.example import example_search, example_space
    >>> search, space = example_search(), example_space()
    >>> job = Job(space, space.largest[None] // 2, (Point(0, 1.8),), np.ones((1, 6), bool), None)
    >>> evaluate_job(search.setting, job).good.shape
    (1,)
    """
    good, found = _solve(setting, job)
    if found is None:
        return Answer(good)
    outcome = Outcome(
        measure_margins(found, setting.goals, job.watch), found.supply_current,
        found.gate_area[:, 0],
    )  # fmt: skip
    first = {node: np.array(value[0]) for node, value in found.bias.voltages.items()}
    return Answer(good, outcome, first)


def _solve(setting: Setting, job: Job) -> tuple[NDArray[np.bool_], Prediction | None]:
    place = np.array([point.condition for point in job.points])
    devices = {name: device.at_place(place) for name, device in setting.devices.items()}
    supply, load = setting.supply, setting.load
    voltage = np.array([point.voltage for point in job.points])
    reference = supply.reference_current * np.array([one.reference for one in job.points])
    good = np.ones(len(job.rows), dtype=bool)
    while good.any():
        plan = job.space.plan(
            job.rows[good], name="candidate", load_capacitance=load[0], load_resistance=load[1]
        )
        circuit = build_circuit(
            plan, voltage=voltage, vcm=supply.common_mode.at(voltage),
            input_level=supply.input_level.at(voltage), reference_current=reference,
        )  # fmt: skip
        bias = solve_bias(circuit, devices, start=job.start, mirror=find_sides(circuit))
        fine = bias.inside.all(axis=1)
        if fine.all():
            return good, Prediction(plan, devices, supply, voltage, reference, bias)
        good[np.flatnonzero(good)[~fine]] = False
    return good, None


class HasSetting(Protocol):
    """What a crew shares where it evaluates."""

    setting: Setting


class Evaluator:
    """Evaluates candidates of one form.

    Parameters
    ----------
    space : Space
        What varies.
    setting : Setting
        What they are evaluated with.
    crew : Crew, optional
        Processes that take part, with something shared whose `setting` this is.
    """

    def __init__(self, space: Space, setting: Setting, crew: Crew | None = None) -> None:
        self.space = space
        self.setting = setting
        self.crew = crew
        self.spent = 0
        self.starts: dict[Point, dict[str, float]] = {}

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
        goals = self.setting.goals
        everything = np.ones((len(points), len(goals)), dtype=bool)
        watch = everything if watch is None else watch
        margins = np.full((len(rows), len(points), len(goals)), FAILED)
        current = np.full((len(rows), len(points)), np.inf)
        area = np.full(len(rows), np.inf)
        for part, answer in self._answers(rows, tuple(points), watch):
            if answer.outcome is not None:
                index = part[answer.good]
                margins[index] = answer.outcome.margins
                current[index] = answer.outcome.current
                area[index] = answer.outcome.area
                self.spent += len(part) * len(points)
        margins[:, ~watch] = np.where(margins[:, ~watch] > FAILED, np.inf, FAILED)
        return Outcome(margins, current, area)

    def _answers(
        self, rows: Rows, points: tuple[Point, ...], watch: NDArray[np.bool_]
    ) -> Iterator[tuple[NDArray[np.intp], Answer]]:
        """Part the candidates; the first parts go ahead until it is known where to start."""
        most = max(1, _CHUNK // len(points))
        parts = [
            np.arange(first, min(first + most, len(rows))) for first in range(0, len(rows), most)
        ]
        while parts and (len(rows) <= _FEW or self._start(points) is None):
            part = parts.pop(0)
            job = Job(self.space, rows[part], points, watch, self._start(points))
            answer = evaluate_job(self.setting, job)
            if answer.voltages is not None:
                self._keep(points, answer.voltages)
            yield part, answer
        start = self._start(points)
        jobs = [Job(self.space, rows[part], points, watch, start) for part in parts]
        if self.crew is None:
            yield from (
                (part, evaluate_job(self.setting, job))
                for part, job in zip(parts, jobs, strict=True)
            )
        else:
            yield from zip(parts, self.crew.run(_evaluate_shared, jobs), strict=True)

    def _start(self, points: tuple[Point, ...]) -> dict[str, Array] | None:
        """Give the node voltages to start from at some points, if they are known."""
        known = [self.starts.get(point) for point in points]
        if any(one is None for one in known):
            return None
        nodes = known[0] or {}
        return {node: np.array([(one or {})[node] for one in known]) for node in nodes}

    def _keep(self, points: tuple[Point, ...], voltages: Mapping[str, Array]) -> None:
        """Keep node voltages as later starts."""
        for k, point in enumerate(points):
            self.starts[point] = {node: float(value[k]) for node, value in voltages.items()}


def _evaluate_shared(shared: HasSetting, job: Job) -> Answer:
    return evaluate_job(shared.setting, job)
