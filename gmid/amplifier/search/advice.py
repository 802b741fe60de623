"""What would help where demands cannot be met: changes of the request, tried one at a time."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace

import numpy as np

from gmid.amplifier.checks import KINDS
from gmid.amplifier.plan import Choices, Matching, Supply
from gmid.amplifier.search.evaluation import Evaluator
from gmid.amplifier.search.goals import Goal, list_goals
from gmid.amplifier.search.refine import Candidate, Refiner
from gmid.amplifier.search.starts import Task
from gmid.quantity import format_quantity

_EASE = 0.1
_EASE_DB = 1.0
_EASE_DEGREES = 6.0
_TIGHT = 0.03
_LEAST_GAIN = 0.02
_ROUNDS = 4
_SEVERAL = 2
_DECIBEL = np.log(10.0) / 20.0


@dataclass(frozen=True, eq=False)
class Trial:
    """One change of the request.

    Parameters
    ----------
    words : str
        What changes.
    goals : tuple of Goal
        What is to be reached then.
    supply : Supply
        What feeds the amplifier then.

    Examples
    --------
    >>> Trial("a supply of 2 V", (), Supply(2.0, 1e-6)).words
    'a supply of 2 V'
    """

    words: str
    goals: tuple[Goal, ...]
    supply: Supply


def suggest(
    refiner: Refiner, nearest: Candidate, task: Task, choices: Choices,
    matching: Mapping[str, Matching], say: Callable[[float, str], None],
) -> str:  # fmt: skip
    """Try single changes of the request, from the nearest plan on.

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
    say : callable
        Told the share done and what is being done.

    Returns
    -------
    str
        The change that helps most and what it leaves; or that none of those tried helps.

    Examples
    --------
    >>> from gmid.amplifier.search.example import example_search
    >>> search = example_search()
    >>> refiner, nearest = search.run()
    >>> words = suggest(refiner, nearest, search.task, search.choices, {}, search.say)
    >>> words.endswith("would be enough.")
    True
    """
    study = refiner.study(nearest)
    tried: list[tuple[float, str]] = []
    trials = _list_trials(nearest, refiner, task, choices, matching)
    for k, trial in enumerate(trials):
        say(0.92 + 0.05 * k / len(trials), f"trying {trial.words}")
        other = _change(refiner, task, trial)
        found = other.exploit(other.settle(nearest.row[None])[0], study)
        tried.append((found.missed, trial.words))
        if found.missed <= 0:
            break
    missed, words = min(tried)
    if missed > 0:
        say(0.97, "trying how far the binding demand has to give way")
        enough = _find_enough(nearest, refiner, task, choices, matching)
        missed, words = (0.0, enough) if enough else (missed, words)
    if missed <= 0:
        return f"{_begin(words)} would be enough."
    if missed > nearest.missed - _LEAST_GAIN:
        return "No single change that was tried helps: " + "; ".join(one for _, one in tried) + "."
    left = 100 * missed / nearest.missed
    return f"{_begin(words)} helps most: {left:.0f} % of what is missed is left."


def _change(refiner: Refiner, task: Task, trial: Trial) -> Refiner:
    """Give the same search with one thing changed."""
    old, known = refiner.evaluator, task.supply.voltages
    setting = replace(old.setting, supply=trial.supply, goals=trial.goals)
    evaluator = Evaluator(old.space, setting)
    rise = trial.supply.voltages / known
    points = [
        replace(one, voltage=one.voltage * float(rise[np.argmin(np.abs(known - one.voltage))]))
        for one in refiner.points
    ]
    return Refiner(evaluator, points, refiner.watch, refiner.minimise)


def _begin(words: str) -> str:
    return words if words.split()[0] in KINDS else words[0].upper() + words[1:]


def _worst(nearest: Candidate, refiner: Refiner) -> dict[str, float]:
    margins = np.where(refiner.watch, nearest.outcome.margins[0], np.inf).min(axis=0)
    goals = refiner.evaluator.setting.goals
    return {goal.name: float(one) for goal, one in zip(goals, margins, strict=True)}


def _find_enough(
    nearest: Candidate, refiner: Refiner, task: Task, choices: Choices,
    matching: Mapping[str, Matching],
) -> str:  # fmt: skip
    """Say what the demand that is missed most would have to be, if it alone gave way.

    One step below what was found, so that a new search finds it too.
    """
    missed = {key: one for key, one in _worst(nearest, refiner).items() if key in task.demands}
    name = min(missed, key=lambda key: missed[key], default="")
    if not name or missed[name] >= 0 or sum(one < 0 for one in missed.values()) > _SEVERAL:
        return ""
    value, eased, best = task.demands[name].value, task, nearest
    reached = _reach(task, name, missed[name])
    for _ in range(_ROUNDS):
        demands = {**task.demands, name: replace(task.demands[name], value=reached)}
        eased = replace(task, demands=demands)
        words = _spell(name, value, reached)
        other = _change(
            refiner, task, Trial(words, list_goals(demands, choices, matching), task.supply)
        )
        best = other.improve(other.settle(best.row[None])[0])
        reached = _ease(eased, name)
        if best.missed <= 0:
            return _spell(name, value, reached)
    return ""


def _reach(task: Task, name: str, margin: float) -> float:
    """Give the value that is reached where a demand is missed by a margin, three digits of it."""
    value, kind = task.demands[name].value, KINDS[name]
    sign = 1.0 if kind.is_least else -1.0
    if kind.unit == "dB":
        reached = value + sign * margin / _DECIBEL
    elif kind.unit == "deg":
        reached = value + float(np.degrees(margin))
    else:
        reached = value * float(np.exp(sign * margin))
    scale = 10.0 ** (np.floor(np.log10(abs(reached))) - 2)
    return float(scale * (np.floor if kind.is_least else np.ceil)(reached / scale))


def _list_trials(
    nearest: Candidate, refiner: Refiner, task: Task, choices: Choices,
    matching: Mapping[str, Matching],
) -> list[Trial]:  # fmt: skip
    worst, supply = _worst(nearest, refiner), task.supply
    trials = []
    for name in task.demands:
        if worst.get(name, np.inf) < _TIGHT:
            value, eased = task.demands[name].value, _ease(task, name)
            demands = {**task.demands, name: replace(task.demands[name], value=eased)}
            trials.append(
                Trial(_spell(name, value, eased), list_goals(demands, choices, matching), supply)
            )
    same = refiner.evaluator.setting.goals
    higher = replace(supply, voltage=supply.voltage * (1 + _EASE))
    trials.append(Trial(f"a supply of {higher.voltage:.3g} V", same, higher))
    if supply.tolerance > 0:
        half = replace(supply, tolerance=supply.tolerance / 2)
        words = f"half the tolerance of the supply ({50 * supply.tolerance:.2g} %)"
        trials.append(Trial(words, same, half))
    if worst["saturation"] < _TIGHT and choices.saturation_margin > 0:
        less = replace(choices, saturation_margin=choices.saturation_margin / 2)
        words = f"half the saturation margin ({less.saturation_margin * 1e3:.3g} mV)"
        trials.append(Trial(words, list_goals(task.demands, less, matching), supply))
    return trials


def _ease(task: Task, name: str) -> float:
    """Ask for a tenth less, or allow a tenth more; gains by 1 dB, phases by 6 degrees."""
    value, kind = task.demands[name].value, KINDS[name]
    sign = -1.0 if kind.is_least else 1.0
    if kind.unit == "dB":
        return value + sign * _EASE_DB
    return value - _EASE_DEGREES if kind.unit == "deg" else value * (1 + sign * _EASE)


def _spell(name: str, value: float, other: float) -> str:
    old, new = (format_quantity(one, KINDS[name].unit) for one in (value, other))
    return f"{name} of {new} instead of {old}"
