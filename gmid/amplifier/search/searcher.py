"""The steps of a search: forms, starts, exact evaluation, refinement."""

from __future__ import annotations

import itertools
from collections.abc import Callable, Iterable, Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier.places import INPUTS, OUTPUTS, SENSES, Variant
from gmid.amplifier.plan import Choices, Matching, Requirement, Supply
from gmid.amplifier.search.dress import dress
from gmid.amplifier.search.evaluation import Evaluator, Point
from gmid.amplifier.search.goals import Goal, list_goals
from gmid.amplifier.search.refine import Candidate, Refiner, rate
from gmid.amplifier.search.shared import share_devices
from gmid.amplifier.search.sketch import draw_charts
from gmid.amplifier.search.space import Rows, Space, make_form
from gmid.amplifier.search.starts import Starts, Task, choose_conditions, find_starts
from gmid.condition import Condition
from gmid.device.device import Device
from gmid.errors import DataFault

Progress = Callable[[float, str], None]
Bench = Sequence[tuple[Condition, Mapping[str, Device]]]

SLOW = ("swing", "slew_rate", "offset", "output_current")
"""Goals that take long: looked at in few conditions until everything is checked."""

_STARTS = 12
_FORMS = 4
_REFINED = 2
_BEHIND = 0.45
_ROUNDS = 5
_TELLING = 2
_CHECKS = 3
_GAINED = 0.004
_SHARE = 0.1
_HOPELESS = 1.0
_SLACK = 1e-9


def list_lengths(
    devices: Mapping[str, Device], roles: Mapping[str, str], choices: Choices
) -> tuple[float, ...]:
    """List the lengths to choose from: those asked for, or those of the n-channel table.

    Parameters
    ----------
    devices : mapping of str to Device
        Of any condition.
    roles : mapping of str to str
        Device by role.
    choices : Choices
        Its lengths, if there are any.

    Returns
    -------
    tuple of float
        Rising [m].

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices
    >>> list_lengths(example_devices(), {"n": "nmos"}, Choices(lengths=(2e-6, 1e-6)))
    (1e-06, 2e-06)
    """
    wanted = choices.lengths or tuple(float(one) for one in devices[roles["n"]].sweep.length)
    return tuple(sorted(set(wanted)))


def list_points(
    task: Task, goals: Sequence[Goal], voltages: Iterable[float], *,
    slow_in: Sequence[int] | None = None,
) -> tuple[tuple[Point, ...], NDArray[np.bool_]]:  # fmt: skip
    """List where a search evaluates, and what counts there.

    Parameters
    ----------
    task : Task
        Its bench and supply count.
    goals : sequence of Goal
        What is to be reached.
    voltages : iterable of float
        Supplies [V]; at each the ends of the reference's tolerance too, for the bias point.
    slow_in : sequence of int, optional
        Look at what takes long in these conditions alone, and at the first supply.

    Returns
    -------
    points : tuple of Point
        Everywhere.
    watch : ndarray of bool, shape (points, goals)
        What counts where.

    Examples
    --------
    >>> from gmid.amplifier.search.example import example_search
    >>> search = example_search()
    >>> points, watch = list_points(search.task, search.goals, [1.62])
    >>> [point.reference for point in points], watch.sum(axis=1).tolist()
    ([1.0, 0.9, 1.1], [6, 3, 3])
    """
    tolerance = task.supply.reference_tolerance
    levels = tuple(dict.fromkeys(float(voltage) for voltage in voltages))
    points, watch = [], []
    for k in range(len(task.bench)):
        for voltage in levels:
            points.append(Point(k, voltage))
            everything = slow_in is None or (voltage == levels[0] and k in slow_in)
            watch.append([everything or goal.name not in SLOW for goal in goals])
            for sign in (-1, 1) if tolerance else ():
                points.append(Point(k, voltage, 1 + sign * tolerance))
                watch.append([goal.is_standing for goal in goals])
    return tuple(points), np.array(watch, dtype=bool)


