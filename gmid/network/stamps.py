"""How each kind of element enters the matrices, and the noise sources beside them."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike

from gmid.errors import UsageFault
from gmid.network.pencil import FloatArray

GROUND = "0"
"""Name of the reference node."""

BOLTZMANN = 1.380649e-23
"""Boltzmann constant [J/K], exact by definition of the SI."""

ZERO_CELSIUS = 273.15
"""Zero degrees Celsius [K]."""


_DIVISORS = {"resistor": ("resistance",), "vccs": ("pole",), "amplifier": ("gain", "bandwidth")}


@dataclass(frozen=True, eq=False)
class Element:
    """One element: where it sits and what it is worth.

    Parameters
    ----------
    name : str
        Unique in its network.
    kind : str
        A key of `STAMPS`.
    nodes : tuple of str
        Nodes in the order the kind expects.
    values : mapping of str to ndarray
        Parameters with leading batch axes; ``conductance`` and ``capacitance`` of a block
        end in two more axes.
    signs : tuple of int
        Of a block: -1 for a terminal wired to the other side of a differential circuit.

    Examples
    --------
    >>> Element("r1", "resistor", ("in", "out"), {"resistance": np.array(1e3)})
    Element(r1: resistor in out, resistance=1000)
    """

    name: str
    kind: str
    nodes: tuple[str, ...]
    values: Mapping[str, FloatArray]
    signs: tuple[int, ...] = ()

    @property
    def unknown(self) -> str | None:
        """Name of the unknown that this element adds, if it adds one."""
        if self.kind in ("voltage_source", "vcvs", "amplifier"):
            return f"i({self.name})"
        return f"x({self.name})" if "pole" in self.values and self.kind == "vccs" else None

    @property
    def batch(self) -> tuple[int, ...]:
        """Leading axes of the values."""
        tail = 2 if self.kind == "block" else 0
        return np.broadcast_shapes(
            *(value.shape[: value.ndim - tail] for value in self.values.values())
        )

    def with_values(self, new: Mapping[str, ArrayLike]) -> Element:
        """Return the same element with some of its values replaced.

        Parameters
        ----------
        new : mapping of str to array_like
            Only parameters that the element already has.

        Returns
        -------
        Element
            The new element.

        Raises
        ------
        UsageFault
            If a parameter does not belong to the element, or its shape does not.

        Examples
        --------
        >>> r1 = Element("r1", "resistor", ("in", "out"), {"resistance": np.array(1e3)})
        >>> r1.with_values({"resistance": 2e3})
        Element(r1: resistor in out, resistance=2000)
        """
        for key in new:
            if key not in self.values:
                raise UsageFault(
                    f"{self.kind} {self.name} has no value {key}; it has "
                    f"{', '.join(self.values) or 'none'}."
                )
        values = {**self.values, **{k: np.asarray(v, dtype=np.float64) for k, v in new.items()}}
        element = replace(self, values=values)
        check_values(element)
        return element

    def __repr__(self) -> str:
        values = [
            f"{key}={value:.6g}" if value.ndim == 0 else f"{key}{value.shape}"
            for key, value in self.values.items()
        ]
        return f"Element({self.name}: {' '.join([self.kind, *self.nodes])}, {', '.join(values)})"


def check_values(element: Element) -> None:
    """Refuse values that cannot belong to the element.

    Parameters
    ----------
    element : Element
        The element to look at.

    Raises
    ------
    UsageFault
        If a block's matrices are not k by k, leading axes do not broadcast, or a value that
        is divided by is zero.

    Examples
    --------
    >>> check_values(Element("r1", "resistor", ("a", "b"), {"resistance": np.ones(3)}))
    """
    if element.kind == "block":
        k = len(element.nodes)
        for key, value in element.values.items():
            if value.shape[-2:] != (k, k):
                raise UsageFault(
                    f"{key} of block {element.name} with {k} terminals needs shape "
                    f"(..., {k}, {k}), found {value.shape}."
                )
        if len(element.signs) != k or any(sign not in (1, -1) for sign in element.signs):
            raise UsageFault(f"block {element.name} needs {k} signs of +1 or -1.")
    for key in _DIVISORS.get(element.kind, ()):
        if key in element.values and np.any(element.values[key] == 0):
            raise UsageFault(f"the {key} of {element.kind} {element.name} is zero.")
    try:
        _ = element.batch
    except ValueError:
        shapes = ", ".join(f"{key} {value.shape}" for key, value in element.values.items())
        raise UsageFault(
            f"the values of {element.name} do not broadcast together: {shapes}."
        ) from None


class Board:
    """Two matrices under assembly, with the batch axes last so that additions are contiguous.

    Parameters
    ----------
    unknowns : tuple of str
        Names of rows and columns; the ground node is left out.
    batch : tuple of int
        Batch axes.

    Examples
    --------
    >>> board = Board(("out",), ())
    >>> board.add("conductance", "out", "out", 1e-3)
    >>> board.conductance.tolist()
    [[0.001]]
    """

    def __init__(self, unknowns: tuple[str, ...], batch: tuple[int, ...]) -> None:
        shape = (len(unknowns), len(unknowns), *batch)
        self.index = {name: k for k, name in enumerate(unknowns)}
        self.conductance = np.zeros(shape)
        self.capacitance = np.zeros(shape)

    def add(self, matrix: str, row: str, column: str, value: ArrayLike) -> None:
        """Add a value at a row and column, unless one of them is ground.

        Parameters
        ----------
        matrix : str
            ``conductance`` or ``capacitance``.
        row, column : str
            Names of unknowns.
        value : array_like, shape (...)
            What is added.

        Examples
        --------
        >>> board = Board(("out",), ())
        >>> board.add("capacitance", "out", "0", 1e-12)
        >>> float(board.capacitance.sum())
        0.0
        """
        if row != GROUND and column != GROUND:
            target = self.conductance if matrix == "conductance" else self.capacitance
            target[self.index[row], self.index[column]] += value

    def add_pair(self, matrix: str, row: str, plus: str, minus: str, value: ArrayLike) -> None:
        """Add ``value * (v(plus) - v(minus))`` to one equation.

        Parameters
        ----------
        matrix : str
            ``conductance`` or ``capacitance``.
        row : str
            The equation.
        plus, minus : str
            Nodes whose difference counts.
        value : array_like, shape (...)
            The factor.

        Examples
        --------
        >>> board = Board(("a", "b"), ())
        >>> board.add_pair("conductance", "a", "a", "b", 2.0)
        >>> board.conductance.tolist()
        [[2.0, -2.0], [0.0, 0.0]]
        """
        self.add(matrix, row, plus, value)
        self.add(matrix, row, minus, np.negative(value))


def _stamp_resistor(board: Board, element: Element) -> None:
    _stamp_between(board, element, "conductance", 1.0 / element.values["resistance"], -1)


def _stamp_conductor(board: Board, element: Element) -> None:
    _stamp_between(board, element, "conductance", element.values["conductance"], -1)


def _stamp_capacitor(board: Board, element: Element) -> None:
    _stamp_between(board, element, "capacitance", element.values["capacitance"], -1)


def _stamp_crossed(board: Board, element: Element) -> None:
    for matrix, value in element.values.items():
        _stamp_between(board, element, matrix, value, 1)


def _stamp_between(board: Board, element: Element, matrix: str, value: FloatArray, s: int) -> None:
    a, b = element.nodes
    board.add(matrix, a, a, value)
    board.add(matrix, b, b, value)
    board.add(matrix, a, b, s * value)
    board.add(matrix, b, a, s * value)


def _stamp_block(board: Board, element: Element) -> None:
    for matrix, value in element.values.items():
        for i, row in enumerate(element.nodes):
            for j, column in enumerate(element.nodes):
                sign = element.signs[i] * element.signs[j]
                board.add(matrix, row, column, sign * value[..., i, j])


def _stamp_vccs(board: Board, element: Element) -> None:
    plus, minus, control, reference = element.nodes
    gm = element.values["gm"]
    state = element.unknown
    if state is None:
        board.add_pair("conductance", plus, control, reference, gm)
        board.add_pair("conductance", minus, control, reference, -gm)
        return
    board.add("conductance", plus, state, gm)
    board.add("conductance", minus, state, -gm)
    board.add("conductance", state, state, 1.0)
    board.add("capacitance", state, state, 1.0 / element.values["pole"])
    board.add_pair("conductance", state, control, reference, -1.0)


def _stamp_branch(board: Board, element: Element) -> str:
    plus, minus, branch = element.nodes[0], element.nodes[1], element.unknown
    assert branch is not None
    board.add("conductance", plus, branch, 1.0)
    board.add("conductance", minus, branch, -1.0)
    return branch


def _stamp_voltage_source(board: Board, element: Element) -> None:
    branch = _stamp_branch(board, element)
    plus, minus = element.nodes
    board.add_pair("conductance", branch, plus, minus, 1.0)


def _stamp_vcvs(board: Board, element: Element) -> None:
    branch = _stamp_branch(board, element)
    plus, minus, control, reference = element.nodes
    board.add_pair("conductance", branch, plus, minus, 1.0)
    board.add_pair("conductance", branch, control, reference, -element.values["gain"])


def _stamp_amplifier(board: Board, element: Element) -> None:
    branch = _stamp_branch(board, element)
    plus, minus, control, reference = element.nodes
    gain, bandwidth = element.values["gain"], element.values["bandwidth"]
    board.add_pair("conductance", branch, plus, minus, 1.0 / gain)
    board.add_pair("capacitance", branch, plus, minus, 1.0 / bandwidth)
    board.add_pair("conductance", branch, control, reference, -1.0)


def _stamp_nothing(board: Board, element: Element) -> None:
    """Leave the matrices alone: an independent current source is a right-hand side."""


STAMPS: dict[str, Callable[[Board, Element], None]] = {
    "resistor": _stamp_resistor,
    "conductor": _stamp_conductor,
    "capacitor": _stamp_capacitor,
    "crossed": _stamp_crossed,
    "block": _stamp_block,
    "vccs": _stamp_vccs,
    "vcvs": _stamp_vcvs,
    "amplifier": _stamp_amplifier,
    "voltage_source": _stamp_voltage_source,
    "current_source": _stamp_nothing,
}
"""Kinds of elements and how each writes itself on a `Board`."""


@dataclass(frozen=True, eq=False)
class NoiseSource:
    """A noise current between two nodes, white plus flicker.

    Parameters
    ----------
    name, owner : str
        Its own name, and that of the device whose share it belongs to.
    nodes : tuple of str
        The current leaves the first node and enters the second.
    signs : tuple of int
        -1 for a node on the other side of a differential circuit (see `Element`).
    white : ndarray of float, shape (...)
        Density [A^2/Hz].
    flicker : ndarray of float, shape (...)
        Density at 1 Hz [A^2/Hz].
    exponent : ndarray of float, shape (...)
        ef of the law ``flicker / f**ef`` [-].

    Examples
    --------
    >>> NoiseSource("m1.channel", "m1", ("d", "s"), (1, 1), *np.array([1e-24, 0, 1.0]))
    NoiseSource(m1.channel of m1: d s)
    """

    name: str
    owner: str
    nodes: tuple[str, str]
    signs: tuple[int, int]
    white: FloatArray
    flicker: FloatArray
    exponent: FloatArray

    @property
    def batch(self) -> tuple[int, ...]:
        """Leading axes of the values."""
        return np.broadcast_shapes(
            np.shape(self.white), np.shape(self.flicker), np.shape(self.exponent)
        )

    def __repr__(self) -> str:
        return f"NoiseSource({self.name} of {self.owner}: {' '.join(self.nodes)})"
