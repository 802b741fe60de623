"""A circuit in time: steps of an implicit rule from a bias point, all items of a batch at once."""

from __future__ import annotations

from collections.abc import Mapping
from functools import cached_property

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gmid.circuit.bias import Bias
from gmid.circuit.linearise import evaluate_small_signal
from gmid.circuit.scatter import Scatter

Array = NDArray[np.float64]

_ORDER = ("gate", "drain", "source", "bulk")
"""Rows and columns of a unit's capacitance matrix."""

_RENEWAL = 2
"""Strides for which the capacitances are kept, once the sources stand still."""


class Transient:
    """The state of a circuit in time.

    Parameters
    ----------
    bias : Bias
        Where it begins; not-a-number where there is no bias point.
    moving : mapping of str to array_like, shape (...)
        Slopes of the voltage sources that may move [V/s].

    Notes
    -----
    Second-order backward differences of unequal strides, the channel currents linearised and the
    capacitances taken at the state extrapolated from the last two: one matrix a stride. The
    equations are ``C(v) dv/dt + i(v) = 0``; tables hold C, no charges.

    References
    ----------
    .. [1] Gear, C. W. (1971). Numerical Initial Value Problems in Ordinary Differential
       Equations. Prentice-Hall, ch. 11.

    Examples
    --------
    >>> from gmid.circuit import Circuit, solve_bias
    >>> c = Circuit()
    >>> c.add_voltage_source("vin", "in", "0", 0.0)
    >>> c.add_resistor("r1", "in", "out", 1e3)
    >>> c.add_capacitor("c1", "out", "0", 1e-9)
    >>> run = Transient(solve_bias(c, {}), {"vin": 1e9})
    >>> run.advance(1e-9, moves=True)  # up to 1 V at once
    >>> for _ in range(100):
    ...     run.advance(1e-8)
    >>> round(float(run.voltage("out")), 3)  # 1 - 1/e
    0.632
    """

    def __init__(self, bias: Bias, moving: Mapping[str, ArrayLike]) -> None:
        self._equations = bias.equations
        self._unknown = np.array(bias.found.unknown)
        self._unknown[:, ~bias.found.converged] = np.nan
        equations = self._equations
        rates = {name: equations.flat(np.asarray(rate, dtype=np.float64))
                 for name, rate in moving.items()}  # fmt: skip
        wide = max((rate.size for rate in rates.values()), default=1)
        self._rate = np.stack([
            np.broadcast_to(
                sum((s * rates[name] for name, s in path if name in rates), np.zeros(1)), wide
            )
            for path in equations.potentials.paths
        ])  # fmt: skip
        self._offset = np.broadcast_to(
            equations.offset, (len(equations.potentials.nodes), equations.size)
        ).copy()
        self._before: tuple[Array, Array] | None = None
        self._kept = np.zeros((0, 0))
        self._age = 0

    def voltage(self, plus: str, minus: str = "0") -> Array:
        """Give the voltage between two nodes.

        Parameters
        ----------
        plus, minus : str
            Nodes.

        Returns
        -------
        ndarray, shape (...)
            [V].
        """
        rows, index = self._voltages(self._unknown), self._equations.index
        return np.asarray((rows[index[plus]] - rows[index[minus]]).reshape(self._equations.batch))

    def advance(self, stride: ArrayLike, *, moves: bool = False, begins: bool = False) -> None:
        """Go on in time.

        Parameters
        ----------
        stride : array_like, shape (...)
            By how much, item by item [s].
        moves : bool, keyword-only
            Whether the sources move meanwhile.
        begins : bool, keyword-only
            Whether slopes jump here, so that what was before says nothing about what comes.
        """
        h = np.broadcast_to(self._equations.flat(np.asarray(stride, dtype=np.float64)),
                            (self._equations.size,))  # fmt: skip
        if moves:
            self._offset += h * self._rate
        if moves or begins:
            self._age = 0
        old = self._unknown
        if self._before is None or begins:
            lead, past, guess = np.ones_like(h), old, old
        else:
            older, last = self._before
            r = h / last
            guess = old + r * (old - older)
            lead = (1 + 2 * r) / (1 + r)
            past = ((1 + r) * old - r**2 / (1 + r) * older) / lead
        self._before = old, h
        self._unknown = guess + self._correct(guess, past, lead / h, moves)

    def _correct(self, guess: Array, past: Array, rate: Array, moves: bool) -> Array:
        """Solve the equations of one stride, linear around a guess."""
        equations = self._equations
        rows = self._voltages(guess)
        bad = ~(np.isfinite(rows).all(axis=0) & np.isfinite(rate))
        rows[:, bad] = 0.0
        leaving, slopes = equations.linearise(rows)
        if self._age % _RENEWAL == 0:
            self._kept = self._capacitances(rows)
        self._age += 1
        capacitances = self._kept
        n, m = guess.shape[1], equations.potentials.size
        matrix = np.ascontiguousarray(self._meet(capacitances).T).reshape(n, m, m)
        matrix *= rate[:, None, None]
        charging = np.einsum("nij,jn->ni", matrix, guess - past)
        if moves:
            charging += self._push(capacitances).T
        slopes += matrix
        slopes[bad], charging[bad] = np.eye(m), 0.0
        try:
            change = np.linalg.solve(slopes, (leaving + charging)[..., None])
        except np.linalg.LinAlgError:  # those of the batch whose pivots are zero have no solution
            dead = np.linalg.slogdet(slopes)[0] == 0
            slopes[dead], bad = np.eye(m), bad | dead
            change = np.linalg.solve(slopes, (leaving + charging)[..., None])
        change = -change[..., 0].T
        change[:, bad] = np.nan
        return np.asarray(change)

    def _voltages(self, unknown: Array) -> Array:
        extended = np.concatenate([unknown, np.zeros((1, unknown.shape[1]))])
        return np.asarray(extended[self._equations.potentials.cluster] + self._offset)

    def _capacitances(self, rows: Array) -> Array:
        """Give all entries of the units' matrices, then the capacitors, shape (entries, n)."""
        equations = self._equations
        small = evaluate_small_signal(equations, equations.biases(rows)).capacitance
        entries = small.transpose(0, 2, 3, 1).reshape(-1, rows.shape[1])
        fixed = equations.capacitors
        return np.concatenate([entries, np.broadcast_to(fixed, (len(fixed), rows.shape[1]))])

    @cached_property
    def _terms(self) -> list[tuple[int, int, int, float]]:
        """Node whose charge it is, node of the voltage, entry, sign."""
        equations, terms = self._equations, []
        index = equations.index
        for k, unit in enumerate(equations.units):
            nodes = [index[getattr(unit, end)] for end in _ORDER]
            terms += [
                (a, b, 16 * k + 4 * i + j, 1.0)
                for i, a in enumerate(nodes) for j, b in enumerate(nodes)
            ]  # fmt: skip
        for k, one in enumerate(equations.circuit.capacitors, 16 * len(equations.units)):
            plus, minus = index[one.plus], index[one.minus]
            for node, sign in ((plus, 1.0), (minus, -1.0)):
                terms += [(node, plus, k, sign), (node, minus, k, -sign)]
        return terms

    @cached_property
    def _meet(self) -> Scatter:
        """From entries to the matrix between unknowns."""
        cluster, m = self._equations.potentials.cluster, self._equations.potentials.size
        return Scatter.of(m * m, (
            (int(cluster[a] * m + cluster[b]) if min(cluster[a], cluster[b]) >= 0 else -1, k, w)
            for a, b, k, w in self._terms
        ))  # fmt: skip

    def _push(self, capacitances: Array) -> Array:
        """Give the currents that moving sources push into the unknowns, shape (m, n)."""
        cluster = self._equations.potentials.cluster
        found = np.zeros((self._equations.potentials.size, capacitances.shape[1]))
        for a, b, k, weight in self._terms:
            if cluster[a] >= 0 and self._rate[b].any():
                found[cluster[a]] += weight * capacitances[k] * self._rate[b]
        return found