class Searcher:
    """A search for one amplifier.

    Parameters
    ----------
    demands : mapping of str to Requirement
        By name of the check.
    load : tuple of float
        Capacitance and resistance at each output [F], [ohm].
    bench : sequence of (Condition, mapping of str to Device)
        Every condition with its devices.
    roles : mapping of str to str
        Device by role.
    own_well : sequence of str
        Devices whose bulk may go to the source.
    supply : Supply
        What the amplifier is fed with.
    choices : Choices
        What may be chosen, and margins to keep.
    matching : mapping of str to Matching
        For a demand on `offset`.
    say : callable
        Told the share done and what is being done.
    """

    def __init__(
        self, demands: Mapping[str, Requirement], load: tuple[float, float], bench: Bench,
        roles: Mapping[str, str], own_well: Sequence[str], supply: Supply, choices: Choices,
        matching: Mapping[str, Matching], say: Progress = lambda share, words: None,
    ) -> None:  # fmt: skip
        lengths = list_lengths(bench[0][1], roles, choices)
        self.task = Task(dict(demands), load, bench, supply)
        self.devices = share_devices(bench, lengths)
        self.roles, self.own_well = roles, tuple(own_well)
        self.choices, self.matching, self.say = choices, matching, say
        self.goals = list_goals(self.task.demands, choices, matching)

    def run(self) -> tuple[Refiner, Candidate]:
        """Search the forms that promise most; go on to others while nothing meets the demands."""
        ranked = self.rank_forms()
        best_cost = float(ranked[0][1].cost.min())
        near = [one for one in ranked if float(one[1].cost.min()) <= best_cost + _BEHIND]
        self.say(0.2, f"evaluating {len(near[:_FORMS])} of {len(ranked)} forms")
        seeds = [self._seed(space, starts) for space, starts in near[:_FORMS]]
        seeds.sort(key=lambda seed: seed[2])
        found = []
        for k, (refiner, row, _) in enumerate(seeds[:_REFINED]):
            start = refiner.settle(row[None])[0]
            found.append((refiner, self._round(refiner, start, 0.3 + 0.15 * k)))
        found.sort(key=lambda one: one[1].cost)
        refiner, best = self._finish(*found[0])
        rest = found[1:]
        if 0 < best.missed < _HOPELESS:
            rest += [(one, one.settle(row[None])[0]) for one, row, _ in seeds[_REFINED:]]
        for other, start in rest:
            if best.missed <= 0 or best.missed >= _HOPELESS:
                break
            other, again = self._finish(other, start)
            if again.cost < best.cost:
                refiner, best = other, again
        return refiner, best

    def _round(self, refiner: Refiner, best: Candidate, share: float) -> Candidate:
        self.say(share, f"refining {refiner.space.form.variant}")
        return refiner.improve(best)

    def _finish(self, refiner: Refiner, best: Candidate) -> tuple[Refiner, Candidate]:
        """Refine until nothing is gained, then insist on every supply and reference."""
        for _ in range(_CHECKS):
            for k in range(_ROUNDS):
                known = refiner.lessons
                better = self._round(refiner, best, 0.7 + 0.15 * k / _ROUNDS)
                gained = best.cost - better.cost
                best = better
                if gained < max(_GAINED, _SHARE * best.missed) and refiner.lessons == known:
                    break
            self.say(0.85, "checking every condition")
            wide = refiner.widen(*self._every_point())
            whole = wide.settle(best.row[None])[0]
            if whole.missed <= best.missed + _SLACK:
                return wide, whole
            refiner, best = refiner.add_worst(wide, whole), whole
            best = refiner.settle(best.row[None])[0]
        return wide, whole

    def _every_point(self) -> tuple[tuple[Point, ...], NDArray[np.bool_]]:
        return list_points(self.task, self.goals, self.task.supply.voltages)

    def _variants(self) -> list[Variant]:
        lists = [
            known if chosen == "auto" else (chosen,)
            for known, chosen in (
                (INPUTS, self.choices.input_pair), (OUTPUTS, self.choices.output),
                (SENSES, self.choices.common_mode_sense),
            )
        ]  # fmt: skip
        return [Variant(*one) for one in itertools.product(*lists)]

    def _space(self, variant: Variant) -> Space:
        devices = self.task.bench[0][1]
        polarity = {name: device.unit.polarity for name, device in devices.items()}
        form = make_form(variant, self.roles, self.own_well, self.choices, polarity)
        used = [devices[name] for name in dict.fromkeys(form.devices.values())]
        low = max(float(device.sweep.length[0]) for device in used)
        high = min(float(device.sweep.length[-1]) for device in used)
        lengths = list_lengths(devices, self.roles, self.choices)
        fitting = tuple(one for one in lengths if low * 0.9999 <= one <= high * 1.0001)
        if not fitting:
            raise DataFault(
                f"no length to choose from lies in the tables: {low * 1e6:g} to {high * 1e6:g} um.",
                where="amplifier.lengths",
            )
        return Space(form, self.choices, fitting)

    def list_spaces(self) -> list[Space]:
        """List the forms that may be chosen, each with what varies in it.

        Returns
        -------
        list of Space
            In a fixed order.
        """
        return [self._space(variant) for variant in self._variants()]

    def rank_forms(self) -> list[tuple[Space, Starts]]:
        """Apply the closed forms to every form; the cheapest comes first."""
        low = float(self.task.supply.voltages[0])
        ranked = []
        variants = self._variants()
        for k, variant in enumerate(variants):
            self.say(0.25 * k / len(variants), f"closed forms of {variant}")
            space = self._space(variant)
            conditions = choose_conditions(self.task, space)
            charts = [
                draw_charts(space, self.task.book, k, self.task.supply, low, self.task.swing)
                for k in conditions
            ]
            ranked.append((space, find_starts(self.task, space, charts, _STARTS)))
        ranked.sort(key=lambda one: float(one[1].cost.min()))
        return ranked

    def _seed(self, space: Space, starts: Starts) -> tuple[Refiner, Rows, float]:
        """Evaluate the starts of a form exactly at a few points; take the best and its cost."""
        task = self.task
        evaluator = Evaluator(space, self.devices, task.supply, self.goals, task.load)
        ends = task.supply.voltages[[0, -1]]
        chosen = choose_conditions(task, space)
        points, watch = list_points(task, self.goals, ends, slow_in=chosen)
        refiner = Refiner(evaluator, points, watch, self.choices.minimise)
        rows = dress(task, space, starts)
        outcome = evaluator.evaluate(rows, [Point(k, float(ends[0])) for k in chosen[:_TELLING]])
        rated = rate(outcome, self.choices.minimise)
        return refiner, rows[int(np.argmin(rated))], float(rated.min())
