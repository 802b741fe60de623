"""What is judged: each check of an amplifier, in every condition and at every supply.

Performance is judged at the nominal reference current; saturation, balance and the settled
common mode also at the ends of the reference's tolerance.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier.plan import Choices, Matching, Requirement
from gmid.amplifier.predicting import predict
from gmid.amplifier.prediction import Prediction
from gmid.amplifier.signal import to_db
from gmid.amplifier.slewing import OVERDRIVE, output_currents
from gmid.condition import Condition
from gmid.errors import UnknownName, advise

Array = NDArray[np.float64]

LARGEST_COMMON_MODE_ERROR = 5e-3
"""By which the outputs may settle off their reference [V]."""

SMALLEST_SHARE, LARGEST_SHARE = 0.05, 0.5
"""Current of `control` over that of `direct`: outside, the common-mode loop lets go [-]."""


@dataclass(frozen=True)
class Kind:
    """A check: its unit, which side is good, and how it is measured.

    Parameters
    ----------
    name : str
        Name of the demand or of the house rule.
    unit : str
        SI unit; ``dB`` and ``deg`` as such.
    is_least : bool
        Whether larger is better.
    measure : callable
        From prediction, requirement and matching to the values, of the batch's shape.

    Examples
    --------
    >>> KINDS["gbw"].is_least
    True
    """

    name: str
    unit: str
    is_least: bool
    measure: Callable[[Prediction, Requirement, Mapping[str, Matching]], Array]

    def margin(self, achieved: Array, required: float) -> Array:
        """Measure how far a value is inside, relative to what is required.

        Parameters
        ----------
        achieved : ndarray, shape (...)
            Values in `unit`.
        required : float
            The bound.

        Returns
        -------
        ndarray, shape (...)
            Negative where it is missed; not-a-number counts as wholly missed [-].

        Examples
        --------
        >>> float(KINDS["gbw"].margin(np.array(22e6), 20e6).round(3))
        0.1
        """
        value = np.asarray(achieved, dtype=np.float64)
        with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
            ratio = 10 ** ((value - required) / 20) if self.unit == "dB" else value / required
            found = ratio - 1 if self.is_least else 1 - ratio
        return np.where(np.isnan(found), -1.0, found)


def _largest_noise(found: Prediction, wanted: Requirement) -> Array:
    assert wanted.at is not None
    return np.asarray(found.noise([wanted.at]).input_density[..., 0])


def _output_current(found: Prediction) -> Array:
    """Least of what the two outputs deliver with the tail switched to one side."""
    return np.minimum(*output_currents(found, OVERDRIVE))


KINDS = {
    kind.name: kind
    for kind in (
        Kind("dc_gain", "dB", True, lambda p, r, m: p.signal.dc_gain_db),
        Kind("gbw", "Hz", True, lambda p, r, m: p.signal.gbw),
        Kind("phase_margin", "deg", True, lambda p, r, m: p.signal.phase_margin),
        Kind("swing", "V", True, lambda p, r, m: p.output_swing().peak),
        Kind("input_noise", "V/rtHz", False, lambda p, r, m: _largest_noise(p, r)),
        Kind("slew_rate", "V/s", True, lambda p, r, m: p.slew_rate),
        Kind("gm_total", "S", True, lambda p, r, m: p.signal.gm_total),
        Kind(
            "intrinsic_gain", "dB", True,
            lambda p, r, m: to_db(p.signal.gm_total / p.signal.output_conductance),
        ),
        Kind("excess_pole", "Hz", True, lambda p, r, m: p.signal.excess_pole),
        Kind("output_current", "A", True, lambda p, r, m: _output_current(p)),
        Kind(
            "common_mode_gain", "dB", False,
            lambda p, r, m: 20 * np.log10(p.common_mode.input_to_output_peak),
        ),
        Kind("offset", "V", False, lambda p, r, m: p.offset(m).sigma),
        Kind("supply_current", "A", False, lambda p, r, m: p.supply_current),
        Kind("saturation", "V", True, lambda p, r, m: p.saturation),
        Kind("smallest_control_share", "", True, lambda p, r, m: p.balance),
        Kind("largest_control_share", "", False, lambda p, r, m: p.balance),
        Kind("common_mode_phase_margin", "deg", True, lambda p, r, m: p.loop_margin),
        Kind("common_mode_error", "V", False, lambda p, r, m: np.abs(p.settled_error)),
    )
}  # fmt: skip
"""Every check of an amplifier by name, in the order of a sheet."""

BIAS_CHECKS = ("saturation", "smallest_control_share", "largest_control_share", "common_mode_error")
"""Checks that also count at the ends of the reference current's tolerance."""


