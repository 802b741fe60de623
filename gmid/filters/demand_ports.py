"""A filter seen from its amplifiers: exact, and fast enough to search with.

The passive network is solved once for each frequency; what remains for each set of amplifiers
is one small system, with reciprocals as parameters, so that infinite gain and bandwidth are
plain zeros.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike

from gmid.filters.elements import AmplifierModel
from gmid.filters.realisation import Realisation
from gmid.network.pencil import ComplexArray, FloatArray

Parasitics = Mapping[str, AmplifierModel]


@dataclass(frozen=True, eq=False)
class Reciprocals:
    """Amplifiers by the reciprocals of what makes them good; all zero is the ideal amplifier.

    Parameters
    ----------
    gm : ndarray of float, shape (..., K)
        1/gm_total [ohm].
    gain : ndarray of float, shape (..., K)
        1/intrinsic gain, own output conductance over gm_total [-].
    pole : ndarray of float, shape (..., K)
        1/excess-phase pole [s/rad].
    load : ndarray of float, shape (..., K)
        Own output capacitance over gm_total [s/rad].

    Examples
    --------
    >>> one = Reciprocals.of(AmplifierModel(gm_total=1e-3, output_conductance=1e-5))
    >>> one.gm.tolist(), one.gain.tolist()
    ([1000.0], [0.01])
    """

    gm: FloatArray
    gain: FloatArray
    pole: FloatArray
    load: FloatArray

    @classmethod
    def of(cls, *models: AmplifierModel) -> Reciprocals:
        """Take the values of amplifier models, one for each position."""
        columns = []
        for model in models:
            gm = np.asarray(model.gm_total, dtype=np.float64)
            excess = 2 * np.pi * np.asarray(model.excess_pole, dtype=np.float64)
            columns.append(
                np.broadcast_arrays(
                    1.0 / gm, np.asarray(model.output_conductance) / gm, 1.0 / excess,
                    np.asarray(model.output_capacitance) / gm,
                )
            )  # fmt: skip
        return cls(*(np.stack([c[k] for c in columns], axis=-1) for k in range(4)))

    def models(self) -> list[AmplifierModel]:
        """Return the amplifier models, one for each position; all gm finite.

        Returns
        -------
        list of AmplifierModel
            With batched values.
        """
        gm = 1.0 / self.gm
        with np.errstate(divide="ignore"):
            pole = 1.0 / (2 * np.pi * self.pole)
        return [
            AmplifierModel(
                gm_total=gm[..., k], output_conductance=(gm * self.gain)[..., k],
                output_capacitance=(gm * self.load)[..., k], excess_pole=pole[..., k],
            )
            for k in range(gm.shape[-1])
        ]  # fmt: skip

    def only(self, k: int, *, keep_gm: bool = False) -> Reciprocals:
        """Return the set in which all but one amplifier are ideal.

        Parameters
        ----------
        k : int
            The one that stays.
        keep_gm : bool
            Whether the others keep their gm, as the transconductors of a gm-c filter must.

        Returns
        -------
        Reciprocals
            Of the same shape.
        """
        keep = np.zeros(self.gm.shape[-1])
        keep[k] = 1.0
        alone = {name: value * keep for name, value in vars(self).items()}
        return Reciprocals(**{**alone, "gm": self.gm}) if keep_gm else Reciprocals(**alone)


@dataclass(frozen=True, eq=False)
class _Solved:
    """The passive network at some frequencies, between its ports."""

    laplace: ComplexArray
    at_output: ComplexArray
    at_control: ComplexArray
    at_end: ComplexArray
    input_output: ComplexArray
    input_control: ComplexArray
    input_end: ComplexArray


class Ports:
    """The passive network of a realisation between its input, its amplifiers and its output.

    Parameters
    ----------
    realisation : Realisation
        The filter.
    rscale, cscale : float
        Multiply all resistors, all capacitors [-].
    parasitics : mapping of str to AmplifierModel, optional
        Own capacitances of the amplifiers that do not change in a search, by position.
    values : mapping of str to float, optional
        Factors on single elements [-].

    Examples
    --------
    >>> from gmid.filters import FilterSpec, realise
    >>> made = realise(FilterSpec(response="butterworth", order=1, edge=1e6), capacitor=2e-12)
    >>> ports = Ports(made)
    >>> real = Reciprocals.of(AmplifierModel(gm_total=1e-3))
    >>> float(abs(ports.respond(real, np.array([1e6])))[0].round(4))
    0.6896
    """

    def __init__(
        self, realisation: Realisation, *, rscale: float = 1.0, cscale: float = 1.0,
        parasitics: Parasitics | None = None, values: Mapping[str, float] | None = None,
    ) -> None:  # fmt: skip
        self.realisation, self.rscale, self.cscale = realisation, rscale, cscale
        own = parasitics or {}
        silent = {
            place.name: replace(own.get(place.name, AmplifierModel()), gm_total=0.0,
                                output_conductance=0.0, excess_pole=np.inf)
            for place in realisation.amplifiers
        }  # fmt: skip
        network = realisation.network(silent, rscale=rscale, cscale=cscale, factors=values)
        pencil = network.assemble()
        source = network.find("vin").nodes[0]
        kept = [
            k for k, name in enumerate(pencil.unknowns)
            if name != source and not name.startswith(("x(", "i("))
        ]  # fmt: skip
        self.unknowns = tuple(pencil.unknowns[k] for k in kept)
        grid = np.ix_(kept, kept)
        self.conductance, self.capacitance = pencil.conductance[grid], pencil.capacitance[grid]
        column = pencil.unknowns.index(source)
        self._input = pencil.conductance[kept, column], pencil.capacitance[kept, column]
        inject, control = [], []
        for place in realisation.amplifiers:
            nodes = network.find(place.name).nodes
            inverted = place.element is not None and realisation.find(place.element).crossed
            inject.append(network.observe((nodes[1], nodes[0])))
            control.append((-1.0 if inverted else 1.0) * network.observe((nodes[2], nodes[3])))
        self._inject = np.stack(inject, axis=-1)[kept]
        # the output voltage counts in the direction in which the current is delivered
        self._control, self._outputs = np.stack(control)[:, kept], self._inject.T
        # a control at the driven source itself has a fixed share
        self._fixed = np.stack(control)[:, column]
        self._end = network.observe(realisation.output)[kept]
        self._known: tuple[bytes, _Solved] | None = None

    def solve(self, frequency: ArrayLike) -> _Solved:
        """Solve the passive network; the last frequencies asked for are remembered.

        Parameters
        ----------
        frequency : array_like of float, shape (..., nf)
            Above 0 [Hz].

        Returns
        -------
        _Solved
            Transfers between the ports.
        """
        f = np.ascontiguousarray(frequency, dtype=np.float64)
        key = f.tobytes() + bytes(str(f.shape), "ascii")
        if self._known is None or self._known[0] != key:
            self._known = key, self._solve(f)
        return self._known[1]

    def _solve(self, frequency: FloatArray) -> _Solved:
        s = np.asarray(2j * np.pi * frequency, dtype=np.complex128)
        matrix = self.conductance + s[..., None, None] * self.capacitance
        drive = -(self._input[0] + s[..., None] * self._input[1])
        inject = np.broadcast_to(self._inject, (*s.shape, *self._inject.shape))
        x = np.linalg.solve(matrix, np.concatenate([inject, drive[..., None]], axis=-1))
        parts: list[ComplexArray] = [
            weights @ x for weights in (self._outputs, self._control, self._end[None, :])
        ]
        out, control, end = ((p[..., :-1], p[..., -1]) for p in parts)
        return _Solved(
            s, out[0], control[0], end[0][..., 0, :], out[1], control[1] + self._fixed,
            end[1][..., 0],
        )  # fmt: skip

    def find_currents(self, real: Reciprocals, frequency: ArrayLike) -> ComplexArray:
        """Return the current that each amplifier delivers into the network.

        Parameters
        ----------
        real : Reciprocals
            The amplifiers, of shape (..., K).
        frequency : array_like of float, shape (nf,) or (..., nf)
            Above 0 [Hz].

        Returns
        -------
        ndarray of complex, shape (..., nf, K)
            For 1 V at the input, own conductance and capacitance counted outside [A].
        """
        net = self.solve(frequency)
        own, matrix = self._couple(real, net)
        right = net.input_control - own * net.input_output
        return np.asarray(np.linalg.solve(matrix, right[..., None])[..., 0])

    @staticmethod
    def _couple(real: Reciprocals, net: _Solved) -> tuple[ComplexArray, ComplexArray]:
        """Return the own admittances over gm, and the matrix that couples the amplifiers."""
        s = net.laplace[..., None]
        lag = 1.0 + s * real.pole[..., None, :]
        own = lag * (real.gain[..., None, :] + s * real.load[..., None, :])
        matrix = own[..., :, None] * net.at_output - net.at_control
        diagonal = np.arange(real.gm.shape[-1])
        matrix[..., diagonal, diagonal] += lag * real.gm[..., None, :]
        return own, matrix

    def carry(self, real: Reciprocals, frequency: ArrayLike) -> ComplexArray:
        """Return what 1 A in parallel with each amplifier's current makes at the output.

        Parameters
        ----------
        real : Reciprocals
            The amplifiers, of shape (..., K).
        frequency : array_like of float, shape (nf,) or (..., nf)
            Above 0 [Hz].

        Returns
        -------
        ndarray of complex, shape (..., nf, K)
            [ohm].
        """
        net = self.solve(frequency)
        own, matrix = self._couple(real, net)
        injected = net.at_control - own[..., :, None] * net.at_output
        current = np.linalg.solve(matrix, injected)
        return np.asarray((net.at_end[..., None, :] @ current)[..., 0, :] + net.at_end)

    def find_loop_gain(self, real: Reciprocals, k: int, frequency: ArrayLike) -> ComplexArray:
        """Return the loop gain around one amplifier, all others at work.

        Parameters
        ----------
        real : Reciprocals
            The amplifiers, of shape (K,), the one in question with finite gm.
        k : int
            Place of the amplifier.
        frequency : array_like of float, shape (nf,)
            Above 0 [Hz].

        Returns
        -------
        ndarray of complex, shape (nf,)
            Return ratio of its transconductance, positive for negative feedback [-].
        """
        net = self.solve(frequency)
        own, matrix = self._couple(real, net)
        lag = 1.0 + net.laplace * real.pole[k]
        others = np.arange(real.gm.shape[-1]) != k
        current = np.ones((*net.laplace.shape, real.gm.shape[-1]), dtype=np.complex128)
        inner = matrix[..., others, :][..., :, others]
        right = -matrix[..., others, k]
        current[..., others] = np.linalg.solve(inner, right[..., None])[..., 0]
        seen, kept = ((port[..., k, :] * current).sum(axis=-1)
                      for port in (net.at_control, net.at_output))  # fmt: skip
        return np.asarray(-seen / (lag * real.gm[k] + own[..., k] * kept))

    def respond(self, real: Reciprocals, frequency: ArrayLike) -> ComplexArray:
        """Compute the response of the filter with real amplifiers.

        Parameters
        ----------
        real : Reciprocals
            The amplifiers, of shape (..., K).
        frequency : array_like of float, shape (nf,) or (..., nf)
            Above 0 [Hz].

        Returns
        -------
        ndarray of complex, shape (..., nf)
            The transfer [-].
        """
        current = self.find_currents(real, frequency)
        net = self.solve(frequency)
        return np.asarray((net.at_end * current).sum(axis=-1) + net.input_end)
