"""Sums of signed rows into rows: how currents meet at nodes, over a whole batch at once."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gmid.circuit.circuit import Circuit

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Scatter:
    """A constant sparse matrix that adds rows of values into rows of sums.

    Parameters
    ----------
    rows : int
        Number of sums.
    targets : ndarray of int, shape (t,)
        Sums that receive anything.
    starts : ndarray of int, shape (t,)
        Where the terms of each target begin.
    order : ndarray of int, shape (terms,)
        Row of values of each term.
    weights : ndarray of float, shape (terms, 1)
        Factor of each term.

    Examples
    --------
    >>> Scatter.of(2, [(0, 0, 1.0), (0, 1, -1.0)])(np.array([[3.0], [1.0]])).ravel()
    array([2., 0.])
    """

    rows: int
    targets: NDArray[np.intp]
    starts: NDArray[np.intp]
    order: NDArray[np.intp]
    weights: Array

    @classmethod
    def of(cls, rows: int, terms: Iterable[tuple[int, int, float]]) -> Scatter:
        """Make the matrix from its terms.

        Parameters
        ----------
        rows : int
            Number of sums.
        terms : iterable of tuple
            (target, row of values, factor); the same pair adds up, and a target below zero is
            left out.

        Returns
        -------
        Scatter
            The matrix.

        Examples
        --------
        >>> Scatter.of(1, [(0, 0, 1.0), (0, 0, -1.0), (-1, 0, 1.0)]).order.size
        0
        """
        total: dict[tuple[int, int], float] = {}
        for target, row, factor in terms:
            if target >= 0:
                total[target, row] = total.get((target, row), 0.0) + factor
        kept = sorted((key, factor) for key, factor in total.items() if factor != 0.0)
        places = np.array([target for (target, _), _ in kept], dtype=np.intp)
        targets, starts = np.unique(places, return_index=True)
        order = np.array([row for (_, row), _ in kept], dtype=np.intp)
        weights = np.array([factor for _, factor in kept], dtype=np.float64)[:, None]
        return cls(rows, targets, starts, order, weights)

    def __call__(self, values: Array) -> Array:
        """Add up.

        Parameters
        ----------
        values : ndarray, shape (rows of values, n)
            What is added.

        Returns
        -------
        ndarray, shape (rows, n)
            Sums; zero where nothing is added.
        """
        found = np.zeros((self.rows, values.shape[1]))
        if self.order.size:
            terms = values[self.order] * self.weights
            found[self.targets] = np.add.reduceat(terms, self.starts, axis=0)
        return found


def list_currents(circuit: Circuit, index: Mapping[str, int]) -> list[tuple[int, int, float]]:
    """List which currents leave which nodes.

    Parameters
    ----------
    circuit : Circuit
        The circuit.
    index : mapping of str to int
        Nodes and their numbers.

    Returns
    -------
    list of tuple
        (node, row of currents, sign); rows are the units, then resistors, then current sources.

    Examples
    --------
    >>> c = Circuit()
    >>> c.add_resistor("r1", "a", "b", 1e3)
    >>> list_currents(c, {"a": 0, "b": 1})
    [(0, 0, 1.0), (1, 0, -1.0)]
    """
    terms = []
    units = [unit for transistor in circuit.transistors for unit in transistor.units]
    for row, unit in enumerate(units):
        terms += [(index[unit.drain], row, unit.sign), (index[unit.source], row, -unit.sign)]
    for row, element in enumerate((*circuit.resistors, *circuit.current_sources), len(units)):
        plus, minus = element.nodes
        terms += [(index[plus], row, 1.0), (index[minus], row, -1.0)]
    return terms


def list_slopes(circuit: Circuit, index: Mapping[str, int]) -> list[tuple[int, int, int, float]]:
    """List the derivatives of the currents that leave nodes by node voltages.

    Parameters
    ----------
    circuit : Circuit
        The circuit.
    index : mapping of str to int
        Nodes and their numbers.

    Returns
    -------
    list of tuple
        (node of the current, node of the voltage, row of slopes, factor); rows are the slopes
        by vgs of all units, then by vds, by vsb, then the conductances of the resistors.

    Examples
    --------
    >>> c = Circuit()
    >>> c.add_resistor("r1", "a", "b", 1e3)
    >>> list_slopes(c, {"a": 0, "b": 1})
    [(0, 0, 0, 1.0), (0, 1, 0, -1.0), (1, 0, 0, -1.0), (1, 1, 0, 1.0)]
    """
    units = [unit for transistor in circuit.transistors for unit in transistor.units]
    k = len(units)
    terms = []
    for i, unit in enumerate(units):
        drain, gate, source, bulk = (index[node] for node in unit.nodes)
        for node, sign in ((drain, 1.0), (source, -1.0)):
            terms += [
                (node, gate, i, sign), (node, source, i, -sign),
                (node, drain, k + i, sign), (node, source, k + i, -sign),
                (node, source, 2 * k + i, sign), (node, bulk, 2 * k + i, -sign),
            ]  # fmt: skip
    for row, resistor in enumerate(circuit.resistors, start=3 * k):
        plus, minus = (index[node] for node in resistor.nodes)
        for node, sign in ((plus, 1.0), (minus, -1.0)):
            terms += [(node, plus, row, sign), (node, minus, row, -sign)]
    return terms