@dataclass(frozen=True)
class Check:
    """One requirement, and the worst that was found.

    Parameters
    ----------
    name : str
        A key of `KINDS`, or a check of the filter.
    required, achieved : float
        In `unit`; `achieved` is the worst.
    unit : str
        SI unit.
    condition : str
        Corner, temperature and supply of the worst, such as ``ss/125/1.62``.
    margin : float
        Relative to what is required; negative when missed [-].
    met : bool
        Whether it holds everywhere.
    because : str
        Where it comes from.

    Examples
    --------
    >>> Check("gbw", 20e6, 22e6, "Hz", "ss/125/1.62", 0.1, True).met
    True
    """

    name: str
    required: float
    achieved: float
    unit: str
    condition: str
    margin: float
    met: bool
    because: str = ""


def list_requirements(
    demands: Mapping[str, Requirement], choices: Choices
) -> dict[str, Requirement]:
    """List everything an amplifier is judged by: its demands, then the rules of the house.

    Parameters
    ----------
    demands : mapping of str to Requirement
        Of the plan.
    choices : Choices
        Margins to keep.

    Returns
    -------
    dict of str to Requirement
        By check, in the order of `KINDS`.

    Raises
    ------
    UnknownName
        If a demand is not known.

    Examples
    --------
    >>> list(list_requirements({"gbw": Requirement(1e6)}, Choices()))[:2]
    ['gbw', 'saturation']
    """
    rules = {
        "saturation": Requirement(choices.saturation_margin, because="margin of saturation"),
        "smallest_control_share": Requirement(SMALLEST_SHARE, because="the common-mode loop holds"),
        "largest_control_share": Requirement(LARGEST_SHARE, because="the common-mode loop holds"),
        "common_mode_phase_margin": Requirement(
            choices.common_mode_phase_margin, because="the common-mode loop settles"
        ),
        "common_mode_error": Requirement(
            LARGEST_COMMON_MODE_ERROR, because="outputs stay at their reference"
        ),
    }
    for name in demands:
        if name not in KINDS:
            raise UnknownName(f"{name!r} is not a demand.", hint=advise(name, KINDS))
    wanted = {**rules, **demands}
    return {name: wanted[name] for name in KINDS if name in wanted}


def measure_margins(
    found: Prediction,
    requirements: Mapping[str, Requirement],
    *,
    matching: Mapping[str, Matching] | None = None,
    saturation_margin: float = 0.05,
) -> dict[str, tuple[Array, Array]]:
    """Measure every check of a prediction, for all candidates and supplies.

    Parameters
    ----------
    found : Prediction
        The amplifier in one condition.
    requirements : mapping of str to Requirement
        Of `list_requirements`, or some of them.
    matching : mapping of str to Matching, optional
        For `offset`.
    saturation_margin : float
        That the output swing must keep [V].

    Returns
    -------
    dict of str to (ndarray, ndarray), shape (...)
        Achieved values and relative margins by check.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> found = predict(example_plan(), example_devices(), example_supply())
    >>> achieved, margin = measure_margins(found, {"gbw": Requirement(20e6)})["gbw"]
    >>> margin.shape, bool((margin > 0).all())
    ((3,), True)
    """
    measured = {}
    for name, wanted in requirements.items():
        kind = KINDS[name]
        if name == "swing":
            values = found.output_swing(saturation_margin).peak
        else:
            values = kind.measure(found, wanted, matching or {})
        values = np.broadcast_to(values, found.batch)
        measured[name] = (values, kind.margin(values, wanted.value))
    return measured


