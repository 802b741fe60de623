"""The steps of a search: forms, starts, exact evaluation, refinement."""

from __future__ import annotations

import itertools
from collections.abc import Callable, Iterable, Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier.crew import Crew
from gmid.amplifier.places import INPUTS, OUTPUTS, SENSES, Variant
from gmid.amplifier.plan import Choices, Matching, Requirement, Supply
from gmid.amplifier.search.evaluation import Evaluator, Point, Setting
from gmid.amplifier.search.goals import Goal, list_goals
from gmid.amplifier.search.refine import Candidate, Refiner
from gmid.amplifier.search.shared import share_devices
from gmid.amplifier.search.space import Space, make_form
from gmid.amplifier.search.stages import Refined, rank_form, refine_start, try_starts
from gmid.amplifier.search.starts import Starts, Task, choose_conditions
from gmid.condition import Condition
from gmid.device.device import Device
from gmid.errors import DataFault

Progress = Callable[[float, str], None]
Bench = Sequence[tuple[Condition, Mapping[str, Device]]]

SLOW = ("swing", "slew_rate", "offset", "output_current")
"""Goals that take long: looked at in few conditions until everything is checked."""

_FORMS = 4
_REFINED = 2
_BEHIND = 0.45
_ROUNDS = 5
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
        self.roles, self.own_well = roles, tuple(own_well)
        self.choices, self.matching, self.say = choices, matching, say
        self.goals = list_goals(self.task.demands, choices, matching)
        self.setting = Setting(share_devices(bench, lengths), supply, self.goals, load)
        self.crew = Crew(self, size=1)

    def run(self) -> tuple[Refiner, Candidate]:
        """Search the forms that promise most; go on to others while nothing meets the demands."""
        for device in self.setting.devices.values():
            device.settle()
        with Crew(self) as self.crew:
            return self._run()

    def _run(self) -> tuple[Refiner, Candidate]:
        ranked = self.rank_forms()
        best_cost = float(ranked[0][1].cost.min())
        near = [one for one in ranked if float(one[1].cost.min()) <= best_cost + _BEHIND]
        self.say(0.2, f"evaluating {len(near[:_FORMS])} of {len(ranked)} forms")
        tried = self.crew.run(try_starts, near[:_FORMS])
        seeds = [(near[k][0], *one) for k, one in enumerate(tried)]
        seeds.sort(key=lambda seed: seed[2])
        first = [(space, row) for space, row, _ in seeds[:_REFINED]]
        self.say(0.3, f"refining {', '.join(str(space.form.variant) for space, _ in first)}")
        refined = self.crew.run(refine_start, first)
        found = [self._resume(first[k][0], one) for k, one in enumerate(refined)]
        found.sort(key=lambda one: one[1].cost)
        refiner, best = self._finish(*found[0])
        rest = found[1:]
        if 0 < best.missed < _HOPELESS:
            for space, row, _ in seeds[_REFINED:]:
                late = self.open_refiner(space)
                rest.append((late, late.settle(row[None])[0]))
        for other, start in rest:
            if best.missed <= 0 or best.missed >= _HOPELESS:
                break
            other, again = self._finish(other, start)
            if again.cost < best.cost:
                refiner, best = other, again
        return self._try_ratio(refiner, best) if best.missed <= 0 else (refiner, best)

    def _try_ratio(self, refiner: Refiner, best: Candidate) -> tuple[Refiner, Candidate]:
        """Begin once more from mirrors of twice the ratio that half the current goes into.

        Every single move on the way there looks worse, so that rounds do not find it.
        """
        space, row = refiner.space, best.row.copy()
        for name in ("count.load", "count.tail"):
            allowed, column = space.values[name], space.column[name]
            wanted = 0.5 * allowed[row[column]]
            if wanted < allowed[0]:
                return refiner, best
            row[column] = int(np.argmin(np.abs(allowed - wanted)))
        other = self.open_refiner(space)
        start = other.improve(other.settle(row[None])[0])
        if start.cost > best.cost:
            return refiner, best
        other, again = self._finish(other, start)
        return (other, again) if again.cost < best.cost else (refiner, best)

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
        self.say(0.05, "closed forms of every form")
        ranked: list[tuple[Space, Starts]] = self.crew.run(rank_form, self.list_spaces())
        ranked.sort(key=lambda one: float(one[1].cost.min()))
        return ranked

    def open_refiner(self, space: Space) -> Refiner:
        """Begin the refinement of a form: at both ends of the supply, what is slow in few places.

        Parameters
        ----------
        space : Space
            The form.

        Returns
        -------
        Refiner
            At those points.
        """
        evaluator = Evaluator(space, self.setting, self.crew)
        chosen = choose_conditions(self.task, space)
        ends = self.task.supply.voltages[[0, -1]]
        points, watch = list_points(self.task, self.goals, ends, slow_in=chosen)
        return Refiner(evaluator, points, watch, self.choices.minimise)

    def _resume(self, space: Space, refined: Refined) -> tuple[Refiner, Candidate]:
        """Go on where another process left off."""
        refiner = self.open_refiner(space)
        refiner.evaluator.starts.update(refined.starts)
        refiner.recall(refined.lesson)
        return refiner, refined.best
