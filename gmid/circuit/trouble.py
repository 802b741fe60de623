"""What is wrong with a bias point: no solution, or one outside the tables."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from gmid.circuit.equations import Equations
from gmid.circuit.newton import Search
from gmid.device.reach import settle_axes
from gmid.errors import NoSolution, OutOfReach
from gmid.quantity import format_quantity

Array = NDArray[np.float64]


def check_reach(equations: Equations, bias: tuple[Array, Array, Array]) -> NDArray[np.bool_]:
    """Tell which units the tables cover.

    Parameters
    ----------
    equations : Equations
        The circuit.
    bias : tuple of ndarray, shape (k, n)
        vgs, vds and vsb [V]; below vds = 0 drain and source change places.

    Returns
    -------
    ndarray of bool, shape (k, n)
        True inside.

    Examples
    --------
    >>> from gmid.circuit import Circuit
    >>> none = np.zeros((0, 1))
    >>> c = Circuit()
    >>> c.add_resistor("r1", "a", "0", 1e3)
    >>> check_reach(Equations(c, {}), (none, none, none)).shape
    (0, 1)
    """
    covered = np.ones(bias[0].shape, dtype=bool)
    for group in equations.groups:
        vgs, vds, vsb = (part[group.units] for part in bias)
        covered[group.units] = group.model.covers(vgs, vds, vsb, group.which)
    return covered


def turn_upright(bias: tuple[Array, Array, Array]) -> tuple[Array, Array, Array]:
    """Call the lower of drain and source the source, as the tables do.

    Parameters
    ----------
    bias : tuple of ndarray, shape (...)
        vgs, vds and vsb [V].

    Returns
    -------
    tuple of ndarray
        The same with vds >= 0.

    Examples
    --------
    >>> [float(part) for part in turn_upright((np.array(1.0), np.array(-0.25), np.array(0.5)))]
    [1.25, 0.25, 0.25]
    """
    vgs, vds, vsb = bias
    drop = np.minimum(vds, 0.0)
    return vgs - drop, np.abs(vds), vsb + drop


def refuse_failures(equations: Equations, found: Search, bias: tuple[Array, Array, Array]) -> None:
    """Raise an error for the first item that has no solution, or one outside the tables.

    Parameters
    ----------
    equations : Equations
        The circuit.
    found : Search
        Where Newton's method ended.
    bias : tuple of ndarray, shape (k, n)
        vgs, vds and vsb there [V].

    Raises
    ------
    NoSolution
        If an item has none.
    OutOfReach
        If a solution lies outside a table.

    Examples
    --------
    >>> from gmid.circuit import Circuit
    >>> none = np.zeros((0, 1))
    >>> c = Circuit()
    >>> c.add_resistor("r1", "a", "0", 1e3)
    >>> equations = Equations(c, {})
    >>> from gmid.circuit.newton import search
    >>> refuse_failures(equations, search(equations), (none, none, none))
    """
    failed = np.flatnonzero(~found.converged)
    if failed.size:
        raise _no_solution(equations, found, int(failed[0]), failed.size)
    outside = np.argwhere(~check_reach(equations, bias).T)
    if not len(outside):
        return
    item, row = (int(part) for part in outside[0])
    vgs, vds, vsb = (part[row, item : item + 1] for part in turn_upright(bias))
    for group in equations.groups:
        place = np.flatnonzero(group.units == row)
        if place.size:
            where = int(group.which[place[0], item if group.which.shape[1] > 1 else 0])
            model, which = group.model.part(where)
            sweep, length = model.interpolant.grid.sweep, model.length[which : which + 1]
            try:
                settle_axes(sweep, length, vgs, vds, vsb)
            except OutOfReach as error:
                raise OutOfReach(
                    f"{equations.units[row].name}: {error.message}",
                    where=describe_item(equations, item),
                    hint="Change the circuit, or sweep the device further.",
                ) from None


def describe_item(equations: Equations, item: int) -> str:
    """Name the condition and the sources of a batch item.

    Parameters
    ----------
    equations : Equations
        The circuit.
    item : int
        Place on the flat batch axis.

    Returns
    -------
    str
        Such as ``tt/27, vdd = 1.8 V``, with the index where there are several items.

    Examples
    --------
    >>> from gmid.circuit import Circuit
    >>> c = Circuit()
    >>> c.add_voltage_source("vdd", "vdd", "0", [1.6, 1.8])
    >>> c.add_resistor("r1", "vdd", "0", 1e3)
    >>> describe_item(Equations(c, {}), 1)
    'vdd = 1.8 V, item (1,)'
    """
    condition = equations.condition_of(item)
    parts = [] if condition is None else [str(condition)]
    for source in equations.circuit.voltage_sources:
        flat = equations.flat(source.voltage)
        value = float(flat[item if flat.size > 1 else 0])
        if value:
            parts.append(f"{source.name} = {format_quantity(value, 'V')}")
    if equations.size > 1:
        index = tuple(int(part) for part in np.unravel_index(item, equations.batch))
        parts.append(f"item {index}")
    return ", ".join(parts)


def _no_solution(equations: Equations, found: Search, item: int, failures: int) -> NoSolution:
    """Name the node whose currents balance least, and what is connected to it."""
    one = np.array([item])
    voltages = equations.voltages(found.unknown[:, one], one)
    leaving = equations.residual(voltages, one)[:, 0]
    worst = int(np.argmax(np.abs(leaving)))
    node = equations.potentials.names[worst]
    at = [
        unit.name for unit in equations.units
        if {equations.potentials.representative(n) for n in (unit.drain, unit.source)} & {node}
    ]  # fmt: skip
    others = f" ({failures} of {equations.size} items)" if failures > 1 else ""
    return NoSolution(
        f"no bias point was found after {int(found.steps[item])} steps{others}: at node {node} "
        f"= {voltages[equations.index[node], 0]:.3g} V the currents of {', '.join(at) or 'it'} "
        f"are out of balance by {format_quantity(float(abs(leaving[worst])), 'A')}.",
        where=describe_item(equations, item),
        hint="See whether these can carry each other's current.",
    )
