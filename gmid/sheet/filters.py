"""Fills the filter's part of a sheet from what was found about it."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from gmid.filters.demand_types import FilterDemands
from gmid.filters.elements import Element
from gmid.filters.spec import FilterSpec
from gmid.quantity import format_quantity
from gmid.sheet.data import CheckRow, ElementRow, FilterSheet, ResponseRow, SectionRow


def fill_filter(
    found: FilterDemands,
    *,
    response: Sequence[ResponseRow] = (),
    checks: Sequence[CheckRow] = (),
    facts: Sequence[tuple[str, str]] = (),
) -> FilterSheet:
    """Turn a filter and its demands into the rows of a sheet.

    Parameters
    ----------
    found : FilterDemands
        The filter.
    response : sequence of ResponseRow
        As realised, by condition.
    checks : sequence of CheckRow
        Of the whole filter.
    facts : sequence of (str, str)
        More lines of its table.

    Returns
    -------
    FilterSheet
        Pure data.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, Tolerance
    >>> from gmid.filters.demand import demands_of
    >>> spec = FilterSpec(response="butterworth", order=2, edge=1e6, capacitor=2e-12)
    >>> sheet = fill_filter(demands_of(spec, Tolerance(passband_db=0.2, counts="shape")))
    >>> len(sheet.sections), len(sheet.elements)
    (1, 6)
    """
    made = found.realisation
    capacitance, resistance = _total(made.elements, "capacitor"), _total(made.elements, "resistor")
    return FilterSheet(
        description=describe_filter(found.spec),
        sections=tuple(
            SectionRow(f0=one.f0, q=one.q, k2=one.k2, k1=one.k1, k0=one.k0) for one in made.sections
        ),
        elements=tuple(
            ElementRow(
                name=one.name,
                kind=one.kind,
                value=one.value,
                nodes=(*one.nodes, *(("crossed",) if one.crossed else ())),
            )
            for one in made.elements
        ),
        response=tuple(response),
        checks=tuple(checks),
        total_capacitance=2 * capacitance,
        total_resistance=2 * resistance,
        area=_area(found, 2 * capacitance),
        facts=(*_facts(found, capacitance, resistance), *facts),
    )


def _total(elements: Sequence[Element], kind: str) -> float:
    return float(sum(one.value for one in elements if one.kind == kind))


def _area(found: FilterDemands, capacitance: float) -> float | None:
    density = found.realisation.passives.capacitor_density
    return None if density is None else capacitance / density


def describe_filter(spec: FilterSpec) -> str:
    """Say in words what filter was asked for.

    Parameters
    ----------
    spec : FilterSpec
        The filter.

    Returns
    -------
    str
        One sentence.

    Examples
    --------
    >>> describe_filter(FilterSpec(response="chebyshev", order=5, edge=400e3, ripple_db=0.5))
    'Chebyshev lowpass of order 5, edge 400 kHz, ripple 0.5 dB; active-RC.'
    """
    name = spec.response.replace("-", " ").capitalize()
    size = "" if spec.order is None else f" of order {spec.order}"
    edges = spec.edge if isinstance(spec.edge, tuple) else (spec.edge,)
    parts = [f"{name} {spec.kind}{size}"]
    known = [format_quantity(edge, "Hz") for edge in edges if edge is not None]
    if known:
        parts.append(f"edge {' to '.join(known)}")
    if spec.ripple_db is not None:
        parts.append(f"ripple {format_quantity(spec.ripple_db, 'dB')}")
    if spec.attenuation_db is not None:
        parts.append(f"attenuation {format_quantity(spec.attenuation_db, 'dB')}")
    style = {"active-rc": "active-RC", "gm-c": "Gm-C"}[spec.style]
    return f"{', '.join(parts)}; {style}."


def _facts(found: FilterDemands, capacitance: float, resistance: float) -> list[tuple[str, str]]:
    spec = found.spec
    facts = [
        ("tolerance", f"{found.tolerance.passband_db:g} dB, {found.tolerance.counts}"),
        ("of which for the amplifiers", found.budget.describe()),
        ("integrating capacitor, per side", format_quantity(found.realisation.capacitor, "F")),
        ("all capacitors, both sides", format_quantity(2 * capacitance, "F")),
    ]
    if resistance:
        facts.append(("all resistors, both sides", format_quantity(2 * resistance, "ohm")))
    density = found.realisation.passives.capacitor_density
    if density is not None:
        facts.append(("capacitor area", f"{2 * capacitance / density * 1e12:.4g} um^2"))
    sheet = found.realisation.passives.resistor_sheet
    if sheet is not None and resistance:
        facts.append(("resistor squares, both sides", f"{2 * resistance / sheet:.4g}"))
    if found.noise is not None and spec.swing is not None:
        facts.append((
            "signal-to-noise ratio of the passive elements alone",
            f"{float(np.min(found.noise.snr_db(spec.swing))):.2f} dB",
        ))  # fmt: skip
    facts.append(("common mode", found.common_mode.describe()))
    return facts


def list_demands(found: FilterDemands) -> list[dict[str, Any]]:
    """List what each amplifier must meet, as ``amplifiers`` of the JSON form.

    Parameters
    ----------
    found : FilterDemands
        The filter.

    Returns
    -------
    list of dict
        With ``name``, ``positions``, ``multiple`` and ``demands``.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, Tolerance
    >>> from gmid.filters.demand import demands_of
    >>> spec = FilterSpec(response="butterworth", order=2, edge=1e6, capacitor=2e-12)
    >>> found = demands_of(spec, Tolerance(passband_db=0.2, counts="shape"))
    >>> [one["positions"] for one in list_demands(found)]
    [['A1'], ['A2']]
    """
    return [
        {
            "name": one.position.lower(),
            "positions": [one.position],
            "multiple": 1,
            "demands": one.as_dict(),
        }
        for one in found.demands
    ]
