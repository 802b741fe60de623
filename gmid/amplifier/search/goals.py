"""Goals of a search: every demand and every standing rule as a margin in one measure.

A margin is a natural logarithm of a ratio where the figure is one, and a difference over a scale
that is worth as much where it is not: 0.1 is 10 % of bandwidth, 0.87 dB of gain, 6 degrees.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier.checks import LARGEST_COMMON_MODE_ERROR, LARGEST_SHARE, SMALLEST_SHARE
from gmid.amplifier.plan import Choices, Matching, Requirement
from gmid.amplifier.prediction import Prediction
from gmid.amplifier.search.probes import probe_loop, probe_slew, probe_swing
from gmid.amplifier.signal import to_db
from gmid.amplifier.slewing import OVERDRIVE, output_currents

Array = NDArray[np.float64]

RESERVE = 0.004
"""Margin that a search keeps for itself: simulators differ by less."""

BIAS, SIGNAL, LOOP = "bias", "signal", "loop"
"""Kinds of goals of which there are several."""

_DECIBEL = np.log(10.0) / 20.0
_RADIAN = np.pi / 180.0
_TENTH_PER_VOLT = 10.0
_WORST = -10.0
_LEAST_SPEED = 0.1


@dataclass(frozen=True)
class Goal:
    """One thing to reach, in every condition.

    Parameters
    ----------
    name : str
        Name of the demand or rule.
    margin : callable
        From a prediction to margins, negative where it is missed.
    is_standing : bool
        Whether it is a rule of the bias point, which holds at every reference current.
    kind : str
        What has to be measured for it; goals of a kind share that. The bias point alone by
        default.

    Examples
    --------
    >>> Goal("phase_margin", lambda found: found.signal.phase_margin).is_standing
    False
    """

    name: str
    margin: Callable[[Prediction], Array]
    is_standing: bool = False
    kind: str = BIAS


_KINDS = {
    **dict.fromkeys(
        ("gbw", "gm_total", "excess_pole", "dc_gain", "intrinsic_gain", "phase_margin"), SIGNAL
    ),
    "supply_current": BIAS,
}
"""Kinds of the demands that share one with others."""


def list_goals(
    demands: Mapping[str, Requirement], choices: Choices, matching: Mapping[str, Matching]
) -> tuple[Goal, ...]:
    """List what a plan has to reach.

    Parameters
    ----------
    demands : mapping of str to Requirement
        By name; a name that no goal has is left to the final judgement.
    choices : Choices
        The margins to keep.
    matching : mapping of str to Matching
        Mismatch by device.

    Returns
    -------
    tuple of Goal
        Standing rules first.

    Examples
    --------
    >>> goals = list_goals({"gbw": Requirement(20e6)}, Choices(), {})
    >>> [goal.name for goal in goals][-2:]
    ['common_mode_speed', 'gbw']
    """
    keep = choices.saturation_margin
    least, most = SMALLEST_SHARE, LARGEST_SHARE
    goals = [
        Goal("saturation", lambda found: _TENTH_PER_VOLT * (found.saturation - keep), True),
        Goal(
            "common_mode_error",
            lambda found: (
                _TENTH_PER_VOLT * (LARGEST_COMMON_MODE_ERROR - np.abs(found.settled_error))
            ),
            True,
        ),
        Goal(
            "balance",
            lambda found: np.minimum(_ratio(found.balance, least), _ratio(most, found.balance)),
            True,
        ),
        Goal(
            "common_mode_phase_margin",
            lambda found: (probe_loop(found)[1] - choices.common_mode_phase_margin) * _RADIAN,
            kind=LOOP,
        ),
        Goal(
            "common_mode_speed",
            lambda found: _ratio(probe_loop(found)[0], _LEAST_SPEED * found.signal.gbw),
            kind=LOOP,
        ),
    ]
    for name, demand in demands.items():
        goal = _list_demand(name, demand, choices, matching)
        if goal is not None:
            goals.append(goal)
    return tuple(goals)


def _list_demand(
    name: str, demand: Requirement, choices: Choices, matching: Mapping[str, Matching]
) -> Goal | None:
    value = demand.value
    least: dict[str, Callable[[Prediction], Array]] = {
        "gbw": lambda found: found.signal.gbw,
        "gm_total": lambda found: found.signal.gm_total,
        "excess_pole": lambda found: found.signal.excess_pole,
        "slew_rate": lambda found: probe_slew(found, value),
        "output_current": _output_current,
    }
    if name in least:
        read = least[name]
        return Goal(name, lambda found: _ratio(read(found), value), kind=_KINDS.get(name, name))
    others: dict[str, Callable[[Prediction], Array]] = {
        "dc_gain": lambda found: (found.signal.dc_gain_db - value) * _DECIBEL,
        "intrinsic_gain": lambda found: (
            (to_db(found.signal.gm_total / found.signal.output_conductance) - value) * _DECIBEL
        ),
        "phase_margin": lambda found: (found.signal.phase_margin - value) * _RADIAN,
        "swing": lambda found: probe_swing(found, value, choices.saturation_margin),
        "input_noise": lambda found: _ratio(value, _noise(found, demand)),
        "offset": lambda found: _ratio(value, found.offset(matching).sigma),
        "common_mode_gain": lambda found: (value - _common_mode_gain(found)) * _DECIBEL,
        "supply_current": lambda found: _ratio(value, found.supply_current),
    }
    if name not in others:
        return None
    return Goal(name, others[name], kind=_KINDS.get(name, name))


def _ratio(larger: Array | float, smaller: Array | float) -> Array:
    """Give ln of a ratio of magnitudes; something far below zero where there is none."""
    with np.errstate(divide="ignore", invalid="ignore"):
        found = np.log(np.asarray(larger, dtype=np.float64) / smaller)
    return np.where(np.isfinite(found), np.maximum(found, _WORST), np.where(found > 0, 9.0, _WORST))


def _noise(found: Prediction, demand: Requirement) -> Array:
    assert demand.at is not None
    return found.noise([demand.at]).input_density[..., 0]


def _common_mode_gain(found: Prediction) -> Array:
    return to_db(found.common_mode.input_to_output_peak)


def _output_current(found: Prediction) -> Array:
    out, into = output_currents(found, OVERDRIVE)
    return np.minimum(out, into)


def measure_margins(
    found: Prediction, goals: tuple[Goal, ...], watch: NDArray[np.bool_] | None = None
) -> Array:
    """Measure margins of a prediction.

    Parameters
    ----------
    found : Prediction
        Of many candidates.
    goals : tuple of Goal
        What to reach.
    watch : ndarray of bool, shape (points, goals), optional
        What to measure at each place on the last axis, everything by default; the others come
        out infinite.

    Returns
    -------
    ndarray, shape (..., goals)
        Negative where missed; none below -10.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.predicting import predict
    >>> found = predict(example_plan(), example_devices(), example_supply())
    >>> goals = list_goals({"gbw": Requirement(1e6)}, Choices(common_mode_phase_margin=50.0), {})
    >>> margins = measure_margins(found, goals)
    >>> margins.shape, bool((margins > 0).all())
    ((3, 6), True)
    """
    asked = np.ones((1, len(goals)), dtype=bool) if watch is None else watch
    asked = np.broadcast_to(asked, (found.batch[-1] if found.batch else 1, len(goals)))
    rows = np.full((*found.batch, len(goals)), np.inf)
    for kind in dict.fromkeys(goal.kind for goal in goals):
        ours = [k for k, goal in enumerate(goals) if goal.kind == kind]
        points = np.flatnonzero(asked[:, ours].any(axis=1))
        everywhere = kind == BIAS or points.size == len(asked)
        there = found if everywhere else found.take_last(points)
        for k in ours if points.size else ():
            margin = goals[k].margin(there) - RESERVE
            margin = np.where(np.isnan(margin), _WORST, np.maximum(margin, _WORST))
            if everywhere:
                rows[..., k] = np.where(asked[:, k], margin, np.inf) if found.batch else margin
            else:
                rows[..., points, k] = np.where(asked[points, k], margin, np.inf)
    return rows
