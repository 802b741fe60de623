"""Responses that are evaluated directly for answers and by their modes for scanning."""

from __future__ import annotations

from abc import ABC, abstractmethod

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gmid.errors import NoSolution
from gmid.network.modes import Modes, expand_transfer
from gmid.network.pencil import ComplexArray, FloatArray, Pencil, solve_pencil
from gmid.network.structure import Structure

_CHECK_POINTS = 3
_SCAN_ACCURACY = 1e-6
_SCAN_FLOOR = 1e-6


class ScannedResponse(ABC):
    """A response made of several transfers of one network; base of those in `gmid.network`.

    Parameters
    ----------
    network : Structure
        The network.
    """

    def __init__(self, network: Structure) -> None:
        self.network = network
        self._known: tuple[Pencil, Modes | None, NDArray[np.bool_]] | None = None

    @abstractmethod
    def _ask(self) -> tuple[FloatArray, FloatArray]:
        """Give right-hand sides, shape (n, k), and what is observed, shape (m, n)."""

    @abstractmethod
    def _answer(self, found: ComplexArray) -> ComplexArray:
        """Turn transfers of shape (..., nf, m, k) into the response, shape (..., nf)."""

    def __call__(self, frequency: ArrayLike) -> ComplexArray:
        """Compute the response by direct solution at every frequency.

        Parameters
        ----------
        frequency : array_like of float, shape (nf,) or (..., nf) or ()
            [Hz].

        Returns
        -------
        ndarray of complex, shape (..., nf)
            Without the frequency axis for a single number.
        """
        f = np.asarray(frequency, dtype=np.float64)
        if f.size:
            self.network.check(2j * np.pi * float(f.ravel()[int(np.argmin(np.abs(f)))]))
        answer = self._solve(self.network.assemble(), np.atleast_1d(f))
        return np.asarray(answer[..., 0] if f.ndim == 0 else answer, dtype=np.complex128)

    def scan(self, frequency: ArrayLike) -> ComplexArray:
        """Compute the response fast on a dense grid, to about one part in a million.

        The modes of the network are found once and compared with direct solutions at three of
        the frequencies; batch items where one of them differs by more than 1e-6 of its size, or
        1e-12 of the largest (poles that repeat), are solved directly at all frequencies, and all
        items are if there is no DC solution.

        Parameters
        ----------
        frequency : array_like of float, shape (nf,) or (..., nf)
            [Hz].

        Returns
        -------
        ndarray of complex, shape (..., nf)
            The response.

        Examples
        --------
        >>> from gmid.network import Network, Transfer
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
            modes = self._expand()
            self._known = pencil, modes, self._verify(modes, f)
        _, modes, good = self._known
        if modes is None or not good.any():
            return self(f)
        found = self._answer(modes(2j * np.pi * f))
        return found if good.all() else self._mend(found, pencil, f, ~good)

    def _solve(self, pencil: Pencil, frequency: FloatArray) -> ComplexArray:
        right, weights = self._ask()
        return self._answer(weights @ solve_pencil(pencil, 2j * np.pi * frequency, right))

    def _expand(self) -> Modes | None:
        try:
            self.network.check(0.0)
            return expand_transfer(self.network.assemble(), *self._ask())
        except (NoSolution, np.linalg.LinAlgError):
            return None

    def _verify(self, modes: Modes | None, frequency: FloatArray) -> NDArray[np.bool_]:
        """Tell which batch items the modes describe."""
        if modes is None:
            return np.zeros((), dtype=bool)
        points = frequency[np.linspace(0, frequency.size - 1, _CHECK_POINTS).astype(int)]
        exact = self(points)
        with np.errstate(invalid="ignore", divide="ignore"):
            error = np.abs(self._answer(modes(2j * np.pi * points)) - exact)
        # not-a-number belongs to a batch item without values and is right as it is
        size = np.abs(exact)
        floor = _SCAN_FLOOR * size.max(axis=-1, keepdims=True)
        wrong = error > _SCAN_ACCURACY * np.maximum(size, floor)
        wrong |= np.isnan(error) & ~np.isnan(exact)
        return np.asarray(~wrong.any(axis=-1))

    def _mend(
        self, found: ComplexArray, pencil: Pencil, frequency: FloatArray, bad: NDArray[np.bool_]
    ) -> ComplexArray:
        """Solve some items of the batch directly."""
        matrices = [
            np.broadcast_to(part, (*bad.shape, *part.shape[-2:]))[bad]
            for part in (pencil.conductance, pencil.capacitance)
        ]
        f = frequency
        if f.ndim > 1:
            f = np.broadcast_to(f, (*bad.shape, f.shape[-1]))[bad]
        found = np.array(np.broadcast_to(found, (*bad.shape, found.shape[-1])))
        found[bad] = self._solve(Pencil(matrices[0], matrices[1], pencil.unknowns), f)
        return found
