"""The core of a network: its nodes, elements and noise sources, and their assembly."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import replace
from typing import Self

import numpy as np
from numpy.typing import ArrayLike

from gmid.errors import UnknownName, UsageFault, advise
from gmid.network.pencil import FloatArray, Pencil, name_undetermined, singular_fault
from gmid.network.stamps import GROUND, STAMPS, Board, Element, NoiseSource, check_values

Output = str | tuple[str, str] | Mapping[str, float]
"""What is observed: a node, a pair (plus, minus), weights by node; ``i(source)`` is a current."""

Source = str | Mapping[str, float]
"""What drives: the name of an independent source at strength 1, or strengths by name."""


class Structure:
    """Nodes, elements and noise sources of a network, and their assembly into a pencil.

    `gmid.network.network.Network` adds the methods that put elements in.

    Parameters
    ----------
    nodes : iterable of str, optional
        All nodes there may be; another name is then an error. Without it nodes come into
        being as elements name them.

    Examples
    --------
    >>> Structure(["in", "out"])
    Network(2 nodes, no elements)
    """

    def __init__(self, nodes: Iterable[str] | None = None) -> None:
        self._nodes: dict[str, None] = dict.fromkeys(nodes or ())
        self._nodes.pop(GROUND, None)
        self._fixed = nodes is not None
        self._elements: dict[str, Element] = {}
        self._noise: dict[str, NoiseSource] = {}
        self._pencil: Pencil | None = None
        self._unknowns: tuple[str, ...] | None = None
        self._checked: set[bool] = set()

    @property
    def nodes(self) -> tuple[str, ...]:
        """Names of the nodes, ground left out."""
        return tuple(self._nodes)

    @property
    def elements(self) -> tuple[Element, ...]:
        """All elements, in the order of their making."""
        return tuple(self._elements.values())

    @property
    def noise_sources(self) -> tuple[NoiseSource, ...]:
        """All noise sources, in the order of their making."""
        return tuple(self._noise.values())

    @property
    def unknowns(self) -> tuple[str, ...]:
        """Nodes, then branch currents and internal states."""
        if self._unknowns is None:
            extra = (element.unknown for element in self._elements.values())
            self._unknowns = (*self._nodes, *(name for name in extra if name is not None))
        return self._unknowns

    @property
    def batch(self) -> tuple[int, ...]:
        """Leading axes of the whole network: all values broadcast together."""
        return self.assemble().batch

    def _touch(self, nodes: Iterable[str], owner: str) -> None:
        for node in nodes:
            if not isinstance(node, str):
                raise UsageFault(f"{owner}: a node is named by a string, found {node!r}.")
            if node != GROUND and node not in self._nodes:
                if self._fixed:
                    raise UnknownName(
                        f"{owner} names node {node}, which the network does not have.",
                        hint=advise(node, self._nodes),
                    )
                self._nodes[node] = None

    def _claim(self, name: str) -> None:
        if name in self._elements or name in self._noise:
            raise UsageFault(f"the network already has an element named {name}.")
        self._pencil = None
        self._unknowns = None
        self._checked.clear()

    def _insert(
        self,
        name: str,
        kind: str,
        nodes: Iterable[str],
        values: Mapping[str, ArrayLike],
        signs: Iterable[int] = (),
    ) -> None:
        self._claim(name)
        arrays = {key: np.asarray(value, dtype=np.float64) for key, value in values.items()}
        element = Element(name, kind, tuple(nodes), arrays, tuple(signs))
        check_values(element)
        self._touch(element.nodes, name)
        self._elements[name] = element

    def with_values(self, values: Mapping[str, ArrayLike | Mapping[str, ArrayLike]]) -> Self:
        """Return a network of the same structure with some values replaced.

        Parameters
        ----------
        values : mapping
            By element or noise source: a value, where the element has only one, or a
            mapping of parameter to value.

        Returns
        -------
        Network
            A new network; this one stays as it is.

        Raises
        ------
        UnknownName
            If there is no such element.
        UsageFault
            If a parameter or a shape does not belong to the element.

        Examples
        --------
        >>> from gmid.network import Network
        >>> net = Network()
        >>> net.add_resistor("r1", "out", "0", 1e3)
        >>> net.with_values({"r1": [1e3, 2e3]}).batch
        (2,)
        """
        other = type(self)()
        other.__dict__.update(
            _nodes=dict(self._nodes), _fixed=self._fixed, _elements=dict(self._elements),
            _noise=dict(self._noise),
        )  # fmt: skip
        for name, new in values.items():
            if name in self._noise:
                if not isinstance(new, Mapping):
                    raise UsageFault(f"{name} needs a mapping of white, flicker, exponent.")
                arrays = {key: np.asarray(value, dtype=np.float64) for key, value in new.items()}
                if not set(arrays) <= {"white", "flicker", "exponent"}:
                    raise UsageFault(f"noise source {name} has white, flicker and exponent only.")
                other._noise[name] = replace(self._noise[name], **arrays)  # type: ignore[arg-type]
                continue
            element = self.find(name)
            if not isinstance(new, Mapping):
                if len(element.values) != 1:
                    raise UsageFault(f"{name} has several values: {', '.join(element.values)}.")
                new = {next(iter(element.values)): new}
            other._elements[name] = element.with_values(new)
        return other

    def find(self, name: str) -> Element:
        """Return an element by its name.

        Parameters
        ----------
        name : str
            The element.

        Returns
        -------
        Element
            As it stands in the network.

        Raises
        ------
        UnknownName
            If there is none; the message names the nearest.

        Examples
        --------
        >>> from gmid.network import Network
        >>> net = Network()
        >>> net.add_capacitor("c1", "out", "0", 1e-12)
        >>> net.find("c1")
        Element(c1: capacitor out 0, capacitance=1e-12)
        """
        try:
            return self._elements[name]
        except KeyError:
            raise UnknownName(
                f"the network has no element {name}.", hint=advise(name, self._elements)
            ) from None

    def assemble(self) -> Pencil:
        """Write all elements into the matrix pencil G + sC.

        Returns
        -------
        Pencil
            Kept until an element is added.

        Raises
        ------
        UsageFault
            If the network is empty or the values of two elements do not broadcast.

        Examples
        --------
        >>> from gmid.network import Network
        >>> net = Network()
        >>> net.add_conductor("g1", "out", "0", 1e-3)
        >>> net.assemble().conductance.tolist()
        [[0.001]]
        """
        if self._pencil is None:
            unknowns = self.unknowns
            if not unknowns:
                raise UsageFault("the network has no node besides ground.")
            board = Board(unknowns, self._common_batch())
            for element in self._elements.values():
                STAMPS[element.kind](board, element)
            order = (*range(2, board.conductance.ndim), 0, 1)
            self._pencil = Pencil(
                np.ascontiguousarray(board.conductance.transpose(order)),
                np.ascontiguousarray(board.capacitance.transpose(order)),
                unknowns,
            )
        return self._pencil

    def _common_batch(self) -> tuple[int, ...]:
        batch: tuple[int, ...] = ()
        owners: list[Element | NoiseSource] = [*self._elements.values(), *self._noise.values()]
        for owner in owners:
            try:
                batch = np.broadcast_shapes(batch, owner.batch)
            except ValueError:
                raise UsageFault(
                    f"values of {owner.name} have leading axes {owner.batch}, "
                    f"which do not broadcast with the {batch} of the elements before it."
                ) from None
        return batch

    def check(self, laplace: complex) -> None:
        """Make sure that the equations have one solution, judged on the first batch item.

        Analyses call this; the verdict is kept, one for zero frequency and one for others.

        Parameters
        ----------
        laplace : complex
            Where to look [rad/s].

        Raises
        ------
        NoSolution
            If the matrix is singular; the message names the undetermined unknowns.

        Examples
        --------
        >>> from gmid.network import Network
        >>> net = Network()
        >>> net.add_capacitor("c1", "out", "0", 1e-12)
        >>> net.check(0.0)
        Traceback (most recent call last):
        ...
        gmid.errors.NoSolution: the network does not determine out at 0 Hz. Give it a resistive path to ground.
        """  # noqa: E501
        if (laplace == 0) in self._checked:
            return
        pencil = self.assemble()
        if pencil.batch and 0 in pencil.batch:
            return
        first = (0,) * len(pencil.batch)
        matrix = pencil.conductance[first] + laplace * pencil.capacitance[first]
        names = name_undetermined(matrix, pencil.unknowns)
        if names:
            raise singular_fault(names, laplace)
        self._checked.add(laplace == 0)

    def observe(self, output: Output) -> FloatArray:
        """Turn an output into the weights of the unknowns.

        Parameters
        ----------
        output : str, tuple of str, or mapping of str to float
            A node, a pair (plus, minus), or weights by node. ``i(name)`` is the current
            through a voltage source, from its plus to its minus terminal.

        Returns
        -------
        ndarray of float, shape (n,)
            Weights.

        Raises
        ------
        UnknownName
            If there is no such node or current.

        Examples
        --------
        >>> Structure(["vop", "von"]).observe(("vop", "von")).tolist()
        [1.0, -1.0]
        """
        if isinstance(output, str):
            output = {output: 1.0}
        elif not isinstance(output, Mapping):
            plus, minus = output
            output = {plus: 1.0, minus: -1.0} if plus != minus else {plus: 0.0}
        unknowns = self.unknowns
        weights = np.zeros(len(unknowns))
        for name, weight in output.items():
            if name in unknowns:
                weights[unknowns.index(name)] = weight
            elif name != GROUND:
                raise UnknownName(
                    f"the network has no node {name}.", hint=advise(name, unknowns)
                )  # fmt: skip
        return weights

    def drive(self, source: Source) -> FloatArray:
        """Turn independent sources into a right-hand side.

        Parameters
        ----------
        source : str or mapping of str to float
            A source at strength 1, or strengths [V or A] by name; all others are off.

        Returns
        -------
        ndarray of float, shape (n,)
            Right-hand side.

        Raises
        ------
        UnknownName
            If there is no such element.
        UsageFault
            If the element is not an independent source.

        Examples
        --------
        >>> from gmid.network import Network
        >>> net = Network()
        >>> net.add_current_source("i1", "0", "out")
        >>> net.drive("i1").tolist()
        [1.0]
        """
        unknowns = self.unknowns
        right = np.zeros(len(unknowns))
        for name, strength in ({source: 1.0} if isinstance(source, str) else source).items():
            element = self.find(name)
            if element.kind == "voltage_source":
                right[unknowns.index(f"i({name})")] += strength
            elif element.kind == "current_source":
                plus, minus = element.nodes
                right += strength * (self.observe(minus) - self.observe(plus))
            else:
                kinds = ("voltage_source", "current_source")
                sources = [e.name for e in self.elements if e.kind in kinds]
                raise UsageFault(
                    f"{name} is a {element.kind}, not an independent source.",
                    hint=advise(name, sources),
                )
        return right

    def __repr__(self) -> str:
        kinds: dict[str, int] = {}
        for element in self._elements.values():
            kinds[element.kind] = kinds.get(element.kind, 0) + 1
        parts = [f"{count} {kind}" for kind, count in kinds.items()] or ["no elements"]
        if self._noise:
            parts.append(f"{len(self._noise)} noise")
        batch = self._common_batch()
        return (
            f"Network({len(self._nodes)} {'node' if len(self._nodes) == 1 else 'nodes'}, "
            f"{', '.join(parts)}{f', batch {batch}' if batch else ''})"
        )
