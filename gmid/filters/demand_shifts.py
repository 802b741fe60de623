"""What real amplifiers do to w0 and Q of each section: exactly, and by the closed forms."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np

from gmid.filters.closed_forms import Shift, shift_at_pole
from gmid.filters.demand_loads import Load
from gmid.filters.demand_types import SectionShift
from gmid.filters.elements import AmplifierModel, Position
from gmid.filters.realisation import Realisation
from gmid.filters.sections import Section
from gmid.network import find_poles
from gmid.network.pencil import ComplexArray

Models = Mapping[str, AmplifierModel]
Places = Sequence[tuple[Position, Load]]


def find_shifts(
    realisation: Realisation, models: Models, loads: Sequence[Load]
) -> tuple[SectionShift, ...]:
    """Compare the exact shift of each section with its closed form.

    Parameters
    ----------
    realisation : Realisation
        The filter.
    models : mapping of str to AmplifierModel
        Real amplifiers, one for each position, without leading axes.
    loads : sequence of Load
        What each sees, in the order of the positions.

    Returns
    -------
    tuple of SectionShift
        One for each section.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, realise
    >>> from gmid.filters.demand_loads import find_loads
    >>> made = realise(FilterSpec(response="butterworth", order=2, edge=1e6), capacitor=2e-12)
    >>> model = AmplifierModel(gm_total=2e-3, output_conductance=2e-6)
    >>> found = find_shifts(made, {"A1": model, "A2": model}, find_loads(made))[0]
    >>> round(found.exact_frequency, 3), round(found.closed_frequency, 3)
    (-0.011, -0.011)
    """
    ideal, real = find_poles(realisation.network()), find_poles(realisation.network(models))
    return tuple(
        _compare(realisation, number, _realised(section, ideal), models, loads, real)
        for number, section in enumerate(realisation.sections, start=1)
    )


def _realised(section: Section, poles: ComplexArray) -> Section:
    """Return the section as its elements make it, rounding included."""
    pole = _nearest(section, poles)
    f0 = abs(pole) / (2 * np.pi)
    q = None if section.q is None else abs(pole) / (-2.0 * pole.real)
    return replace(section, f0=f0, q=q)


def _nearest(section: Section, poles: ComplexArray) -> complex:
    wanted = section.poles[np.argmax(section.poles.imag)]
    return complex(poles[np.argmin(np.abs(poles - wanted))])


def _compare(
    realisation: Realisation, number: int, section: Section, models: Models,
    loads: Sequence[Load], poles: ComplexArray,
) -> SectionShift:  # fmt: skip
    pole = _nearest(section, poles)
    places = [
        (place, load) for place, load in zip(realisation.amplifiers, loads, strict=True)
        if place.section == number
    ]  # fmt: skip
    if section.q is None:
        exact = abs(pole) / section.w0 - 1.0
        closed, trusted = _shift_first(realisation, section, places, models), abs(exact) < 0.3
        return SectionShift(number, section.f0, 0.0, exact, closed, 0.0, 0.0, trusted)
    shift = _shift_second(realisation, section, places, models)
    return SectionShift(
        number, section.f0, section.q, abs(pole) / section.w0 - 1.0, float(shift.frequency),
        abs(pole) / (-2.0 * pole.real), float(shift.shifted_q), shift.is_trusted,
    )  # fmt: skip


def _values(model: AmplifierModel) -> tuple[float, float, float]:
    assert model.gm_total is not None
    gm, go, pole = (
        float(np.asarray(value))
        for value in (model.gm_total, model.output_conductance, model.excess_pole)
    )
    return gm, go, 2 * np.pi * pole


def _shift_first(
    realisation: Realisation,
    section: Section,
    places: Sequence[tuple[Position, Load]],
    models: Models,
) -> float:
    if realisation.style == "gm-c":
        losses, lags = _find_gm_c_errors(realisation, places, models)
        size = section.w0 * places[0][1].accuracy_capacitance
        return sum(losses.values()) / size + section.w0 * lags["f"]
    place, load = places[0]
    gm, go, _ = _values(models[place.name])
    return float(load.stage(gm, go).shift_of_pole(section.w0))


def _shift_second(
    realisation: Realisation,
    section: Section,
    places: Sequence[tuple[Position, Load]],
    models: Models,
) -> Shift:
    assert section.q is not None
    if realisation.style == "active-rc":
        stages = []
        for place, load in places:
            gm, go, _ = _values(models[place.name])
            stages.append(load.stage(gm, go))
        return shift_at_pole(section.w0, section.q, (stages[0], stages[1]))
    return _shift_gm_c(realisation, section, places, models)


def _find_gm_c_errors(
    realisation: Realisation, places: Places, models: Models
) -> tuple[dict[str, float], dict[str, float]]:
    """Return the losses at each node [S], and the lag of each transconductor by its role [s]."""
    losses: dict[str, float] = {}
    lags: dict[str, float] = {}
    for place, _ in places:
        _, go, pole = _values(models[place.name])
        losses[place.output] = losses.get(place.output, 0.0) + go
        assert place.element is not None
        lags[realisation.find(place.element).role] = 1.0 / pole
    return losses, lags


def _shift_gm_c(
    realisation: Realisation, section: Section, places: Places, models: Models
) -> Shift:
    """Perturb the pole of ``s Ca (s Cb + gq) + gab gba`` by losses and lags, first order."""
    assert section.q is not None
    w0, q = section.w0, section.q
    losses, lags = _find_gm_c_errors(realisation, places, models)
    gm = {realisation.find(str(place.element)).role: _values(models[place.name])[0]
          for place, _ in places}  # fmt: skip
    size = {place.output: load.accuracy_capacitance for place, load in places}
    (ga, ca), (gb, cb) = ((losses[node], size[node]) for node in sorted(size))
    s = w0 * complex(-0.5 / q, np.sqrt(max(1.0 - 0.25 / q**2, 0.0)))
    inner = s * cb + gm["q"]
    change = ga * inner + gb * s * ca - s * ca * gm["q"] * s * lags["q"]
    change -= gm["ab"] * gm["ba"] * s * (lags["ab"] + lags["ba"])
    moved = s - change / (ca * inner + s * ca * cb)
    return Shift(
        np.asarray(abs(moved) / w0 - 1.0),
        np.asarray(-2.0 * moved.real / abs(moved) - 1.0 / q), np.asarray(q),
    )  # fmt: skip
