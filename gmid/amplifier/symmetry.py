"""Half circuits: a symmetric network split into its differential and its common part.

Both sides of the amplifier are alike, so differential signals move only differences of the two
sides and common ones only sums. Each part has far fewer unknowns than the whole.
"""

from __future__ import annotations

import re

import numpy as np
from numpy.typing import NDArray

from gmid.errors import UsageFault
from gmid.network.network import Network
from gmid.network.pencil import Pencil
from gmid.network.structure import Output, Source, Structure

Array = NDArray[np.float64]

_SIDED = re.compile(r"(?P<name>.*_)(?P<side>[pn])(?P<rest>m?(_\d+)?\)?)")
_PORTS = {"vip": "vin", "vop": "von", "i(vip)": "i(vin)"}
_PORTS |= {twin: name for name, twin in _PORTS.items()}


def find_twin(name: str) -> str:
    """Give the name of an unknown's counterpart on the other side.

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


class HalfNetwork(Structure):
    """One part of a symmetric network, for the analyses of `gmid.network`.

    Parameters
    ----------
    whole : Network
        Equal on both sides.
    differential : bool
        The differential part; the common one otherwise.

    Raises
    ------
    UsageFault
        If there is no unknown with a counterpart.

    Examples
    --------
    >>> net = Network()
    >>> for side in "pn":
    ...     net.add_voltage_source(f"vi{side}", f"vi{side}", "0")
    ...     net.add_resistor(f"r{side}", f"vi{side}", "tail", 1e3)
    >>> net.add_resistor("rt", "tail", "0", 1e3)
    >>> HalfNetwork(net, differential=True).assemble().size
    2
    """

    def __init__(self, whole: Network, *, differential: bool) -> None:
        super().__init__()
        self._whole = whole
        self._nodes = dict.fromkeys(whole.nodes)
        self._elements = {element.name: element for element in whole.elements}
        self._noise = {source.name: source for source in whole.noise_sources}
        self._basis, self._labels = _make_basis(whole.unknowns, differential)

    def assemble(self) -> Pencil:
        """Project the whole network's equations on this part."""
        if self._pencil is None:
            pencil, basis = self._whole.assemble(), self._basis
            conductance = basis.T @ pencil.conductance @ basis
            self._pencil = Pencil(conductance, basis.T @ pencil.capacitance @ basis, self._labels)
        return self._pencil

    def observe(self, output: Output) -> Array:
        """Turn an output into weights of this part's unknowns.

        Parameters
        ----------
        output : str, tuple of str, or mapping of str to float
            As for `Structure.observe`.

        Returns
        -------
        ndarray, shape (n,)
            Weights.
        """
        return np.asarray(self._whole.observe(output) @ self._basis)

    def drive(self, source: Source) -> Array:
        """Turn sources into this part's right-hand side.

        Parameters
        ----------
        source : str or mapping of str to float
            As for `Structure.drive`.

        Returns
        -------
        ndarray, shape (n,)
            Right-hand side.
        """
        return np.asarray(self._basis.T @ self._whole.drive(source))


def _make_basis(unknowns: tuple[str, ...], differential: bool) -> tuple[Array, tuple[str, ...]]:
    index = {name: k for k, name in enumerate(unknowns)}
    columns, labels = [], []
    for name in unknowns:
        twin = find_twin(name)
        column = np.zeros(len(unknowns))
        if twin == name or twin not in index:
            if differential:
                continue
            column[index[name]] = 1.0
        elif index[twin] < index[name]:
            continue
        else:
            half = np.sqrt(0.5)
            column[index[name]], column[index[twin]] = half, -half if differential else half
        columns.append(column)
        labels.append(name)
    if not columns:
        raise UsageFault("the network has no two sides.")
    return np.stack(columns, axis=-1), tuple(labels)
