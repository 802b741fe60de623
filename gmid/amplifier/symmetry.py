"""Half circuits: what differential signals see of two equal sides, and what common ones see.

Both sides of the amplifier are alike, so differential signals move only differences of the two
sides and common ones only sums. Each part has half the unknowns; it is asked in the names of the
whole circuit.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from gmid.circuit.bias import Bias
from gmid.circuit.circuit import Circuit
from gmid.errors import UsageFault
from gmid.network.network import Network
from gmid.network.pencil import Pencil
from gmid.network.stamps import GROUND, NoiseSource
from gmid.network.structure import Output, Source, Structure

Array = NDArray[np.float64]

_SIDED = re.compile(r"(?P<name>.*_)(?P<side>[pn])(?P<rest>m?(_\d+)?\)?)")
_PORTS = {"vip": "vin", "vop": "von", "i(vip)": "i(vin)"}
_PORTS |= {twin: name for name, twin in _PORTS.items()}


def find_twin(name: str) -> str:
    """Give the name of a node's counterpart on the other side.

    Parameters
    ----------
    name : str
        A node, or a current ``i(source)``.

    Returns
    -------
    str
        The name itself where it belongs to no side.

    Examples
    --------
    >>> find_twin("mirror_p"), find_twin("vop"), find_twin("load_n_1"), find_twin("tail")
    ('mirror_n', 'von', 'load_p_1', 'tail')
    """
    if name in _PORTS:
        return _PORTS[name]
    found = _SIDED.fullmatch(name)
    if found is None:
        return name
    return f"{found['name']}{'n' if found['side'] == 'p' else 'p'}{found['rest']}"


def find_sides(circuit: Circuit) -> dict[str, str]:
    """Find the nodes of one side of an amplifier's circuit and their images on the other.

    Parameters
    ----------
    circuit : Circuit
        The amplifier with whatever surrounds it, both sides alike.

    Returns
    -------
    dict of str to str
        From the side that comes first to the other.

    Examples
    --------
    >>> c = Circuit()
    >>> for side in "pn":
    ...     c.add_resistor(f"rl{side}", f"vo{side}", "vcm", 1e6)
    >>> find_sides(c)
    {'vop': 'von'}
    """
    found: dict[str, str] = {}
    for node in circuit.nodes:
        twin = find_twin(node)
        if twin != node and twin in circuit.nodes and twin not in found:
            found[node] = twin
    return found


class SideNetwork(Structure):
    """One half of a symmetric circuit at its bias point, for the analyses of `gmid.network`.

    Parameters
    ----------
    bias : Bias
        Solved with both sides joined.
    drives : sequence of str
        Sources that stay.
    differential : bool
        What differential signals see, with noise; what common ones see otherwise, without.

    Examples
    --------
    >>> from gmid.circuit.bias import solve_bias
    >>> c = Circuit()
    >>> for side in "pn":
    ...     c.add_voltage_source(f"vi{side}", f"vi{side}", "0", 1.0)
    ...     c.add_resistor(f"r_{side}", f"vi{side}", "tail", 1e3)
    >>> c.add_resistor("rt", "tail", "0", 1e3)
    >>> bias = solve_bias(c, {}, mirror=find_sides(c))
    >>> SideNetwork(bias, ("vip", "vin"), differential=True).unknowns
    ('vip', 'i(vip)')
    """

    def __init__(self, bias: Bias, drives: tuple[str, ...], *, differential: bool) -> None:
        super().__init__()
        if bias.fold is None:
            raise UsageFault("half circuits need a bias solved with both sides joined.")
        self._fold, self._circuit, self._differential = bias.fold, bias.circuit, differential
        self._twins = {there: here for here, there in bias.fold.kept.items()}
        kept = tuple(dict.fromkeys(self._twins.get(name, name) for name in drives))
        if differential:
            self._take(bias.linearise_half(drives=kept))
        else:
            self._take(bias.join_sides().linearise(drives=kept, noise=False))

    def _take(self, part: Network) -> None:
        self._part = part
        self._nodes = dict.fromkeys(part.nodes)
        self._elements = {element.name: element for element in part.elements}
        self._noise = {one.name: one for source in part.noise_sources for one in self._both(source)}
        if self._differential:
            heard = {one.owner for one in self._noise.values()}
            noisy = (*self._circuit.transistors, *self._circuit.resistors)
            self._noise |= {one.name: _silence(one.name) for one in noisy if one.name not in heard}

    def add_across(self, name: str, node: str) -> None:
        """Add a current source from a node's image into the node, for differential signals.

        Parameters
        ----------
        name : str
            Of the source.
        node : str
            On the side that is kept.
        """
        self._part.add_current_source(name, GROUND, node)
        self._take(self._part)

    def _both(self, source: NoiseSource) -> list[NoiseSource]:
        """Give a noise source of the half circuit as those of the whole that it stands for.

        A current on one side is half of it on either, so a quarter of its density is left.
        """
        if source.owner not in self._fold.kept:
            return [replace(source, white=source.white / 2, flicker=source.flicker / 2)]
        quarter = replace(source, white=source.white / 4, flicker=source.flicker / 4)
        owner = self._fold.kept[source.owner]
        name = owner + source.name.removeprefix(source.owner)
        return [quarter, replace(quarter, name=name, owner=owner)]

    def with_values(self, values: Mapping[str, float]) -> SideNetwork:  # type: ignore[override]
        """Give the same half circuit with some values replaced.

        Parameters
        ----------
        values : mapping of str to float
            By element of the side that is kept.

        Returns
        -------
        SideNetwork
            Another one.
        """
        other = object.__new__(SideNetwork)
        other.__dict__.update(self.__dict__, _pencil=None, _unknowns=None, _checked=set())
        other._take(self._part.with_values(values))
        return other

    def assemble(self) -> Pencil:
        """Give the equations of the half circuit."""
        return self._part.assemble()

    def observe(self, output: Output) -> Array:
        """Turn an output of the whole circuit into weights of this half's unknowns.

        Parameters
        ----------
        output : str, tuple of str, or mapping of str to float
            As for `Structure.observe`.

        Returns
        -------
        ndarray, shape (n,)
            Weights.
        """
        if isinstance(output, str):
            output = {output: 1.0}
        elif not isinstance(output, Mapping):
            plus, minus = output
            output = {plus: 1.0, minus: -1.0}
        total = np.zeros(len(self.unknowns))
        for name, weight in output.items():
            if name in self.unknowns:
                total[self.unknowns.index(name)] += weight * self._part_of(name)
            elif (twin := find_twin(name)) in self.unknowns:
                sign = -1.0 if self._differential else 1.0
                total[self.unknowns.index(twin)] += sign * weight * self._part_of(twin)
            elif name not in self._circuit.nodes:
                total += weight * self._part.observe(name)
        return total

    def _part_of(self, unknown: str) -> float:
        """Tell which part of a current of the joined circuit flows on one side."""
        source = unknown.removeprefix("i(").removesuffix(")")
        joined = unknown.startswith("i(") and source in self._fold.kept and not self._differential
        return 0.5 if joined else 1.0

    def drive(self, source: Source) -> Array:
        """Turn sources of the whole circuit into this half's right-hand side.

        Parameters
        ----------
        source : str or mapping of str to float
            As for `Structure.drive`.

        Returns
        -------
        ndarray, shape (n,)
            Right-hand side.
        """
        total = np.zeros(len(self.unknowns))
        for name, strength in ({source: 1.0} if isinstance(source, str) else source).items():
            here = self._twins.get(name, name)
            sided = here in self._fold.kept
            if self._differential and not sided and here not in self._elements:
                self._circuit.find(name)
                continue
            share = self._share(here) * (-1.0 if self._differential and here != name else 1.0)
            total += share * strength * self._part.drive(here)
        return total

    def _share(self, source: str) -> float:
        """Tell with which part of its strength a source of one side drives this half."""
        if source not in self._fold.kept:
            return 1.0
        joined = not self._differential and self._elements[source].kind == "current_source"
        return 1.0 if joined else 0.5


def _silence(owner: str) -> NoiseSource:
    """Give the noise of an element on the axis: none that differential signals see."""
    none = np.zeros(())
    return NoiseSource(owner, owner, (GROUND, GROUND), (1, 1), none, none, np.ones(()))
