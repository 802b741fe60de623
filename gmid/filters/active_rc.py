"""Active-RC sections as half circuits: integrators around virtual grounds.

An uncrossed element from a node to a virtual ground gives a negative term, a crossed one a
positive term. First order: ``GF = w0 CF``, ``G1 = |k0| w0 CF``, ``C1 = |k1| CF``. Second order:
``G12 = alpha w0 CB``, ``G21 = w0 CA/alpha``, ``GQ = w0 CB/Q``, ``Gi1 = k0 w0 CA/alpha``,
``Gi2 = k1 w0 CB``, ``Ci2 = k2 CB``, with k's normalised to w0.
"""

from __future__ import annotations

from collections.abc import Sequence

from gmid.filters.elements import Element, Position
from gmid.filters.sections import Section
from gmid.filters.stamping import INPUT

Made = tuple[list[Element], list[Position]]


def make_active_rc(sections: Sequence[Section], alphas: Sequence[float], capacitor: float) -> Made:
    """Make the elements of a cascade.

    Parameters
    ----------
    sections : sequence of Section
        In the order of the cascade.
    alphas : sequence of float
        Of the two-integrator loops; that of a section of first order is not used [-].
    capacitor : float
        Of every integrator, per side [F].

    Returns
    -------
    elements : list of Element
        Resistors and capacitors.
    amplifiers : list of Position
        One for each integrator.

    Examples
    --------
    >>> elements, places = make_active_rc([Section(1e6, k0=1.0)], [1.0], 1e-12)
    >>> [element.name for element in elements], [place.name for place in places]
    (['R1_in_a', 'R1_f', 'C1_a'], ['A1'])
    """
    elements: list[Element] = []
    places: list[Position] = []
    entry = INPUT
    for number, (section, alpha) in enumerate(zip(sections, alphas, strict=True), start=1):
        start = len(places) + 1
        if section.q is None:
            made, new = _make_first(number, section, capacitor, entry, start)
        else:
            made, new = _make_second(number, section, alpha, capacitor, entry, start)
        elements += made
        places += new
        entry = places[-1].output
    return elements, places


class _Bench:
    """Collects the elements of one section; values that are zero are left out."""

    def __init__(self, number: int) -> None:
        self.number = number
        self.elements: list[Element] = []

    def add(
        self, role: str, nodes: tuple[str, str], *, conductance: float = 0.0,
        capacitance: float = 0.0, crossed: bool = False,
    ) -> None:  # fmt: skip
        for kind, letter, value in (
            ("resistor", "R", 1.0 / conductance if conductance else 0.0),
            ("capacitor", "C", capacitance),
        ):
            if value:
                name = f"{letter}{self.number}_{role}"
                self.elements.append(Element(name, kind, value, nodes, crossed, self.number, role))

    def add_input(self, role: str, nodes: tuple[str, str], g: float, c: float) -> None:
        self.add(role, nodes, conductance=abs(g), crossed=g > 0)
        self.add(role, nodes, capacitance=abs(c), crossed=c > 0)


def _make_first(number: int, section: Section, c: float, entry: str, start: int) -> Made:
    x, v = f"x{start}", f"v{start}"
    g = section.w0 * c
    bench = _Bench(number)
    bench.add_input("in_a", (entry, x), section.k0 * g, section.k1 * c)
    bench.add("f", (v, x), conductance=g)
    bench.add("a", (v, x), capacitance=c)
    return bench.elements, [Position(f"A{start}", x, v, number)]


def _make_second(
    number: int, section: Section, alpha: float, c: float, entry: str, start: int
) -> Made:
    assert section.q is not None
    xa, va, xb, vb = f"x{start}", f"v{start}", f"x{start + 1}", f"v{start + 1}"
    g = section.w0 * c
    bench = _Bench(number)
    bench.add_input("in_a", (entry, xa), section.k0 * g / alpha, 0.0)
    bench.add("a", (va, xa), capacitance=c)
    bench.add("ba", (vb, xa), conductance=g / alpha)
    bench.add("ab", (va, xb), conductance=g * alpha, crossed=True)
    bench.add_input("in_b", (entry, xb), section.k1 * g, section.k2 * c)
    bench.add("q", (vb, xb), conductance=g / section.q)
    bench.add("b", (vb, xb), capacitance=c)
    places = [Position(f"A{start}", xa, va, number), Position(f"A{start + 1}", xb, vb, number)]
    return bench.elements, places
