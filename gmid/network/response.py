"""Responses of a network: from sources to outputs, over frequency."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike

from gmid.errors import NoSolution
from gmid.network.modes import Modes, expand_transfer
from gmid.network.pencil import ComplexArray, FloatArray, Pencil, solve_pencil
from gmid.network.structure import Output, Source, Structure

_CHECK_POINTS = 3
_SCAN_ACCURACY = 1e-6
_SCAN_FLOOR = 1e-6


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


class Transfer:
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
        self.network = network
        self.source = source
        self.output = output
        self.reference = reference
        self.factor = factor
        self._known: tuple[Pencil, list[Modes] | None] | None = None
        network.drive(source)
        for entry in (output, reference):
            if entry is not None:
                network.observe(entry)

    def __call__(self, frequency: ArrayLike) -> ComplexArray:
        """Compute the transfer by direct solution at every frequency.

        Parameters
        ----------
        frequency : array_like of float, shape (nf,) or (..., nf) or ()
            [Hz].

        Returns
        -------
        ndarray of complex, shape (..., nf)
            Without the frequency axis for a single number.
        """
        if self.reference is None:
            return self.factor * transfer(self.network, self.source, self.output, frequency)
        both = transfers(self.network, [self.source], [self.output, self.reference], frequency)
        return np.asarray(self.factor * both[..., 0, 0] / both[..., 1, 0], dtype=np.complex128)

    def scan(self, frequency: ArrayLike) -> ComplexArray:
        """Compute the transfer fast on a dense grid, to about one part in a million.

        The modes of the network are found once and compared with direct solutions at three of
        the frequencies in every batch item; if one of them differs by more than 1e-6 of its size,
        or 1e-12 of the largest (poles that repeat), or there is no DC solution, all frequencies
        are solved directly.

        Parameters
        ----------
        frequency : array_like of float, shape (nf,) or (..., nf)
            [Hz].

        Returns
        -------
        ndarray of complex, shape (..., nf)
            The transfer.

        Examples
        --------
        >>> from gmid.network import Network
        >>> net = Network()
        >>> net.add_current_source("i1", "0", "out")
        >>> net.add_resistor("r1", "out", "0", 1e3)
        >>> net.add_capacitor("c1", "out", "0", 1e-9)
        >>> bool(abs(Transfer(net, "i1", "out").scan([0.0])[0] - 1e3) < 1e-6)
        True
        """
        f = np.asarray(frequency, dtype=np.float64)
        pencil = self.network.assemble()
        if self._known is None or self._known[0] is not pencil:
            if f.ndim != 1 or f.size <= 4 * _CHECK_POINTS:
                return self(f)
            self._known = pencil, self._verify(self._expand(), f)
        modes = self._known[1]
        return self(f) if modes is None else self._evaluate(modes, f)

    def _verify(self, modes: list[Modes] | None, frequency: FloatArray) -> list[Modes] | None:
        """Keep the modes only if they agree with direct solutions in every batch item."""
        if modes is None:
            return None
        points = frequency[np.linspace(0, frequency.size - 1, _CHECK_POINTS).astype(int)]
        exact = self(points)
        error = np.abs(self._evaluate(modes, points) - exact)
        # not-a-number belongs to a batch item without values and is right as it is
        size = np.abs(exact)
        floor = _SCAN_FLOOR * size.max(axis=-1, keepdims=True)
        return None if np.any(error > _SCAN_ACCURACY * np.maximum(size, floor)) else modes

    def _expand(self) -> list[Modes] | None:
        entries = [e for e in (self.output, self.reference) if e is not None]
        right = self.network.drive(self.source)
        try:
            self.network.check(0.0)
            weights = np.stack([self.network.observe(entry) for entry in entries])
            return expand_transfer(self.network.assemble(), right, weights)
        except (NoSolution, np.linalg.LinAlgError):
            return None

    def _evaluate(self, modes: list[Modes], frequency: FloatArray) -> ComplexArray:
        s = 2j * np.pi * frequency
        answer = self.factor * modes[0](s)
        return answer if len(modes) == 1 else answer / modes[1](s)

    def __repr__(self) -> str:
        over = "" if self.reference is None else f" over {self.reference!r}"
        return f"Transfer({self.source!r} to {self.output!r}{over}, {self.network!r})"