def judge(
    predictions: Sequence[Prediction],
    choices: Choices,
    *,
    demands: Mapping[str, Requirement] | None = None,
    matching: Mapping[str, Matching] | None = None,
) -> tuple[Check, ...]:
    """Judge one amplifier in all of its conditions.

    Parameters
    ----------
    predictions : sequence of Prediction
        One a condition, or one of all conditions; of the same plan, a single candidate at its
        supplies.
    choices : Choices
        Margins to keep.
    demands : mapping of str to Requirement, optional
        Those of the plan by default.
    matching : mapping of str to Matching, optional
        For `offset`.

    Returns
    -------
    tuple of Check
        In the order of `KINDS`, each with the worst that was found.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> found = predict(example_plan(), example_devices(), example_supply())
    >>> choices = Choices(common_mode_phase_margin=80.0)
    >>> [check.name for check in judge([found], choices) if not check.met]
    ['common_mode_phase_margin']
    """
    plan = predictions[0].plan
    requirements = list_requirements(plan.demands if demands is None else demands, choices)
    worst: dict[str, tuple[float, float, str]] = {}
    for found in dict.fromkeys(one.origin[0] if one.origin else one for one in predictions):
        for case in (found, *_at_reference_ends(found)):
            wanted = requirements if case is found else _only_bias(requirements)
            measured = measure_margins(
                case, wanted, matching=matching, saturation_margin=choices.saturation_margin
            )
            for name, (values, margins) in measured.items():
                index = int(np.argmin(margins))
                margin = float(margins.ravel()[index])
                if name not in worst or margin < worst[name][0]:
                    worst[name] = (margin, float(values.ravel()[index]), spell_item(case, index))
    return tuple(
        Check(
            name, wanted.value, worst[name][1], KINDS[name].unit, worst[name][2], worst[name][0],
            worst[name][0] >= 0, wanted.because,
        )
        for name, wanted in requirements.items()
    )  # fmt: skip


def spell_condition(condition: Condition, voltage: float) -> str:
    """Write condition and supply as checks name them.

    Parameters
    ----------
    condition : Condition
        Corner and temperature.
    voltage : float
        Supply [V].

    Returns
    -------
    str
        Such as ``ss/125/1.62``.

    Examples
    --------
    >>> spell_condition(Condition("ss", 125.0), 1.62)
    'ss/125/1.62'
    """
    return str(condition.with_supply(voltage))


def spell_item(found: Prediction, index: int) -> str:
    """Write condition and supply of an item of a prediction's batch.

    Parameters
    ----------
    found : Prediction
        In one condition or several.
    index : int
        Place on the flat batch.

    Returns
    -------
    str
        Such as ``ss/125/1.62``.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> spell_item(predict(example_plan(), example_devices(), example_supply()), 2)
    'tt/27/1.98'
    """
    condition = found.bias.equations.condition_of(index)
    assert condition is not None
    return spell_condition(
        condition, float(np.broadcast_to(found.voltage, found.batch).ravel()[index])
    )


def _only_bias(requirements: Mapping[str, Requirement]) -> dict[str, Requirement]:
    return {name: requirements[name] for name in BIAS_CHECKS if name in requirements}


def _at_reference_ends(found: Prediction) -> list[Prediction]:
    """Solve again with the smallest and the largest reference current."""
    tolerance = found.supply.reference_tolerance
    if tolerance == 0:
        return []
    ends = 1.0 + tolerance * np.array([-1.0, 1.0]).reshape(2, *(1,) * len(found.batch))
    return [
        predict(
            found.plan, found.devices, found.supply, voltage=found.voltage, start=found.bias,
            reference_current=found.reference_current * ends,
        )
    ]  # fmt: skip
