"""From a specification to sections, and from sections to a realisation."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from gmid.errors import DataFault
from gmid.filters.active_rc import make_active_rc
from gmid.filters.elements import Element
from gmid.filters.gm_c import make_gm_c, refuse_feed_ins, refuse_swing
from gmid.filters.ordering import Cost, order_sections
from gmid.filters.pairing import find_alpha, level_sections, pair_sections
from gmid.filters.passives import Passives
from gmid.filters.realisation import Realisation
from gmid.filters.responses import find_response
from gmid.filters.sections import Section
from gmid.filters.spec import FilterSpec
from gmid.filters.spec_checks import name_key
from gmid.filters.stamping import INPUT

_HIGHEST = 10.0
"""Up to how many times its highest pole the passband of a highpass counts for the order."""


def design_sections(spec: FilterSpec, *, cost: Cost | None = None) -> tuple[Section, ...]:
    """Split the wanted response into sections, in order and with equal peaks.

    Given sections keep their pairing and order; only gains are shared anew.

    Parameters
    ----------
    spec : FilterSpec
        The specification.
    cost : callable, optional
        What an order of sections costs, see `gmid.filters.ordering`.

    Returns
    -------
    tuple of Section
        In the order of the cascade; their product is the response.

    Raises
    ------
    DataFault
        If the mask or the style cannot be met; `where` is the key.

    Examples
    --------
    >>> spec = FilterSpec(response="chebyshev", order=5, edge=400e3, ripple_db=0.5)
    >>> [section.order for section in design_sections(spec)]
    [2, 1, 2]
    """
    response = find_response(spec)
    if spec.sections:
        factor = response.gain / find_response(spec.with_values(gain_db=None)).gain
        return level_sections([spec.sections[0].scaled(factor), *spec.sections[1:]])
    paired = pair_sections(response)
    if spec.style == "gm-c":
        refuse_feed_ins(paired)
    places = [section.f0 for section in paired]
    if spec.edge is None:
        band = (min(places) / 2, max(places) * 2)
    else:
        low, high = spec.passband
        band = (low, min(high, _HIGHEST * max(places)))
    return order_sections(paired, band, noise_band=spec.noise_band, style=spec.style, cost=cost)


def realise(
    spec: FilterSpec, *, capacitor: float | None = None, passives: Passives | None = None,
    sections: Sequence[Section] | None = None,
) -> Realisation:  # fmt: skip
    """Realise a specification at one impedance level.

    Parameters
    ----------
    spec : FilterSpec
        The specification.
    capacitor : float, optional
        Integrating capacitor, per side [F]; that of the specification by default. For the
        smallest one with a wanted signal-to-noise ratio see `choose_capacitor`.
    passives : Passives, optional
        What the elements bring along; ideal by default. Values are not rounded, see
        `round_elements`.
    sections : sequence of Section, optional
        In place of `design_sections`.

    Returns
    -------
    Realisation
        Half circuit.

    Raises
    ------
    DataFault
        If the style cannot realise it, or the source or load is more than an element may be;
        `where` is the key.

    Examples
    --------
    >>> spec = FilterSpec(response="chebyshev", order=5, edge=400e3, ripple_db=0.5)
    >>> realise(spec, capacitor=4e-12)
    Realisation(active-rc, 3 sections, 5 amplifiers, 15 elements, 4e-12 F)
    """
    level = spec.capacitor if capacitor is None else capacitor
    if level is None:
        raise DataFault("the capacitor is not known.", where=name_key("capacitor"),
                        hint="Give it, or use choose_capacitor.")  # fmt: skip
    if spec.style == "gm-c":
        refuse_swing(spec)
    chosen = tuple(design_sections(spec) if sections is None else sections)
    alphas = [
        1.0 if section.q is None else find_alpha(section, chosen[:k])
        for k, section in enumerate(chosen)
    ]
    make = make_active_rc if spec.style == "active-rc" else make_gm_c
    elements, places = make(chosen, alphas, level)
    listed = _absorb(spec, elements, places[-1].output)
    return Realisation(
        style=spec.style, sections=chosen, elements=listed, amplifiers=tuple(places),
        output=places[-1].output, capacitor=level, source_resistance=spec.source_resistance,
        load_capacitance=spec.load_capacitance, load_resistance=spec.load_resistance,
        passives=passives or Passives(),
    )  # fmt: skip


def _absorb(spec: FilterSpec, elements: Sequence[Element], output: str) -> tuple[Element, ...]:
    """Take off elements what the source or the load supplies.

    A source resistance is part of the input resistor if that is all there is at the input. A
    load is part of the last node of a gm-c filter; an active-RC output does not feel it.
    """
    at_input = [element for element in elements if INPUT in element.nodes]
    shares: dict[str, float] = {}
    if len(at_input) == 1 and at_input[0].kind == "resistor":
        shares[at_input[0].name] = spec.source_resistance
    if spec.style == "gm-c":
        last = elements[-1].section
        for element in elements:
            if element.section == last and element.nodes == (output, "0"):
                shares[element.name] = spec.load_capacitance
            elif element.section == last and element.role in ("q", "f"):
                shares[element.name] = 1.0 / spec.load_resistance
    return tuple(
        replace(element, absorbed=shares.get(element.name, 0.0)).with_wanted(element.value)
        for element in elements
    )
