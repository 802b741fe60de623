"""`Element`, `Position`, `AmplifierModel`: the parts that a realisation is a list of."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike

from gmid.errors import DataFault
from gmid.filters.spec_checks import name_key

_ABSORBED_BY = {
    "resistor": ("source_resistance", "source resistance", "F"),
    "capacitor": ("load_capacitance", "load capacitance", "F"),
    "transconductor": ("load_resistance", "load conductance", "S"),
}


@dataclass(frozen=True)
class Element:
    """One element of the half circuit.

    Parameters
    ----------
    name : str
        Unique; begins with R, C or G.
    kind : str
        ``resistor``, ``capacitor`` or ``transconductor``.
    value : float
        [ohm], [F] or [S], per side.
    nodes : tuple of str
        From the node that drives to the node that is driven; ``"0"`` is ground. A transconductor
        delivers ``value * v(first)`` into the second.
    crossed : bool
        In the differential circuit the second node is that of the other side.
    section : int
        Which section it belongs to, from 1.
    role : str
        ``in_a in_b`` (input into the first, second integrator), ``ab ba`` (between them), ``q``
        (damping), ``f`` (feedback of a first-order section), ``a b`` (integrating capacitors).
    absorbed : float
        Part of the wanted value that the source or the load supplies, in the unit of the value.

    Examples
    --------
    >>> Element("R1_in_a", "resistor", 1e5, ("in", "x1"), crossed=True, section=1, role="in_a")
    Element(R1_in_a: resistor in x1 crossed, 100000)
    """

    name: str
    kind: str
    value: float
    nodes: tuple[str, str]
    crossed: bool = False
    section: int = 1
    role: str = ""
    absorbed: float = 0.0

    @property
    def wanted(self) -> float:
        """Value that the response asks for, with what the source or load supplies."""
        return self.value + self.absorbed

    def with_wanted(self, wanted: float) -> Element:
        """Return the element for another wanted value.

        Parameters
        ----------
        wanted : float
            What the response asks for; the absorbed part is taken off.

        Returns
        -------
        Element
            The new element.

        Raises
        ------
        DataFault
            If the source or load already supplies more than what is wanted.

        Examples
        --------
        >>> r1 = Element("R1_in", "resistor", 9e3, ("in", "x1"), absorbed=1e3)
        >>> r1.with_wanted(20e3).value
        19000.0
        """
        value = wanted - self.absorbed
        if value < 0 or (value == 0 and self.kind == "resistor"):
            field, name, unit = _ABSORBED_BY[self.kind]
            unit = "ohm" if self.kind == "resistor" else unit
            way = "less" if self.kind == "resistor" else "more"
            raise DataFault(
                f"the {name} of {self.absorbed:.4g} {unit} is more than the {wanted:.4g} {unit} "
                f"that {self.name} may be.", where=name_key(field),
                hint=f"Ask for a smaller one, or {way} capacitance per integrator.",
            )  # fmt: skip
        return replace(self, value=value)

    def __repr__(self) -> str:
        crossed = " crossed" if self.crossed else ""
        return f"Element({self.name}: {self.kind} {' '.join(self.nodes)}{crossed}, {self.value:g})"


@dataclass(frozen=True)
class Position:
    """Where an amplifier sits.

    Parameters
    ----------
    name : str
        ``A1``, ``A2``, ... along the cascade.
    input, output : str
        Nodes of the half circuit: the virtual ground and the inverting output of an active-RC
        integrator; the control and the driven node of a transconductor.
    section : int
        Which section it belongs to, from 1.
    element : str, optional
        The transconductor that it is (gm-c).

    Examples
    --------
    >>> Position("A1", "x1", "v1", 1)
    Position(name='A1', input='x1', output='v1', section=1, element=None)
    """

    name: str
    input: str
    output: str
    section: int
    element: str | None = None


@dataclass(frozen=True, kw_only=True, eq=False)
class AmplifierModel:
    """A real transconductance amplifier without output buffer, of the half circuit.

    All values may carry leading batch axes.

    Parameters
    ----------
    gm_total : array_like, shape (...), optional
        Short-circuit transconductance, finite [S]. A transconductor has the value of its element
        where this is not given; an active-RC amplifier needs it.
    output_conductance : array_like, shape (...)
        Per side [S].
    output_capacitance, input_capacitance : array_like, shape (...)
        Own capacitances to ground, per side [F].
    excess_pole : array_like, shape (...)
        p of ``gm_total/(1 + s/(2 pi p))`` [Hz].
    noise_factor : array_like, shape (...)
        nf of the output noise current ``4kT nf gm_total`` per side [-].
    noise_corner : array_like, shape (...)
        Where flicker noise equals white noise [Hz].

    Examples
    --------
    >>> round(float(AmplifierModel(gm_total=1e-3).input_noise(27.0)) * 1e9, 3)
    5.758
    """

    gm_total: ArrayLike | None = None
    output_conductance: ArrayLike = 0.0
    output_capacitance: ArrayLike = 0.0
    input_capacitance: ArrayLike = 0.0
    excess_pole: ArrayLike = np.inf
    noise_factor: ArrayLike = 1.0
    noise_corner: ArrayLike = 0.0

    def input_noise(self, temperature: ArrayLike) -> np.ndarray:
        """Return the white noise at the differential input.

        Parameters
        ----------
        temperature : array_like, shape (...)
            [degC].

        Returns
        -------
        ndarray of float, shape (...)
            ``sqrt(8 k T nf/gm_total)`` [V/sqrt(Hz)].

        Raises
        ------
        DataFault
            If the model has no gm_total.

        Examples
        --------
        >>> model = AmplifierModel(gm_total=1e-3, noise_factor=2.0)
        >>> round(float(model.input_noise(26.85)) * 1e9, 3)
        8.141
        """
        from gmid.network.stamps import BOLTZMANN, ZERO_CELSIUS

        if self.gm_total is None:
            raise DataFault("an amplifier model without gm_total has no input noise.")
        kelvin = np.asarray(temperature, dtype=np.float64) + ZERO_CELSIUS
        ratio = np.asarray(self.noise_factor) / np.asarray(self.gm_total)
        return np.asarray(np.sqrt(8 * BOLTZMANN * kelvin * ratio), dtype=np.float64)

    def scaled(self, factor: float) -> AmplifierModel:
        """Return the model of an amplifier with all counts multiplied.

        Parameters
        ----------
        factor : float
            Multiplies gm_total, conductance and capacitances; poles and noise factor stay.

        Returns
        -------
        AmplifierModel
            The new model.

        Examples
        --------
        >>> float(AmplifierModel(gm_total=1e-3).scaled(2.0).gm_total)
        0.002
        """
        gm = None if self.gm_total is None else np.asarray(self.gm_total) * factor
        return replace(
            self, gm_total=gm,
            output_conductance=np.asarray(self.output_conductance) * factor,
            output_capacitance=np.asarray(self.output_capacitance) * factor,
            input_capacitance=np.asarray(self.input_capacitance) * factor,
        )  # fmt: skip
