"""From the demands of a filter to one amplifier: alike at all positions, or in multiples.

All counts times m keep bias and gain, scale transconductance and currents by m, and divide what
the load needs; so one base amplifier serves positions that differ.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np

from gmid.amplifier.filtering.counting import Efficiency, choose_counts
from gmid.amplifier.plan import AmplifierPlan, Requirement
from gmid.filters.demand_types import Demand, FilterDemands

LEAST_LOAD = 1e-15
"""Load of an output that drives nothing but its own feedback: no plan has none at all [F]."""


@dataclass(frozen=True)
class Grouping:
    """A base amplifier and how many of it each position takes.

    Parameters
    ----------
    multiples : dict of str to int
        By position.
    demands : dict of str to Requirement
        On the base amplifier.
    load_capacitance, load_resistance : float
        Of one base amplifier: the least of all positions [F], [ohm].
    cost : float
        Estimate of the total supply current [A].
    least_share : float
        Part of a gm-c transconductance that its worst condition must have; tuning makes up for
        the rest [-].
    largest_load : float
        Of one base amplifier: the largest capacitance of all positions [F].

    Examples
    --------
    >>> Grouping({"A1": 1, "A2": 3}, {}, 1e-12, 1e5, 1e-4).distinct
    (1, 3)
    """

    multiples: dict[str, int]
    demands: dict[str, Requirement]
    load_capacitance: float
    load_resistance: float
    cost: float
    least_share: float = 1.0
    largest_load: float = float("nan")

    @property
    def distinct(self) -> tuple[int, ...]:
        """The multiples that occur, ascending."""
        return tuple(sorted(set(self.multiples.values())))


def group_positions(
    found: FilterDemands, *, efficiency: Efficiency | None = None, alike: bool = False
) -> Grouping:
    """Choose the multiples of least total current.

    Parameters
    ----------
    found : FilterDemands
        Demands of all positions.
    efficiency : Efficiency, optional
        Of the amplifier, as far as it is known.
    alike : bool
        One amplifier for all.

    Returns
    -------
    Grouping
        Multiples, and what the base amplifier must meet.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, Tolerance
    >>> from gmid.filters.demand import demands_of
    >>> spec = FilterSpec(response="butterworth", order=2, edge=1e6, capacitor=2e-12)
    >>> found = demands_of(spec, Tolerance(passband_db=0.2, counts="tuned-shape"))
    >>> group_positions(found, alike=True).multiples
    {'A1': 1, 'A2': 1}
    """
    known = efficiency or Efficiency()
    needs = np.array([known.need(demand) for demand in found.demands])
    names = [demand.position for demand in found.demands]
    cost, counts = choose_counts(needs, known.overhead, alike=alike)
    return regroup(found, dict(zip(names, counts, strict=True)), cost=cost)


def regroup(
    found: FilterDemands, multiples: dict[str, int], *, cost: float = float("nan"),
    least_share: float = 1.0,
) -> Grouping:  # fmt: skip
    """Find what the base amplifier must meet for given multiples.

    Parameters
    ----------
    found : FilterDemands
        Demands of all positions.
    multiples : dict of str to int
        Base amplifiers by position.
    cost : float
        Estimate of the total supply current, where there is one [A].
    least_share : float
        See `Grouping`.

    Returns
    -------
    Grouping
        With the least loads.

    Examples
    --------
    >>> regroup.__name__
    'regroup'
    """
    loads = share_loads(found, multiples)
    return Grouping(
        multiples, collect_requirements(found, multiples, least_share=least_share),
        max(LEAST_LOAD, min(c / multiples[name] for name, (c, _) in loads.items())),
        min(r * multiples[name] for name, (_, r) in loads.items()),
        cost, least_share,
        max(LEAST_LOAD, *(c / multiples[name] for name, (c, _) in loads.items())),
    )  # fmt: skip


def share_loads(
    found: FilterDemands, multiples: Mapping[str, int]
) -> dict[str, tuple[float, float]]:
    """Give each position its load on the bench.

    Transconductors that drive the same node of a gm-c filter share what it has, as their
    common-mode loops do.

    Parameters
    ----------
    found : FilterDemands
        Demands of all positions.
    multiples : mapping of str to int
        Base amplifiers by position.

    Returns
    -------
    dict of str to tuple of float
        Capacitance [F] and resistance [ohm] by position, own ones not counted.

    Examples
    --------
    >>> share_loads.__name__
    'share_loads'
    """
    outputs = {place.name: place.output for place in found.realisation.amplifiers}
    loads = {}
    for one in found.demands:
        here = multiples[one.position]
        same = [m for name, m in multiples.items() if outputs[name] == outputs[one.position]]
        part = here / sum(same)
        loads[one.position] = (
            one.load.bench_capacitance * part, one.load.bench_resistance / part,
        )  # fmt: skip
    return loads


def collect_requirements(
    found: FilterDemands, multiples: Mapping[str, int], *, least_share: float = 1.0
) -> dict[str, Requirement]:
    """Collect what one base amplifier must meet so that all positions are served.

    Parameters
    ----------
    found : FilterDemands
        Demands of all positions.
    multiples : mapping of str to int
        Base amplifiers by position; positions that it lacks do not count.
    least_share : float
        See `Grouping`.

    Returns
    -------
    dict of str to Requirement
        The hardest of each kind, with the position that asks for it in its reason.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, Tolerance
    >>> from gmid.filters.demand import demands_of
    >>> spec = FilterSpec(response="butterworth", order=1, edge=1e6, capacitor=2e-12)
    >>> found = demands_of(spec, Tolerance(passband_db=0.2, counts="tuned-shape"))
    >>> wanted = collect_requirements(found, {"A1": 2})
    >>> bool(2 * wanted["gm_total"].value == found.demands[0]["gm_total"].value)
    True
    """
    asked = [(one, multiples[one.position]) for one in found.demands if one.position in multiples]
    wanted: dict[str, Requirement] = {}
    # values of one unit: those that m units share are divided, those of each unit stay
    for name, power, hardest in (
        ("gm_total", -1.0, max), ("excess_pole", 0.0, max), ("output_current", -1.0, max),
        ("swing", 0.0, max), ("input_noise", 0.5, min), ("common_mode_gain", 0.0, min),
    ):  # fmt: skip
        values = [
            (one[name].value * m**power, one, m) for one, m in asked if name in one.requirements
        ]
        if values:
            value, one, m = hardest(values, key=lambda entry: entry[0])
            wanted[name] = _restate(name, value, one, m, found)
    wanted["dc_gain"] = _find_gain(asked, wanted["gm_total"].value)
    if least_share != 1.0:
        gm = wanted["gm_total"]
        wanted["gm_total"] = replace(
            gm, value=gm.value * least_share,
            because=f"{gm.because}; tuning makes up for the {100 * (1 - least_share):.3g} % that "
            "the worst condition has less",
        )  # fmt: skip
    return wanted


def _restate(name: str, value: float, one: Demand, m: int, found: FilterDemands) -> Requirement:
    """Give a requirement its unit of the amplifier's checks and the reason its position."""
    who = one.position if m == 1 else f"{one.position}, one of {m}"
    because = f"{who}: {one[name].because}"
    if name == "common_mode_gain":
        return Requirement(20 * float(np.log10(value)), because=because)
    if name == "input_noise":
        band = found.spec.noise_band
        assert band is not None, "a demand on noise comes from a band"
        return Requirement(value, at=find_noise_frequency(band), because=because)
    return Requirement(value, because=because)


