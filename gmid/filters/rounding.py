"""Elements made of whole units, chosen together so that the response changes least."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from gmid.filters.elements import Element
from gmid.filters.passives import Passives
from gmid.filters.realisation import Realisation
from gmid.filters.sections import spread_frequencies
from gmid.filters.stamping import SOURCE
from gmid.network import transfer
from gmid.network.pencil import FloatArray

_STEP = 1e-5
_KICKS = 40
_FARTHEST = 0.2


def round_elements(realisation: Realisation, passives: Passives | None = None) -> Realisation:
    """Round elements to units so that the response changes least.

    Capacitors become whole numbers of units, resistors n units in series or n in parallel.
    Integrating capacitors are rounded first and what belongs to the same integrator is changed
    along with them, then all is rounded to the nearest. From there one or two elements at a time
    are moved by a unit as long as the largest change of the response, over its largest value,
    falls, and again from other
    starts: errors of elements then compensate one another.

    Parameters
    ----------
    realisation : Realisation
        The filter.
    passives : Passives, optional
        With the units; those of the realisation by default.

    Returns
    -------
    Realisation
        The same filter if there are no units.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, Passives, realise
    >>> made = realise(FilterSpec(response="butterworth", order=1, edge=1e6), capacitor=2.04e-12)
    >>> units = Passives(unit_capacitor=100e-15, unit_resistor=10e3)
    >>> [round(element.value, 15) for element in round_elements(made, units).elements]
    [80000.0, 80000.0, 2e-12]
    """
    units = passives or realisation.passives
    if units.unit_capacitor is None and units.unit_resistor is None:
        return realisation
    nearest = _round_nearest(realisation, units)
    if realisation.style == "gm-c":
        return nearest
    candidates = [nearest, *_compensate(realisation, nearest, units)]
    return min(candidates, key=lambda made: _measure_change(realisation, made))


def _round_nearest(realisation: Realisation, units: Passives) -> Realisation:
    change: dict[str, float] = {}
    for node, held in _group_integrators(realisation).items():
        before = sum(element.wanted for element in held)
        error = sum(
            _round_capacitor(element.value, units.unit_capacitor) - element.value
            for element in held
        )
        change[node] = 1.0 + error / before
    elements = tuple(
        _round_element(element, units, change.get(element.nodes[1], 1.0))
        for element in realisation.elements
    )
    return replace(realisation, elements=elements)


def _group_integrators(realisation: Realisation) -> dict[str, list[Element]]:
    """List the capacitors that make up an integrator by the node that is driven."""
    groups: dict[str, list[Element]] = {}
    for element in realisation.elements:
        if element.kind != "capacitor":
            continue
        if realisation.style == "gm-c":
            node = element.nodes[0] if element.nodes[1] == "0" else element.nodes[1]
            groups.setdefault(node, []).append(element)
        elif element.role in ("a", "b"):
            groups.setdefault(element.nodes[1], []).append(element)
    return groups


def _round_element(element: Element, units: Passives, change: float) -> Element:
    if element.kind == "resistor":
        follows = element.with_wanted(element.wanted / change)
        return replace(follows, value=_round_resistor(follows.value, units.unit_resistor))
    if element.kind == "transconductor":
        return element.with_wanted(element.wanted * change)
    is_input = element.role.startswith("in") and element.nodes[1].startswith("x")
    value = element.value * change if is_input else element.value
    return replace(element, value=_round_capacitor(value, units.unit_capacitor))


def _round_capacitor(value: float, unit: float | None) -> float:
    if unit is None or value == 0:
        return value
    return max(1, round(value / unit)) * unit


def _round_resistor(value: float, unit: float | None) -> float:
    if unit is None:
        return value
    if value >= unit:
        return round(value / unit) * unit
    return unit / round(unit / value)


def _find_neighbours(element: Element, units: Passives) -> tuple[float, ...]:
    """Return the next values below and above that units can make."""
    unit = units.unit_capacitor if element.kind == "capacitor" else units.unit_resistor
    if unit is None or element.value == 0:
        return ()
    count = element.value / unit
    if element.kind == "resistor" and count < 1.5:
        parallel = round(1 / count)
        above = 2 * unit if parallel == 1 else unit / (parallel - 1)
        return (unit / (parallel + 1), above)
    whole = round(count)
    return ((whole - 1) * unit, (whole + 1) * unit) if whole > 1 else (2 * unit,)


def _probe(realisation: Realisation) -> FloatArray:
    return spread_frequencies(realisation.sections, decades=1.0)


def _measure_change(wanted: Realisation, made: Realisation) -> float:
    """Return the largest change of the magnitude over its largest value."""
    f = _probe(wanted)
    before, after = (
        np.abs(transfer(each.network(), SOURCE, each.output, f)) for each in (wanted, made)
    )
    return float(np.abs(after - before).max() / before.max())


@dataclass(frozen=True, eq=False)
class _Moves:
    """Steps of single elements by a unit and what they do to the response."""

    names: list[str]
    values: list[float]
    effects: FloatArray


def _compensate(wanted: Realisation, start: Realisation, units: Passives) -> list[Realisation]:
    """Descend by moves, and again from where three random moves lead; list what was best."""
    slopes = _find_slopes(wanted)
    ideal = {element.name: element.value for element in wanted.elements}
    random = np.random.default_rng(0)
    best, least = _descend(start, units, slopes, ideal)
    found = [best]
    for _ in range(_KICKS):
        moves = _list_moves(best, units, slopes, ideal)
        if not moves.names:
            break
        kick = random.integers(len(moves.names), size=3)
        kicked = best.with_values({moves.names[k]: moves.values[k] for k in kick})
        made, size = _descend(kicked, units, slopes, ideal)
        if size < least:
            best, least = made, size
            found.append(best)
    return found


def _descend(
    made: Realisation, units: Passives, slopes: dict[str, FloatArray], ideal: dict[str, float]
) -> tuple[Realisation, float]:
    """Move elements by units as long as the linearised change of the response falls."""
    while True:
        change = np.sum(
            [slopes[e.name] * np.log(e.value / ideal[e.name]) for e in made.elements if e.value],
            axis=0,
        )
        moves = _list_moves(made, units, slopes, ideal)
        chosen = _choose_moves(change, moves)
        if not chosen:
            return made, float(np.abs(change).max())
        made = made.with_values({moves.names[k]: moves.values[k] for k in chosen})


def _find_slopes(realisation: Realisation) -> dict[str, FloatArray]:
    """Differentiate the magnitude, over its largest value, by the logarithm of each element."""
    names = [element.name for element in realisation.elements]
    factors = dict(zip(names, 1.0 + _STEP * np.eye(len(names)), strict=True))
    f = _probe(realisation)
    before = np.abs(transfer(realisation.network(), SOURCE, realisation.output, f))
    after = np.abs(transfer(realisation.network(factors=factors), SOURCE, realisation.output, f))
    slopes = (after - before) / np.log1p(_STEP) / before.max()
    return dict(zip(names, slopes, strict=True))


def _list_moves(
    made: Realisation, units: Passives, slopes: dict[str, FloatArray], ideal: dict[str, float]
) -> _Moves:
    names: list[str] = []
    values: list[float] = []
    effects: list[FloatArray] = []
    for element in made.elements:
        for value in _find_neighbours(element, units):
            if abs(np.log(value / ideal[element.name])) < _FARTHEST:
                names.append(element.name)
                values.append(value)
                effects.append(slopes[element.name] * np.log(value / element.value))
    return _Moves(names, values, np.array(effects))


def _choose_moves(change: FloatArray, moves: _Moves) -> tuple[int, ...]:
    """Return the one or two moves that lower the largest change most; none if none does."""
    if not moves.names:
        return ()
    now = float(np.abs(change).max())
    single = np.abs(change + moves.effects).max(axis=-1)
    pairs = np.array([np.abs(change + each + moves.effects).max(axis=-1) for each in moves.effects])
    names = np.array(moves.names)
    pairs[names[:, None] == names[None, :]] = np.inf
    first, second = np.unravel_index(int(np.argmin(pairs)), pairs.shape)
    k = int(np.argmin(single))
    if min(single[k], pairs[first, second]) >= now * (1.0 - 1e-6):
        return ()
    return (k,) if single[k] <= pairs[first, second] else (int(first), int(second))
