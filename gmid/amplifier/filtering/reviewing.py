"""A filter with its amplifiers judged: every condition, supply and corner of the passives.

Tuned means that the capacitor bank makes up for the resistors (in gm-c for the transconductance
of the condition), so low R stands with high C; untuned is how the filter comes out of the process.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier.checks import Check, spell_condition
from gmid.amplifier.filtering.distortion import find_amplitude, measure_harmonic
from gmid.amplifier.filtering.realised import RealisedFilter, realise_everywhere
from gmid.amplifier.filtering.responses import FilterResponse, collect_responses, find_corners
from gmid.amplifier.plan import AmplifierPlan, Supply
from gmid.condition import Condition
from gmid.device.device import Device
from gmid.filters.demand_types import FilterDemands

Array = NDArray[np.float64]
Bench = Iterable[tuple[Condition, Mapping[str, Device]]]
"""Conditions and the devices of each."""

Cases = Iterable[tuple[RealisedFilter, Mapping[str, Device]]]
"""A filter solved in every condition, and the devices of each."""

Progress = Callable[[str], None]


@dataclass(frozen=True, eq=False)
class FilterReview:
    """A whole filter, judged.

    Parameters
    ----------
    checks : tuple of Check
        `passband stopband delay snr distortion damping common_mode_damping`, each
        where it is asked for, with the worst that was found.
    responses : tuple of FilterResponse
        At nominal supply, by condition.
    supply_current : float
        Of all amplifiers at the first condition, nominal supply [A].
    largest_current : float
        The largest in any condition at any supply [A].
    noise_shares : dict of str to float
        Part of the output's noise power from each element and amplifier, at the first condition
        [-]; empty without a noise band.
    node_voltages : dict of str to float
        Of every node at the first condition, nominal supply [V].

    Examples
    --------
    >>> FilterReview((), ()).is_met
    True
    """

    checks: tuple[Check, ...]
    responses: tuple[FilterResponse, ...]
    supply_current: float = 0.0
    largest_current: float = 0.0
    noise_shares: dict[str, float] = field(default_factory=dict)
    node_voltages: dict[str, float] = field(default_factory=dict)

    @property
    def is_met(self) -> bool:
        """Whether every check holds."""
        return all(check.met for check in self.checks)

    def find(self, name: str) -> Check | None:
        """Return a check by its name.

        Parameters
        ----------
        name : str
            Such as ``passband``.

        Returns
        -------
        Check or None
            None where it was not asked for.
        """
        return next((check for check in self.checks if check.name == name), None)


@dataclass(frozen=True)
class _Limit:
    """A check that is being made."""

    required: float
    unit: str
    because: str
    is_least: bool = False

    def margin(self, value: float) -> float:
        if not np.isfinite(value):
            return 9.0 if (value > 0) == self.is_least and not np.isnan(value) else -1.0
        if self.unit == "dB" and abs(self.required) > 5.0:
            found = 10 ** ((value - self.required) / 20)
            return found - 1 if self.is_least else 1 - found
        scale = self.required if self.required else 1.0
        return (value - self.required) / scale if self.is_least else (self.required - value) / scale


def review_filter(
    found: FilterDemands, plans: Sequence[AmplifierPlan], bench: Bench, supply: Supply, *,
    progress: Progress | None = None, cases: Cases | None = None,
) -> FilterReview:  # fmt: skip
    """Put the amplifiers into their filter and judge it.

    Parameters
    ----------
    found : FilterDemands
        Filter, tolerance and budget.
    plans : sequence of AmplifierPlan
        Distinct amplifiers with their positions.
    bench : iterable of (Condition, mapping of str to Device)
        Conditions and devices.
    supply : Supply
        What the amplifiers are fed with; low, nominal and high voltage all count.
    progress : callable, optional
        Told each condition.
    cases : iterable of (RealisedFilter, mapping of str to Device), optional
        The filter with these amplifiers in every condition, where it is solved already.

    Returns
    -------
    FilterReview
        Checks and responses.

    Raises
    ------
    DataFault
        If a position has no amplifier, or two.

    Examples
    --------
    >>> from dataclasses import replace
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.filters import FilterSpec, Tolerance
    >>> from gmid.filters.demand import demands_of
    >>> spec = FilterSpec(response="butterworth", order=1, edge=200e3, capacitor=2e-12)
    >>> found = demands_of(spec, Tolerance(passband_db=0.5, counts="tuned-shape"))
    >>> plan = replace(example_plan(), positions=("A1",))
    >>> devices = example_devices()
    >>> condition = devices["nmos"].condition
    >>> review = review_filter(found, [plan], [(condition, devices)], example_supply())
    >>> [check.name for check in review.checks], review.is_met
    (['passband', 'damping', 'common_mode_damping'], True)
    """
    from gmid.amplifier.filtering.positions import place_plans

    by_position = place_plans(plans, found.realisation)
    limits = _list_limits(found)
    worst: dict[str, tuple[float, float, str]] = {}
    responses: list[FilterResponse] = []
    first: RealisedFilter | None = None
    shares: dict[str, float] = {}
    largest = 0.0
    if cases is None:
        cases = realise_everywhere(found.realisation, by_position, bench, supply)
    for case, devices in cases:
        if progress is not None:
            progress(f"filter in {case.condition}")
        first = first or case
        measured, part = _measure(found, case, devices, supply)
        responses += collect_responses(found, case)
        shares = shares or part
        largest = max(largest, float(case.supply_current.max()))
        for name, values in measured.items():
            _keep_worst(worst, name, values, limits[name], case)
    assert first is not None, "a bench has a condition"
    middle = first.voltage.size // 2
    checks = tuple(
        Check(name, limit.required, worst[name][1], limit.unit, worst[name][2], worst[name][0],
              worst[name][0] >= 0, limit.because)
        for name, limit in limits.items()
    )  # fmt: skip
    nodes = {
        node: float(np.broadcast_to(value, first.voltage.shape).ravel()[middle])
        for node, value in first.node_voltages.items()
    }
    return FilterReview(
        checks, tuple(responses), float(first.supply_current.ravel()[middle]), largest, shares,
        nodes,
    )  # fmt: skip


def _keep_worst(
    worst: dict[str, tuple[float, float, str]], name: str, values: Array, limit: _Limit,
    case: RealisedFilter,
) -> None:  # fmt: skip
    """Keep a value if its margin is the least so far; supplies are the last axis."""
    margins = np.array([limit.margin(float(value)) for value in values.ravel()])
    k = int(np.argmin(margins))
    if name not in worst or margins[k] < worst[name][0]:
        voltage = np.broadcast_to(case.voltage, values.shape).ravel()[k]
        where = spell_condition(case.condition, float(voltage))
        worst[name] = (float(margins[k]), float(values.ravel()[k]), where)


def _list_limits(found: FilterDemands) -> dict[str, _Limit]:
    spec, tolerance, budget = found.spec, found.tolerance, found.budget
    usable = budget.passband_db - budget.tuning_db - budget.mismatch_db
    taken = f"; {budget.describe()}" if budget.tuning_bits or budget.mismatch_db else ""
    limits = {
        "passband": _Limit(
            usable, "dB", f"largest deviation from the ideal response, {tolerance.counts}{taken}"
        )
    }
    if np.any(np.isfinite(found.point.worst.stopband_db)):
        limits["stopband"] = _Limit(tolerance.stopband_db, "dB", "what the attenuation may lose")
    if tolerance.delay is not None:
        limits["delay"] = _Limit(tolerance.delay, "", "relative deviation of the group delay")
    if spec.snr_db is not None:
        limits["snr"] = _Limit(
            spec.snr_db, "dB", f"a sine of {spec.swing:g} V over the noise in the band", True
        )
    if spec.swing is not None and spec.harmonic_limit_db is not None:
        limits["distortion"] = _Limit(
            spec.harmonic_limit_db, "dB",
            f"third harmonic at {spec.harmonic_frequency:.4g} Hz, {spec.swing:g} V at the largest "
            "node",
        )  # fmt: skip
    limits["damping"] = _Limit(
        0.0, "", "damping ratio of the least damped pole, in untuned corners as well", True
    )
    limits["common_mode_damping"] = _Limit(
        0.0, "", "likewise of what is common to both sides, which does not see crossed wires", True
    )
    return limits


def _measure(
    found: FilterDemands, case: RealisedFilter, devices: Mapping[str, Device], supply: Supply
) -> tuple[dict[str, Array], dict[str, float]]:
    """Measure all that is judged, with an axis of corners in front of the supplies."""
    spec = found.spec
    tuned, free = find_corners(found, case)
    stick = found.plane.dense
    deviation = stick.measure(case.respond(stick.frequency, rscale=tuned.rscale,
                                           cscale=tuned.cscale))  # fmt: skip
    measured = {"passband": deviation.passband_db, "stopband": deviation.stopband_db,
                "delay": deviation.delay}  # fmt: skip
    shares: dict[str, float] = {}
    if spec.snr_db is not None and spec.swing is not None and spec.noise_band is not None:
        noise = case.noise(spec.noise_band, rscale=tuned.rscale, cscale=tuned.cscale)
        measured["snr"] = noise.snr_db(spec.swing)
        power = noise.power[0].ravel()
        middle = power.size // 2
        shares = {
            name: float(np.broadcast_to(value, noise.power.shape)[0].ravel()[middle]
                        / power[middle])
            for name, value in noise.shares.items()
        }  # fmt: skip
    if spec.swing is not None and spec.harmonic_limit_db is not None:
        measured["distortion"] = measure_harmonic(
            case, devices, supply, frequency=spec.harmonic_frequency,
            amplitude=find_amplitude(case, spec.swing),
        ).decibels  # fmt: skip
    for name, common in (("damping", False), ("common_mode_damping", True)):
        poles = case.poles(rscale=free.rscale, cscale=free.cscale, common_mode=common)
        with np.errstate(invalid="ignore", divide="ignore"):
            measured[name] = np.nanmin(-poles.real / np.abs(poles), axis=-1)
    limits = _list_limits(found)
    return {name: np.asarray(value) for name, value in measured.items() if name in limits}, shares