def find_noise_frequency(band: tuple[float, float]) -> float:
    """Give the frequency whose noise density is the mean of a band, white and flicker noise.

    Parameters
    ----------
    band : tuple of float
        Its ends a and b [Hz].

    Returns
    -------
    float
        ``(b - a)/ln(b/a)``: at it ``1 + fc/f`` has its mean over the band [Hz].

    Examples
    --------
    >>> round(find_noise_frequency((1e3, 400e3)))
    66595
    """
    low, high = band
    low = max(low, 1e-6 * high)
    return float((high - low) / np.log(high / low))


def _find_gain(asked: list[tuple[Demand, int]], gm: float) -> Requirement:
    """Turn own output conductances into a gain with the least load resistance [dB]."""
    own, who = min((one["output_conductance"].value / m, one.position) for one, m in asked)
    load = max(1.0 / (one.load.bench_resistance * m) for one, m in asked)
    beside = f", beside the {1 / load:.4g} ohm that the output drives at least" if load else ""
    return Requirement(
        20 * float(np.log10(gm / (own + load))),
        because=f"{who}: own output conductance of {own:.3g} S at most{beside}",
    )


def make_plans(
    base: AmplifierPlan, grouping: Grouping, found: FilterDemands
) -> tuple[AmplifierPlan, ...]:
    """Make the distinct amplifiers of a filter from the base.

    Parameters
    ----------
    base : AmplifierPlan
        The base, of multiple 1.
    grouping : Grouping
        The multiples.
    found : FilterDemands
        Demands of all positions.

    Returns
    -------
    tuple of AmplifierPlan
        Named ``a1``, ``a2`` and so on, with positions, multiple, load and demands.

    Examples
    --------
    >>> make_plans.__name__
    'make_plans'
    """
    plans = []
    loads = share_loads(found, grouping.multiples)
    for k, multiple in enumerate(grouping.distinct, start=1):
        here = {name: multiple for name, m in grouping.multiples.items() if m == multiple}
        units = collect_requirements(found, here, least_share=grouping.least_share)
        plans.append(replace(
            base, name=f"a{k}", positions=tuple(here), multiple=multiple,
            load_capacitance=max(LEAST_LOAD * multiple, min(loads[name][0] for name in here)),
            load_resistance=min(loads[name][1] for name in here),
            demands={name: _multiply(name, one, multiple) for name, one in units.items()},
        ))  # fmt: skip
    return tuple(plans)


def _multiply(name: str, one: Requirement, multiple: int) -> Requirement:
    power = {"gm_total": 1.0, "output_current": 1.0, "input_noise": -0.5}.get(name, 0.0)
    return replace(one, value=one.value * multiple**power)
