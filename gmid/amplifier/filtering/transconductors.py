"""Gm-C filters made of multiples of one transconductor.

Transconductances come in whole multiples of a unit, so their ratios are not quite those that the
sections ask for; the capacitors then put every pole back. What is left is a flat gain and the
levels inside.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np

from gmid.amplifier.filtering.counting import LARGEST_MULTIPLE
from gmid.amplifier.filtering.positions import make_model, place_plans
from gmid.amplifier.plan import AmplifierPlan, Supply
from gmid.amplifier.predicting import predict
from gmid.device.device import Device
from gmid.errors import DataFault
from gmid.filters.elements import AmplifierModel
from gmid.filters.levels import absorb_parasitics
from gmid.filters.realisation import Realisation
from gmid.filters.sections import Section

_CLOSE = 0.06  # of a ratio, what the capacitors take up without moving levels much


def choose_multiples(realisation: Realisation) -> dict[str, int]:
    """Choose whole multiples whose ratios are near those of the transconductances.

    Parameters
    ----------
    realisation : Realisation
        A gm-c filter.

    Returns
    -------
    dict of str to int
        By position: the fewest units with every ratio within 6 %, else the nearest.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, realise
    >>> spec = FilterSpec(response="butterworth", order=2, edge=1e6, style="gm-c")
    >>> sorted(choose_multiples(realise(spec, capacitor=1e-12)).values())
    [1, 1, 2, 2]
    """
    places = realisation.amplifiers
    wanted = np.array([realisation.find(str(place.element)).value for place in places])
    tried = []
    for most in range(1, LARGEST_MULTIPLE + 1):
        for unit in np.unique(wanted / most):
            counts = np.maximum(np.round(wanted / unit), 1)
            if counts.max() > LARGEST_MULTIPLE:
                continue
            ratio = np.log(counts / wanted)
            error = float(np.ptp(ratio) / 2)
            tried.append((max(error, _CLOSE), counts.sum(), error, tuple(counts.astype(int))))
    best = min(tried)[-1]
    return {place.name: int(m) for place, m in zip(places, best, strict=True)}


def fit_elements(
    realisation: Realisation, multiples: Mapping[str, int], unit: float, *,
    models: Mapping[str, AmplifierModel] | None = None,
) -> Realisation:  # fmt: skip
    """Give the transconductances their multiples of a unit, and the capacitors what that asks.

    Parameters
    ----------
    realisation : Realisation
        A gm-c filter with its wanted sections.
    multiples : mapping of str to int
        Units by position.
    unit : float
        Transconductance of one unit [S].
    models : mapping of str to AmplifierModel, optional
        Their capacitances are taken off the capacitors.

    Returns
    -------
    Realisation
        Poles where the sections want them.

    Raises
    ------
    DataFault
        If the amplifiers or the load bring more capacitance than a node may have.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, realise
    >>> spec = FilterSpec(response="butterworth", order=1, edge=1e6, style="gm-c")
    >>> made = realise(spec, capacitor=1e-12)
    >>> fitted = fit_elements(made, {"A1": 1, "A2": 1}, 10e-6)
    >>> round(fitted.find("C1_a").value * 1e12, 3)
    1.592
    """
    gms = {str(place.element): unit * multiples[place.name] for place in realisation.amplifiers}
    values = dict(gms)
    for number, section in enumerate(realisation.sections, start=1):
        for name, wanted in _find_capacitors(number, section, gms, realisation).items():
            rest = wanted - realisation.find(name).absorbed
            if rest < 0:
                raise DataFault(
                    f"the load brings more than the {wanted:.4g} F of {name}.",
                    where="filter.load_capacitance", hint="Ask for more signal-to-noise ratio.",
                )  # fmt: skip
            values[name] = rest
    level = realisation.capacitor * unit / find_unit(realisation, multiples)
    made = replace(realisation.with_values(values), capacitor=level)
    return made if models is None else absorb_parasitics(made, models)


def refit_elements(
    realisation: Realisation, plans: Sequence[AmplifierPlan], devices: Mapping[str, Device],
    supply: Supply,
) -> Realisation:  # fmt: skip
    """Give a gm-c filter the elements that it was sized with, from its amplifiers.

    Parameters
    ----------
    realisation : Realisation
        Its sections at the capacitor that sizing chose.
    plans : sequence of AmplifierPlan
        With positions and multiples.
    devices : mapping of str to Device
        Of the nominal condition.
    supply : Supply
        What the amplifiers are fed with; its middle counts.

    Returns
    -------
    Realisation
        Transconductances in the ratios of the multiples, own capacitances taken off.

    Raises
    ------
    DataFault
        If a position has no amplifier or two, or a node too much capacitance.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.filters import FilterSpec, realise
    >>> spec = FilterSpec(response="butterworth", order=1, edge=1e6, style="gm-c")
    >>> made = realise(spec, capacitor=20e-12)
    >>> plan = replace(example_plan(), positions=("A1", "A2"))
    >>> found = refit_elements(made, [plan], example_devices(), example_supply())
    >>> bool(19e-12 < found.find("C1_a").value < 20e-12)
    True
    """
    placed = place_plans(plans, realisation)
    multiples = {name: plan.multiple for name, plan in placed.items()}
    alone: dict[str, AmplifierModel] = {}
    for plan in plans:
        model = make_model([predict(plan, devices, supply, voltage=supply.voltage)])
        values = {name: float(np.ravel(value)[0]) for name, value in vars(model).items()}
        alone[plan.name] = AmplifierModel(**values)
    models = {name: alone[plan.name] for name, plan in placed.items()}
    return fit_elements(realisation, multiples, find_unit(realisation, multiples), models=models)


def find_unit(realisation: Realisation, multiples: Mapping[str, int]) -> float:
    """Find the unit that the transconductances of a filter are multiples of, on average.

    Parameters
    ----------
    realisation : Realisation
        A gm-c filter.
    multiples : mapping of str to int
        By position.

    Returns
    -------
    float
        [S].

    Examples
    --------
    >>> from gmid.filters import FilterSpec, realise
    >>> spec = FilterSpec(response="butterworth", order=2, edge=1e6, style="gm-c")
    >>> made = realise(spec, capacitor=4e-12)
    >>> 1e-6 < find_unit(made, choose_multiples(made)) < 1e-3
    True
    """
    ratios = [
        realisation.find(str(place.element)).value / multiples[place.name]
        for place in realisation.amplifiers
    ]
    return float(np.exp(np.mean(np.log(ratios))))


def _find_capacitors(
    number: int, section: Section, gms: Mapping[str, float], realisation: Realisation
) -> dict[str, float]:
    """Find the capacitors of a section from its transconductances [F]."""
    known = {element.name for element in realisation.elements}
    if section.q is None:
        whole, letter = gms[f"G{number}_f"] / section.w0, "a"
        rest: dict[str, float] = {}
    else:
        damping = gms[f"G{number}_q"]
        whole, letter = damping * section.q / section.w0, "b"
        loop = gms[f"G{number}_ab"] * gms[f"G{number}_ba"]
        rest = {f"C{number}_a": loop / (section.w0**2 * whole)}
    feed = abs(section.numerator[0])
    found = {**rest, f"C{number}_{letter}": whole * (1.0 - feed)}
    if f"C{number}_in_{letter}" in known:
        found[f"C{number}_in_{letter}"] = whole * feed
    return found
