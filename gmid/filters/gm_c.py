"""Gm-C sections as half circuits, and what the style cannot do.

The same as active-RC with gm in place of G and the capacitors at the nodes to ground: ``CB`` is
the node's total capacitance, fed in through ``|k2| CB``, the rest ``CB (1 - |k2|)`` to ground.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from gmid.errors import DataFault
from gmid.filters.elements import Element, Position
from gmid.filters.ordering import is_feed_in
from gmid.filters.sections import Section
from gmid.filters.spec import FilterSpec
from gmid.filters.spec_checks import name_key
from gmid.filters.stamping import INPUT

Made = tuple[list[Element], list[Position]]

SMALLEST_GM_OVER_ID = 5.0
"""Strongest inversion in which an input pair is run, an overdrive of 0.4 V [1/V]; common
practice."""

_ROUNDING = 1e-12


def make_gm_c(sections: Sequence[Section], alphas: Sequence[float], capacitor: float) -> Made:
    """Make the elements of a cascade.

    Parameters
    ----------
    sections : sequence of Section
        In the order of the cascade.
    alphas : sequence of float
        Of the two-integrator loops; that of a section of first order is not used [-].
    capacitor : float
        Total of every integrating node, per side [F].

    Returns
    -------
    elements : list of Element
        Transconductors and capacitors.
    amplifiers : list of Position
        One for each transconductor.

    Raises
    ------
    DataFault
        If a section other than the first feeds in through a capacitor, or more than the node's
        total capacitance would have to feed in.

    Examples
    --------
    >>> elements, places = make_gm_c([Section(1e6, k0=1.0)], [1.0], 1e-12)
    >>> [element.name for element in elements], [place.name for place in places]
    (['C1_a', 'G1_in_a', 'G1_f'], ['A1', 'A2'])
    """
    refuse_feed_ins(sections, ordered=True)
    elements: list[Element] = []
    entry, node = INPUT, 0
    for number, (section, alpha) in enumerate(zip(sections, alphas, strict=True), start=1):
        nodes = [f"v{node + k}" for k in range(1, section.order + 1)]
        elements += _make_section(number, section, alpha, capacitor, entry, nodes)
        node += section.order
        entry = nodes[-1]
    gms = [element for element in elements if element.kind == "transconductor"]
    places = [
        Position(f"A{k}", gm.nodes[0], gm.nodes[1], gm.section, gm.name)
        for k, gm in enumerate(gms, start=1)
    ]
    return elements, places


def _make_section(
    number: int, section: Section, alpha: float, c: float, entry: str, nodes: list[str]
) -> list[Element]:
    elements: list[Element] = []

    def add(role: str, kind: str, value: float, ends: tuple[str, str], crossed: bool) -> None:
        if value:
            name = f"{'C' if kind == 'capacitor' else 'G'}{number}_{role}"
            elements.append(Element(name, kind, abs(value), ends, crossed, number, role))

    gm, last = "transconductor", nodes[-1]
    g, letter = section.w0 * c, "ab"[len(nodes) - 1]
    feed = section.numerator[0]
    if len(nodes) == 2:
        add("a", "capacitor", c, (nodes[0], "0"), False)
    # kept even where all of it feeds in: parasitics and loads are taken off it
    rest = max(c * (1.0 - abs(feed)), 0.0)
    elements.append(
        Element(f"C{number}_{letter}", "capacitor", rest, (last, "0"), False, number, letter)
    )
    add(f"in_{letter}", "capacitor", feed * c, (entry, last), feed < 0)
    if section.q is None:
        add("in_a", gm, section.k0 * g, (entry, last), section.k0 < 0)
        add("f", gm, g, (last, last), True)
        return elements
    add("in_a", gm, section.k0 * g / alpha, (entry, nodes[0]), section.k0 < 0)
    add("ba", gm, g / alpha, (last, nodes[0]), True)
    add("ab", gm, g * alpha, (nodes[0], last), False)
    add("in_b", gm, section.k1 * g, (entry, last), section.k1 < 0)
    add("q", gm, g / section.q, (last, last), True)
    return elements


def refuse_feed_ins(sections: Sequence[Section], *, ordered: bool = False) -> None:
    """Refuse sections whose zeros would load a high-impedance node.

    Parameters
    ----------
    sections : sequence of Section
        The sections.
    ordered : bool
        Whether they stand in the order of the cascade, with their final gains.

    Raises
    ------
    DataFault
        With the reason and the way out.

    Examples
    --------
    >>> refuse_feed_ins([Section(1e6, 1.0, k2=0.5, k0=1.0), Section(1e6, k0=1.0)])
    """
    way = 'Use style = "active-rc", or a response without finite zeros'
    later = [k for k, section in enumerate(sections) if is_feed_in(section)]
    if later and (not ordered or later[0] == 0):
        later = later[1:]
    if later:
        section = sections[later[0]]
        raise DataFault(
            f"the section at {section.f0:.4g} Hz has a gain at high frequency, so that its input "
            "capacitor would load the high-impedance node before it; only the first section of a "
            "gm-c cascade may have one.", where=name_key("style"), hint=f"{way}.",
        )  # fmt: skip
    if ordered and sections and abs(sections[0].numerator[0]) > 1.0 + _ROUNDING:
        raise DataFault(
            f"the first section has a gain of {abs(sections[0].numerator[0]):.4g} at high "
            "frequency, but a gm-c node takes in no more than 1 through its capacitor.",
            where=name_key("gain_db"), hint=f"Ask for less gain. {way}.",
        )  # fmt: skip


def find_cubic_divisor(gm_over_id: float) -> float:
    """Return d of the third harmonic ``x^2/d`` of a plain pair.

    x is ``gm vx/Imax`` with the peak differential input vx and the tail current Imax.

    Parameters
    ----------
    gm_over_id : float
        Of the pair [1/V].

    Returns
    -------
    float
        12.4 in weak to 32 in strong inversion, interpolated between known points [-].

    References
    ----------
    Strong inversion: 32 follows from the square law. Weak inversion: the cubic term of tanh
    gives 12; 12.4 with the terms of higher order at common levels.

    Examples
    --------
    >>> find_cubic_divisor(13.0)
    19.0
    """
    known = np.array([(0.0, 32.0), (8.0, 25.0), (13.0, 19.0), (18.0, 16.0), (27.0, 12.4)])
    return float(np.interp(gm_over_id, known[:, 0], known[:, 1]))


def find_pair_swing(distortion_db: float, gm_over_id: float) -> float:
    """Return the largest input of a plain pair for a third harmonic.

    Parameters
    ----------
    distortion_db : float
        Third harmonic over fundamental, negative [dB].
    gm_over_id : float
        Of the pair [1/V].

    Returns
    -------
    float
        Peak differential voltage [V]; good while the pair is not near its limits, so below
        -30 dB.

    Examples
    --------
    >>> round(find_pair_swing(-40.0, 10.0), 3)
    0.095
    """
    x = np.sqrt(10 ** (distortion_db / 20) * find_cubic_divisor(gm_over_id))
    return float(2 * x / gm_over_id)


def refuse_swing(spec: FilterSpec, *, gm_over_id: float = SMALLEST_GM_OVER_ID) -> None:
    """Refuse a gm-c filter whose swing no plain pair takes at the stated distortion.

    Parameters
    ----------
    spec : FilterSpec
        The specification; nothing is judged without a swing.
    gm_over_id : float
        Smallest that a pair may have [1/V].

    Raises
    ------
    DataFault
        With the largest swing and the ways out.

    Examples
    --------
    >>> refuse_swing(FilterSpec(response="bessel", order=2, edge=1e6, style="gm-c", swing=0.05))
    """
    limit = spec.harmonic_limit_db
    if spec.swing is None or limit is None:
        return
    largest = find_pair_swing(limit, gm_over_id)
    if spec.swing > largest:
        stated = "" if spec.distortion_db is not None else " (the default of gm-c)"
        raise DataFault(
            f"a swing of {spec.swing:g} V with a third harmonic of {limit:g} dB{stated} is more "
            f"than a plain pair takes: {largest:.3g} V at gm/Id = {gm_over_id:g} 1/V.",
            where=name_key("swing"),
            hint='Ask for less swing, allow more distortion, or use style = "active-rc".',
        )  # fmt: skip
