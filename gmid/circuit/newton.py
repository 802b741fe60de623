"""Newton's method on all items of a batch at once."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gmid.circuit.equations import Equations
from gmid.circuit.groups import Indices

Array = NDArray[np.float64]

LARGEST_STEP = 0.2
"""Limit of one step of a node voltage [V]."""

TOLERANCE = 1e-6
"""A last step below this ends the search [V]; the error left is its square over some 30 mV."""

_FIRM_STEPS = 60
_SHORT_STEPS = 200
_SHORTEST_STEP = 0.05
_RAMP = (*(10.0**power for power in range(-4, -13, -1)), 0.0)
_RAMP_STEPS = 60
_FEW = 4


@dataclass(frozen=True, eq=False)
class Search:
    """Where Newton's method ended.

    Parameters
    ----------
    unknown : ndarray, shape (m, n)
        Potentials [V]; where it did not converge, those of the last step.
    converged : ndarray of bool, shape (n,)
        Whether a solution was found.
    steps : ndarray of int, shape (n,)
        Steps taken.
    ramped : ndarray of bool, shape (n,)
        Whether plain Newton failed and conductances to the start had to be taken away slowly.
    """

    unknown: Array
    converged: NDArray[np.bool_]
    steps: NDArray[np.intp]
    ramped: NDArray[np.bool_]

    def take(self, items: Indices) -> Search:
        """Take some items of the batch.

        Parameters
        ----------
        items : ndarray of int, shape (k,)
            Places on the flat batch.

        Returns
        -------
        Search
            Of those.
        """
        return Search(
            self.unknown[:, items], self.converged[items], self.steps[items], self.ramped[items]
        )


def start_flat(equations: Equations) -> Array:
    """Put all unknowns midway between the lowest and the highest fixed potential.

    Parameters
    ----------
    equations : Equations
        The circuit.

    Returns
    -------
    ndarray, shape (m, n)
        [V].

    Examples
    --------
    >>> from gmid.circuit import Circuit
    >>> c = Circuit()
    >>> c.add_voltage_source("vdd", "vdd", "0", [1.6, 2.0])
    >>> c.add_resistor("r1", "vdd", "out", 1e3)
    >>> start_flat(Equations(c, {}))
    array([[0.8, 1. ]])
    """
    fixed = equations.offset[equations.potentials.cluster < 0]
    middle = 0.5 * (fixed.min(axis=0) + fixed.max(axis=0))
    return np.broadcast_to(middle, (equations.potentials.size, equations.size)).copy()


def search(equations: Equations, start: Array | None = None) -> Search:
    """Find the bias point of every item.

    Plain Newton with a limited step from the start; without one, the middle item of a batch
    goes ahead from a flat start and the others begin where it ended. Items that fail begin
    again from the flat start; those that fail once more get conductances from every node to the
    flat start, which are taken away in ten stages.

    Parameters
    ----------
    equations : Equations
        The circuit.
    start : ndarray, shape (m, n), optional
        Where to begin [V].

    Returns
    -------
    Search
        Also where nothing was found.

    Raises
    ------
    NoSolution
        If nothing that conducts leads to a node.

    Examples
    --------
    >>> from gmid.circuit import Circuit
    >>> c = Circuit()
    >>> c.add_voltage_source("vdd", "vdd", "0", 1.0)
    >>> c.add_resistor("r1", "vdd", "out", 1e3)
    >>> c.add_resistor("r2", "out", "0", 3e3)
    >>> search(Equations(c, {})).unknown.round(9)
    array([[0.75]])
    """
    equations.refuse_loose()
    flat = start_flat(equations)
    n = equations.size
    everything = np.arange(n)
    ramped = np.zeros(n, dtype=bool)
    if start is None:
        start = _lead(equations, flat) if n > _FEW else flat
    x, converged, steps = _newton(equations, start, everything, _FIRM_STEPS)
    for again in (False, True):
        left = np.flatnonzero(~converged)
        if not left.size:
            break
        run = _ramp if again else _newton_patiently
        x[:, left], converged[left], more = run(equations, flat[:, left], left)
        steps[left] += more
        ramped[left] = again
    return Search(x, converged, steps, ramped)


def _lead(equations: Equations, flat: Array) -> Array:
    """Let one item go ahead and start the others from it, moved along with their supplies."""
    middle = np.array([equations.size // 2])
    x, converged, _ = _newton_patiently(equations, flat[:, middle], middle)
    if not converged[0]:
        return flat
    shift = flat - flat[:, middle]
    return np.asarray(x + 0.5 * shift)


def _newton_patiently(
    equations: Equations, start: Array, items: Indices
) -> tuple[Array, NDArray[np.bool_], NDArray[np.intp]]:
    """Take the usual steps, then shorter ones for items that go in circles."""
    x, converged, steps = _newton(equations, start, items, _FIRM_STEPS)
    left = np.flatnonzero(~converged)
    if left.size:
        x[:, left], converged[left], more = _newton(
            equations, start[:, left], items[left], _SHORT_STEPS, longest=_SHORTEST_STEP
        )
        steps[left] += more
    return x, converged, steps


def _ramp(
    equations: Equations, start: Array, items: Indices
) -> tuple[Array, NDArray[np.bool_], NDArray[np.intp]]:
    """Hold all nodes at the start by conductances and take these away in stages."""
    x, total = start, np.zeros(items.size, dtype=np.intp)
    converged = np.zeros(items.size, dtype=bool)
    for conductance in _RAMP:
        x, converged, steps = _newton(
            equations, x, items, _RAMP_STEPS, hold=conductance, anchor=start
        )
        total += steps
    return x, converged, total


def _newton(
    equations: Equations,
    start: Array,
    items: Indices,
    most: int,
    *,
    longest: float = LARGEST_STEP,
    hold: float = 0.0,
    anchor: Array | None = None,
) -> tuple[Array, NDArray[np.bool_], NDArray[np.intp]]:
    x = np.array(start)
    steps = np.zeros(items.size, dtype=np.intp)
    converged = np.zeros(items.size, dtype=bool)
    active = np.arange(items.size)
    for _ in range(most):
        if not active.size:
            break
        now = items[active]
        here = x[:, active]
        residual, jacobian = equations.linearise(equations.voltages(here, now), now)
        if anchor is not None and hold > 0:
            residual = residual + hold * (here - anchor[:, active]).T
            diagonal = np.arange(residual.shape[1])
            jacobian[:, diagonal, diagonal] += hold
        change = _solve(jacobian, residual)
        x[:, active] = here - np.clip(change, -longest, longest).T
        steps[active] += 1
        size = np.abs(change).max(axis=1, initial=0.0)
        converged[active] = size < TOLERANCE
        active = active[(size >= TOLERANCE) & np.isfinite(size)]
    return x, converged, steps


def _solve(jacobian: Array, residual: Array) -> Array:
    """Solve item by item where one of them has no inverse; that one stands still, unconverged."""
    try:
        change = np.linalg.solve(jacobian, residual[..., None])[..., 0]
    except np.linalg.LinAlgError:
        change = np.full(residual.shape, np.inf)
        for k in range(len(residual)):
            try:
                change[k] = np.linalg.solve(jacobian[k], residual[k])
            except np.linalg.LinAlgError:
                continue
    return np.where(np.isnan(change), np.inf, change)
