"""`Realisation`: a filter as a list of elements and amplifiers, and its network."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

from numpy.typing import ArrayLike

from gmid.errors import UnknownName, UsageFault, advise
from gmid.filters.elements import AmplifierModel, Element, Position
from gmid.filters.passives import Passives
from gmid.filters.sections import Section
from gmid.filters.stamping import Conditions, build_network
from gmid.network import Network

Amplifiers = AmplifierModel | Mapping[str, AmplifierModel] | None
"""One model for all positions, models by position (ideal where it has none), or all ideal."""


@dataclass(frozen=True, eq=False)
class Realisation:
    """The half circuit of a filter: elements and amplifiers in a cascade of sections.

    Parameters
    ----------
    style : str
        ``active-rc`` or ``gm-c``.
    sections : tuple of Section
        In the order of the cascade, their gains as realised.
    elements : tuple of Element
        All passive elements and transconductors.
    amplifiers : tuple of Position
        Along the cascade.
    output : str
        Output node; the input node is ``in``, driven by the source ``vin``.
    capacitor : float
        Level: integrating capacitor, per side [F].
    source_resistance : float
        Between ``source`` and ``in``, per side [ohm].
    load_capacitance, load_resistance : float
        At the output, per side [F], [ohm].
    passives : Passives
        What the elements bring along: bottom plates, capacitance of resistors.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, realise
    >>> realise(FilterSpec(response="butterworth", order=3, edge=1e6), capacitor=2e-12)
    Realisation(active-rc, 2 sections, 3 amplifiers, 9 elements, 2e-12 F)
    """

    style: str
    sections: tuple[Section, ...]
    elements: tuple[Element, ...]
    amplifiers: tuple[Position, ...]
    output: str
    capacitor: float
    source_resistance: float = 0.0
    load_capacitance: float = 0.0
    load_resistance: float = float("inf")
    passives: Passives = field(default_factory=Passives)

    @property
    def nodes(self) -> tuple[str, ...]:
        """Outputs of the integrators, along the cascade."""
        return tuple(dict.fromkeys(place.output for place in self.amplifiers))

    def find(self, name: str) -> Element:
        """Return an element by its name.

        Parameters
        ----------
        name : str
            The element.

        Returns
        -------
        Element
            As it stands in the list.

        Raises
        ------
        UnknownName
            If there is none.

        Examples
        --------
        >>> from gmid.filters import FilterSpec, realise
        >>> made = realise(FilterSpec(response="butterworth", order=1, edge=1e6), capacitor=2e-12)
        >>> made.find("C1_a")
        Element(C1_a: capacitor v1 x1, 2e-12)
        """
        for element in self.elements:
            if element.name == name:
                return element
        names = [element.name for element in self.elements]
        raise UnknownName(f"the filter has no element {name}.", hint=advise(name, names))

    def network(
        self, amplifiers: Amplifiers = None, *, temperature: ArrayLike | None = None,
        rscale: ArrayLike = 1.0, cscale: ArrayLike = 1.0,
        factors: Mapping[str, ArrayLike] | None = None, common_mode: bool = False,
    ) -> Network:  # fmt: skip
        """Build the network of the half circuit from the listed elements.

        The input source is ``vin``, the output node is `output`. Voltages of a half circuit are
        halves of the differential ones, so transfers are the differential ones.

        Parameters
        ----------
        amplifiers : AmplifierModel or mapping of str to AmplifierModel, optional
            One model for all, or by position; a position without one is ideal.
        temperature : array_like, shape (...), optional
            Makes resistors and amplifiers noisy [degC]; twice the power found is differential.
        rscale, cscale : array_like, shape (...)
            Multiply all resistors, all capacitors [-].
        factors : mapping of str to array_like, optional
            Multiply the values of single elements [-].
        common_mode : bool
            As the common mode sees it: crossed wires do not cross, and transconductors and
            amplifiers have the gain that `amplifiers` gives them for it.

        Returns
        -------
        Network
            Batched over the leading axes of all that was given.

        Raises
        ------
        UnknownName
            If a position or element does not exist.
        UsageFault
            If an active-RC amplifier has no finite gm_total.

        Examples
        --------
        >>> from gmid.filters import FilterSpec, realise
        >>> from gmid.network import transfer
        >>> made = realise(FilterSpec(response="butterworth", order=1, edge=1e6), capacitor=2e-12)
        >>> abs(transfer(made.network(), "vin", made.output, [1e6])).round(6).tolist()
        [0.707107]
        """
        models = self.models(amplifiers)
        for name in factors or {}:
            self.find(name)
        conditions = Conditions(
            temperature=temperature, rscale=rscale, cscale=cscale, factors=factors or {},
            common_mode=common_mode,
        )  # fmt: skip
        return build_network(self, models, conditions)

    def models(self, amplifiers: Amplifiers) -> dict[str, AmplifierModel]:
        """List the real amplifiers by position.

        Parameters
        ----------
        amplifiers : AmplifierModel or mapping of str to AmplifierModel, optional
            One model for all, or by position.

        Returns
        -------
        dict of str to AmplifierModel
            A position that is not in it is ideal.

        Raises
        ------
        UnknownName
            If a position does not exist.

        Examples
        --------
        >>> from gmid.filters import FilterSpec, realise
        >>> made = realise(FilterSpec(response="butterworth", order=2, edge=1e6), capacitor=2e-12)
        >>> list(made.models(AmplifierModel(gm_total=1e-3)))
        ['A1', 'A2']
        """
        names = [place.name for place in self.amplifiers]
        if amplifiers is None:
            return {}
        if isinstance(amplifiers, AmplifierModel):
            return dict.fromkeys(names, amplifiers)
        for name in amplifiers:
            if name not in names:
                raise UnknownName(f"the filter has no amplifier {name}.", hint=advise(name, names))
        return dict(amplifiers)

    def scaled(self, factor: float) -> Realisation:
        """Return the realisation at another impedance level.

        Parameters
        ----------
        factor : float
            Multiplies capacitors and transconductances, divides resistors.

        Returns
        -------
        Realisation
            The new one.

        Raises
        ------
        UsageFault
            If the factor is not positive.
        DataFault
            If the source or the load supplies more than an element may be.

        Examples
        --------
        >>> from gmid.filters import FilterSpec, realise
        >>> made = realise(FilterSpec(response="butterworth", order=1, edge=1e6), capacitor=2e-12)
        >>> made.scaled(2.0).capacitor
        4e-12
        """
        if not 0 < factor < float("inf"):
            raise UsageFault(f"an impedance level is scaled by a positive factor, found {factor}.")
        elements = tuple(
            e.with_wanted(e.wanted / factor if e.kind == "resistor" else e.wanted * factor)
            for e in self.elements
        )
        return replace(self, elements=elements, capacitor=self.capacitor * factor)

    def with_values(self, values: Mapping[str, float]) -> Realisation:
        """Return the realisation with the values of some elements replaced.

        Parameters
        ----------
        values : mapping of str to float
            By name of the element [ohm], [F] or [S].

        Returns
        -------
        Realisation
            The new one.

        Raises
        ------
        UnknownName
            If an element does not exist.

        Examples
        --------
        >>> from gmid.filters import FilterSpec, realise
        >>> made = realise(FilterSpec(response="butterworth", order=1, edge=1e6), capacitor=2e-12)
        >>> made.with_values({"C1_a": 3e-12}).find("C1_a").value
        3e-12
        """
        for name in values:
            self.find(name)
        elements = tuple(
            replace(e, value=float(values.get(e.name, e.value))) for e in self.elements
        )
        return replace(self, elements=elements)

    def __repr__(self) -> str:
        return (
            f"Realisation({self.style}, {len(self.sections)} sections, {len(self.amplifiers)} "
            f"amplifiers, {len(self.elements)} elements, {self.capacitor:g} F)"
        )
