"""Responses of a network: from sources to outputs, over frequency."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike

from gmid.network.pencil import ComplexArray, FloatArray, solve_pencil
from gmid.network.scanning import ScannedResponse
from gmid.network.structure import Output, Source, Structure


def transfers(
    network: Structure, sources: Sequence[Source], outputs: Sequence[Output], frequency: ArrayLike
) -> ComplexArray:
    """Compute the transfers from several sources to several outputs with one factorisation.

    Parameters
    ----------
    network : Network
        The network.
    sources : sequence
        What drives, each as `Structure.drive` takes it.
    outputs : sequence
        What is observed, each as `Structure.observe` takes it.
    frequency : array_like of float, shape (nf,) or (..., nf) or ()
        [Hz]; leading axes broadcast with the batch of the network.

    Returns
    -------
    ndarray of complex, shape (..., nf, n_outputs, n_sources)
        Without the frequency axis for a single number.

    Raises
    ------
    UnknownName
        If a node or source does not exist.
    NoSolution
        If the equations have no unique solution.

    Examples
    --------
    >>> from gmid.network import Network
    >>> net = Network()
    >>> net.add_current_source("i1", "0", "a")
    >>> net.add_resistor("r1", "a", "b", 1e3)
    >>> net.add_resistor("r2", "b", "0", 1e3)
    >>> transfers(net, ["i1"], ["a", "b"], 0.0).real.ravel().round(9).tolist()
    [2000.0, 1000.0]
    """
    right = np.stack([network.drive(source) for source in sources], axis=-1)
    weights = np.stack([network.observe(output) for output in outputs])
    s = 2j * np.pi * np.asarray(frequency, dtype=np.float64)
    if s.size:
        network.check(complex(s.ravel()[int(np.argmin(np.abs(s)))]))
    x = solve_pencil(network.assemble(), np.atleast_1d(s), right)
    answer = np.asarray(weights @ x, dtype=np.complex128)
    return answer[..., 0, :, :] if s.ndim == 0 else answer


def transfer(
    network: Structure, source: Source, output: Output, frequency: ArrayLike
) -> ComplexArray:
    """Compute the transfer from a source to an output.

    Parameters
    ----------
    network : Network
        The network.
    source : str or mapping
        A source at strength 1, or strengths by name.
    output : str, tuple of str, or mapping
        A node, a pair (plus, minus), or weights by node.
    frequency : array_like of float, shape (nf,) or (..., nf) or ()
        [Hz]; leading axes broadcast with the batch of the network.

    Returns
    -------
    ndarray of complex, shape (..., nf)
        Without the frequency axis for a single number.

    Raises
    ------
    UnknownName
        If a node or source does not exist.
    NoSolution
        If the equations have no unique solution.

    Examples
    --------
    >>> from gmid.network import Network
    >>> net = Network()
    >>> net.add_voltage_source("vin", "in", "0")
    >>> net.add_resistor("r1", "in", "out", 1e3)
    >>> net.add_resistor("r2", "out", "0", [1e3, 3e3])
    >>> transfer(net, "vin", "out", 0.0).real.round(9).tolist()
    [0.5, 0.75]
    """
    return transfers(network, [source], [output], frequency)[..., 0, 0]


class Transfer(ScannedResponse):
    """One transfer of a network as a function of frequency, for `gmid.network.measures`.

    Parameters
    ----------
    network : Network
        The network.
    source : str or mapping
        What drives.
    output : str, tuple of str, or mapping
        What is observed.
    reference : str, tuple of str, or mapping, optional
        The transfer is then that to `output` over that to `reference`.
    factor : float
        Multiplies it all; -1 for a loop gain.

    Examples
    --------
    >>> from gmid.network import Network
    >>> net = Network()
    >>> net.add_voltage_source("vin", "in", "0")
    >>> net.add_resistor("r1", "in", "out", 1e3)
    >>> net.add_resistor("r2", "out", "0", 1e3)
    >>> Transfer(net, "vin", "out")(0.0).real.round(9).tolist()
    0.5
    """

    def __init__(
        self, network: Structure, source: Source, output: Output, *,
        reference: Output | None = None, factor: float = 1.0,
    ) -> None:  # fmt: skip
        super().__init__(network)
        self.source = source
        self.output = output
        self.reference = reference
        self.factor = factor
        self._ask()

    def _ask(self) -> tuple[FloatArray, FloatArray]:
        entries = [e for e in (self.output, self.reference) if e is not None]
        weights = np.stack([self.network.observe(entry) for entry in entries])
        return self.network.drive(self.source)[:, None], weights

    def _answer(self, found: ComplexArray) -> ComplexArray:
        answer = self.factor * found[..., 0, 0]
        return answer if self.reference is None else answer / found[..., 1, 0]

    def __repr__(self) -> str:
        over = "" if self.reference is None else f" over {self.reference!r}"
        return f"Transfer({self.source!r} to {self.output!r}{over}, {self.network!r})"
