"""What binds where demands cannot be met, and what would help: changes tried one at a time.

A demand that is changed gives way as far as the others need, and no further; every other change
is of a fixed size. The one that leaves least is refined, and judged as the plan itself was.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from gmid.amplifier.checks import Check, judge
from gmid.amplifier.plan import AmplifierPlan, Choices, Matching, Supply
from gmid.amplifier.predicting import predict_everywhere
from gmid.amplifier.search.combine import Effects
from gmid.amplifier.search.evaluation import Evaluator
from gmid.amplifier.search.goals import Goal, list_goals
from gmid.amplifier.search.refine import Candidate, Refiner, Study
from gmid.amplifier.search.starts import Task
from gmid.amplifier.search.wording import capitalise, tell_binding, tell_change

_TIGHT = 0.03
_SOFT = 0.25
_LEAST_GAIN = 0.02
_ROUNDS = 2
_PROGRESS = 0.01
_SUPPLIES = (1.1, 1.25)
_STEP = 0.1
_HALVED = 0.1


@dataclass(frozen=True, eq=False)
class Trial:
    """One change of the request.

    Parameters
    ----------
    words : str
        What changes; empty where a demand gives way, which is known only afterwards.
    supply : Supply
        What feeds the amplifier then.
    choices : Choices
        Margins to keep then.
    demand : str
        The demand that gives way, if one does.
    size : float
        How much of a change it is, where that is known beforehand [-].

    Examples
    --------
    >>> Trial("a supply of 2 V", Supply(2.0, 1e-6), Choices()).title
    'a supply of 2 V'
    >>> Trial("", Supply(2.0, 1e-6), Choices(), "gbw").title
    'giving way on gbw'
    """

    words: str
    supply: Supply
    choices: Choices
    demand: str = ""
    size: float = _HALVED

    @property
    def title(self) -> str:
        """What is tried, in words."""
        return self.words or f"giving way on {self.demand}"


@dataclass(frozen=True, eq=False)
class Attempt:
    """What became of a trial.

    Parameters
    ----------
    trial : Trial
        The change.
    refiner : Refiner
        The search with that change.
    best : Candidate
        Found with it.
    left : float
        Part that is left of what was missed without it [-].
    size : float
        How much of a change it is, as a logarithm of a ratio or worth as much [-].

    Examples
    --------
    >>> sorted(Attempt.__dataclass_fields__)
    ['best', 'left', 'refiner', 'size', 'trial']
    """

    trial: Trial
    refiner: Refiner
    best: Candidate
    left: float = 1.0
    size: float = 0.0

    @property
    def rank(self) -> tuple[float, float]:
        """What is left, in steps that are worth telling apart; then the smaller change."""
        return float(np.round(self.left / _STEP)), self.size


class Adviser:
    """Tries single changes of a request, from the nearest plan on.

    Parameters
    ----------
    refiner : Refiner
        Of the nearest plan's form.
    nearest : Candidate
        The nearest plan.
    task : Task
        What was asked.
    choices : Choices
        Margins to keep.
    matching : mapping of str to Matching
        Mismatch by device.
    """

    def __init__(
        self, refiner: Refiner, nearest: Candidate, task: Task, choices: Choices,
        matching: Mapping[str, Matching],
    ) -> None:  # fmt: skip
        self.refiner, self.nearest = refiner, nearest
        self.task, self.choices, self.matching = task, choices, matching

    def list_trials(self, checks: Sequence[Check]) -> list[Trial]:
        """List what is worth trying.

        Parameters
        ----------
        checks : sequence of Check
            Of the nearest plan; demands that are missed or only just met may give way.

        Returns
        -------
        list of Trial
            Demands first.
        """
        supply, choices = self.task.supply, self.choices
        trials = [
            Trial("", supply, choices, check.name)
            for check in checks
            if check.name in self.task.demands and check.margin < _TIGHT
        ]
        top = min(float(device.sweep.vds[-1]) for device in self.task.bench[0][1].values())
        most = float(np.floor(20 * top / (1 + supply.tolerance)) / 20)
        wanted = [supply.voltage * factor for factor in _SUPPLIES]
        if most > 1.05 * wanted[-1]:
            wanted.append(most)
        for voltage in wanted:
            if voltage <= most:
                words, size = f"a supply of {voltage:.3g} V", np.log(voltage / supply.voltage)
                higher = replace(supply, voltage=voltage)
                trials.append(Trial(words, higher, choices, size=float(size)))
        if supply.tolerance > 0:
            half = replace(supply, tolerance=supply.tolerance / 2)
            words = f"half the tolerance of the supply ({50 * supply.tolerance:.2g} %)"
            trials.append(Trial(words, half, choices))
        held = [check.margin for check in checks if check.name in ("saturation", "swing")]
        if min(held, default=1.0) < _TIGHT and choices.saturation_margin > 0:
            less = replace(choices, saturation_margin=choices.saturation_margin / 2)
            words = f"half the saturation margin ({less.saturation_margin * 1e3:.3g} mV)"
            trials.append(Trial(words, supply, less))
        return trials

    def attempt(self, trial: Trial, study: Study) -> Attempt:
        """Make a change and go to the best plan that a known neighbourhood leads to.

        Parameters
        ----------
        trial : Trial
            The change.
        study : Study
            Of the nearest plan, without it.

        Returns
        -------
        Attempt
            With what is left.
        """
        goals, weights = self._weigh(trial)
        other = _change(self.refiner, self.task, trial, goals)
        effects = study.effects
        scaled = replace(study, effects=Effects(
            effects.step, effects.change * weights, effects.gain
        ))  # fmt: skip
        best = other.exploit(other.settle(self.nearest.row[None])[0], scaled)
        return self._rate(Attempt(trial, other, best))

    def press(self, made: Attempt) -> Attempt:
        """Refine an attempt until little is gained.

        Parameters
        ----------
        made : Attempt
            The one that leaves least.

        Returns
        -------
        Attempt
            Leaving as much or less.
        """
        best = made.best
        for _ in range(_ROUNDS):
            better = made.refiner.improve(best)
            gained, best = best.cost - better.cost, better
            if gained < _PROGRESS:
                break
        return self._rate(replace(made, best=best))

    def judge(self, made: Attempt) -> tuple[Check, ...]:
        """Judge an attempt by all checks of the request as it was, but for what is no demand.

        Parameters
        ----------
        made : Attempt
            The attempt.

        Returns
        -------
        tuple of Check
            As for a plan that is reported.
        """
        load = self.task.load
        plan = made.refiner.space.single(
            made.best.row, name="a1", load_capacitance=load[0], load_resistance=load[1],
            demands=self.task.demands,
        )  # fmt: skip
        task = replace(self.task, supply=made.trial.supply)
        return judge_everywhere(plan, task, made.trial.choices, self.matching)[0]

    def _weigh(self, trial: Trial) -> tuple[tuple[Goal, ...], np.ndarray]:
        """Let a demand that gives way weigh less than the others."""
        goals = list_goals(self.task.demands, trial.choices, self.matching)
        soft = [goal.name == trial.demand for goal in goals]
        weighed = tuple(
            replace(goal, margin=_soften(goal)) if light else goal
            for goal, light in zip(goals, soft, strict=True)
        )
        return weighed, np.where(soft, _SOFT, 1.0)

    def _rate(self, made: Attempt) -> Attempt:
        goals = made.refiner.evaluator.setting.goals
        worst = np.where(made.refiner.watch, made.best.outcome.margins[0], np.inf).min(axis=0)
        gives = np.array([goal.name == made.trial.demand for goal in goals])
        lacks = np.maximum(-worst, 0.0)
        size = float(lacks[gives].sum()) / _SOFT if gives.any() else made.trial.size
        return replace(made, left=float(lacks[~gives].sum()) / self.nearest.missed, size=size)


def _soften(goal: Goal) -> Callable[..., np.ndarray]:
    return lambda found: _SOFT * goal.margin(found)


def _change(refiner: Refiner, task: Task, trial: Trial, goals: tuple[Goal, ...]) -> Refiner:
    """Give the same search with one thing changed."""
    old, known = refiner.evaluator, task.supply.voltages
    setting = replace(old.setting, supply=trial.supply, goals=goals)
    rise = trial.supply.voltages / known
    points = [
        replace(one, voltage=one.voltage * float(rise[np.argmin(np.abs(known - one.voltage))]))
        for one in refiner.points
    ]
    return Refiner(Evaluator(old.space, setting), points, refiner.watch, refiner.minimise)


def suggest(
    refiner: Refiner, nearest: Candidate, task: Task, choices: Choices,
    matching: Mapping[str, Matching], checks: Sequence[Check], say: Callable[[float, str], None],
) -> str:  # fmt: skip
    """Say what binds, and which single change of the request helps most.

    Parameters
    ----------
    refiner : Refiner
        Of the nearest plan's form.
    nearest : Candidate
        The nearest plan.
    task : Task
        What was asked.
    choices : Choices
        Margins to keep.
    matching : mapping of str to Matching
        Mismatch by device.
    checks : sequence of Check
        Of the nearest plan.
    say : callable
        Told the share done and what is being done.

    Returns
    -------
    str
        What binds, where, by how much; the change that leaves least, and what it leaves, or that
        none of those tried helps.

    Examples
    --------
    >>> from gmid.amplifier.search.example import example_search
    >>> search = example_search()
    >>> refiner, nearest = search.run()
    >>> check = Check("gbw", 5e6, 4e6, "Hz", "tt/27/1.62", -0.2, False)
    >>> suggest(refiner, nearest, search.task, search.choices, {}, [check], search.say)
    'gbw binds: 4 MHz of 5 MHz in tt/27/1.62, 20 % short.'
    """
    facts = tell_binding(checks)
    if nearest.missed <= 0:
        return facts
    adviser = Adviser(refiner, nearest, task, choices, matching)
    study, trials = refiner.study(nearest), adviser.list_trials(checks)
    made = []
    for k, trial in enumerate(trials):
        say(0.92 + 0.05 * k / len(trials), f"trying {trial.title}")
        made.append(adviser.attempt(trial, study))
    made.sort(key=lambda one: one.rank)
    say(0.97, f"trying {made[0].trial.title} further")
    best = adviser.press(made[0])
    if best.left > 1 - _LEAST_GAIN:
        tried = "; ".join(one.trial.title for one in made)
        return f"{facts} No single change that was tried helps: {tried}."
    words = tell_change(
        best.trial.words, best.trial.demand, adviser.judge(best), best.left
    )  # fmt: skip
    if "would be enough" not in words and made[1:] and made[1].left < 1 - _LEAST_GAIN:
        second = capitalise(made[1].trial.title)
        words = f"{words} {second} leaves {100 * made[1].left:.2g} %."
    return f"{facts} {words}"


def judge_everywhere(
    plan: AmplifierPlan, task: Task, choices: Choices, matching: Mapping[str, Matching]
) -> tuple[tuple[Check, ...], float]:
    """Judge a plan in all conditions, and give its largest supply current.

    Parameters
    ----------
    plan : AmplifierPlan
        One candidate.
    task : Task
        Bench and supply count.
    choices : Choices
        Margins to keep.
    matching : mapping of str to Matching
        Mismatch by device.

    Returns
    -------
    checks : tuple of Check
        The worst of each.
    current : float
        At the nominal reference [A].

    Examples
    --------
    >>> from gmid.amplifier.example import example_plan
    >>> from gmid.amplifier.search.example import example_search
    >>> checks, current = judge_everywhere(
    ...     example_plan(), example_search().task, Choices(), {})
    >>> checks[0].name, current > 0
    ('saturation', True)
    """
    found = predict_everywhere(plan, task.bench, task.supply)
    return judge([found], choices, matching=matching), float(found.supply_current.max())
