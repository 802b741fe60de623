"""Starts of a search: a grid of sketches, the best of them made whole.

The grid runs over lengths and gm/Id of pair, mirrors and turns and over the mirror ratios; the
current follows from the demands in closed form. The best become whole counts and are put through
the closed forms once more.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier.plan import Requirement, Supply
from gmid.amplifier.search.charts import CURRENTS, Chart, ChartBook
from gmid.amplifier.search.estimate import estimate, measure_shortfall, solve_current
from gmid.amplifier.search.sketch import Charts, Sketch, spread
from gmid.amplifier.search.space import Space
from gmid.condition import Condition
from gmid.device.device import Device

Array = NDArray[np.float64]

_PAIR = (12.0, 16.0, 19.0, 22.0)
_MIRROR = (4.5, 7.0, 10.0, 14.0)
_RATIO = (0.75, 1.0, 1.5, 2.0, 3.0, 4.0, 6.0)
_COPY = (0.5, 1.0)
_SHARE = 0.2
_SHARES = (0.10, 0.42)
_SHARE_SCALE = 4.0
_LEAST_SHARE = 0.15
_CASCODES = (0.25e-6, 0.5e-6)
_SENSE_LOAD = 12e-15
_WEIGHT = 4.0
_KEPT = 3000
_PER_GROUP = 4
_USUAL = 0.5e-6
_MOST = 1e-3
_SWING = 0.3
_LENGTHS = 5

SIGNAL = ("pair", "load", "direct", "copy", "turn", "opposite", "control")
"""Places of the signal path."""


@dataclass(frozen=True, eq=False)
class Task:
    """What a search is asked, without the form.

    Parameters
    ----------
    demands : mapping of str to Requirement
        By name.
    load : tuple of float
        Capacitance and resistance at each output [F], [ohm].
    bench : sequence of (Condition, mapping of str to Device)
        Conditions and devices.
    supply : Supply
        What the amplifier is fed with.
    """

    demands: Mapping[str, Requirement]
    load: tuple[float, float]
    bench: Sequence[tuple[Condition, Mapping[str, Device]]]
    supply: Supply

    @property
    def swing(self) -> float:
        """Peak differential output that is asked for, or a usual one [V]."""
        return self.demands["swing"].value if "swing" in self.demands else _SWING

    @cached_property
    def book(self) -> ChartBook:
        """Charts of the bench."""
        return ChartBook([devices for _, devices in self.bench])


@dataclass(frozen=True, eq=False)
class Starts:
    """Sketches worth an exact evaluation, the best first.

    Parameters
    ----------
    sketch : Sketch
        Flat.
    current : ndarray, shape (n,)
        Of one input device [A].
    cost : ndarray, shape (n,)
        ln of the estimated supply current, plus what is missed.
    counts : mapping of str to ndarray, shape (n,)
        Units of the signal path by place.
    """

    sketch: Sketch
    current: Array
    cost: Array
    counts: Mapping[str, Array]


def choose_conditions(task: Task, space: Space) -> tuple[int, ...]:
    """Find the conditions that tell most: least gm/Id, least gain, largest threshold.

    Parameters
    ----------
    task : Task
        Its bench counts.
    space : Space
        Its devices count.

    Returns
    -------
    tuple of int
        Positions on the bench, each once.

    Examples
    --------
    >>> from gmid.amplifier.search.example import example_search, example_space
    >>> choose_conditions(example_search().task, example_space())
    (0,)
    """
    form, middle = space.form, len(space.lengths) // 2
    rows = []
    for k in range(len(task.bench)):
        charts = [
            task.book.draw(k, form.devices[place], space.lengths, "diode")
            for place in ("pair", "load")
        ]
        pair, load = charts
        rows.append([
            pair.read("gm", middle, _USUAL), -pair.read("vgs", middle, _USUAL),
            -load.read("vgs", middle, _USUAL), -pair.read("gds", middle, _USUAL),
        ])  # fmt: skip
    return tuple(dict.fromkeys(int(k) for k in np.argmin(np.array(rows), axis=0)))


def find_starts(task: Task, space: Space, charts: Sequence[Charts], wanted: int) -> Starts:
    """Find the sketches that promise most.

    Parameters
    ----------
    task : Task
        What is asked.
    space : Space
        Form and bounds.
    charts : sequence of Charts
        Where the closed forms are applied.
    wanted : int
        How many.

    Returns
    -------
    Starts
        At most so many, the best first.

    Examples
    --------
    >>> from gmid.amplifier.search.example import example_charts, example_search, example_space
    >>> task = example_search().task
    >>> found = find_starts(task, example_space(), [example_charts()], 5)
    >>> found.current.shape, bool(np.all(found.counts["load"] >= 2))
    ((5,), True)
    """
    grid = _lay_grid(space, charts[0].charts).flatten()
    current, cost = _rate(task, space, charts, grid)
    best = np.argsort(cost, kind="stable")[:_KEPT]
    whole, counts = _make_whole(space, grid.take(best), current[best])
    current, cost = _rate(task, space, charts, whole, counts)
    best = _choose(whole, counts, cost, wanted)
    taken = {place: counts[place][best] for place in SIGNAL}
    flow = np.where(np.isfinite(current), np.minimum(current, _MOST), _MOST)
    return Starts(whole.take(best), flow[best], cost[best], taken)


def _lay_grid(space: Space, charts: Mapping[str, Chart]) -> Sketch:
    """Combine lengths and gm/Id of the groups with the ratios."""
    pair = _list_units(charts["pair"], _allowed(space, "pair")[:3], _PAIR)
    mirror = _list_units(charts["direct"], _thin(_allowed(space, "mirror")), _MIRROR)
    turn = _list_units(charts["opposite"], _thin(_allowed(space, "turn")), _MIRROR)
    ratio, copy = np.meshgrid(_RATIO, _COPY)
    parts: list[Array] = []
    for axis, (length, unit) in enumerate((pair, mirror, turn)):
        parts += [spread(length, axis), spread(unit, axis)]
    lengths = [part.astype(np.intp) for part in parts[::2]]
    wanted = _CASCODES if space.form.variant.is_cascoded else _CASCODES[:1]
    near = [int(np.argmin(np.abs(np.log(np.asarray(space.lengths) / one)))) for one in wanted]
    cascode = spread([float(k) for k in dict.fromkeys(near)], 4).astype(np.intp)
    return Sketch(
        lengths[0], lengths[1], lengths[2], cascode, parts[1], parts[3], parts[5],
        spread(ratio.ravel(), 3), spread(copy.ravel(), 3), np.asarray(_SHARE),
    )  # fmt: skip


def _allowed(space: Space, group: str) -> list[int]:
    allowed = space.values[f"length.{group}"]
    return [k for k, one in enumerate(space.lengths) if np.any(np.isclose(one, allowed))]


def _thin(lengths: list[int]) -> list[int]:
    """Leave at most `_LENGTHS`, the ends among them."""
    if len(lengths) <= _LENGTHS:
        return lengths
    wanted = np.round(np.linspace(0, len(lengths) - 1, _LENGTHS)).astype(int)
    return [lengths[k] for k in wanted]


def _list_units(
    chart: Chart, lengths: Sequence[int], targets: Sequence[float]
) -> tuple[list[float], list[float]]:
    """List lengths and the currents of a unit that have a wanted gm/Id."""
    where, units = [], []
    for k in lengths:
        efficiency = chart.read("gm", k, CURRENTS) / CURRENTS
        known = np.isfinite(efficiency)
        x, y = efficiency[known][::-1], np.log(CURRENTS[known])[::-1]
        for target in targets:
            if x.size and x[0] < target < x[-1]:
                where.append(float(k))
                units.append(float(np.exp(np.interp(target, x, y))))
    return where, units


def sense_cost(task: Task, space: Space) -> tuple[float, float, float]:
    """Give what sensing costs: supply current, load capacitance and conductance.

    Parameters
    ----------
    task : Task
        Its reference current counts.
    space : Space
        Its form counts.

    Returns
    -------
    current, capacitance, conductance : float
        [A], [F], [S].

    Examples
    --------
    >>> from gmid.amplifier.search.example import example_search, example_space
    >>> sense_cost(example_search().task, example_space())
    (5e-07, 1e-14, 1e-06)
    """
    each = 0.25 * task.supply.reference_current
    kind = space.form.variant.common_mode_sense
    if kind == "resistors":
        return each, 10e-15, 1.0 / space.choices.largest_sense_resistor
    return (4 * each if kind == "followers" else 2 * each), _SENSE_LOAD, 0.0


def _rate(
    task: Task, space: Space, charts: Sequence[Charts], sketch: Sketch,
    counts: Mapping[str, Array] | None = None,
) -> tuple[Array, Array]:  # fmt: skip
    """Solve the current and rate sketches; whole counts keep their ratios as current changes."""
    conductance = 0.0 if not np.isfinite(task.load[1]) else 1.0 / task.load[1]
    load = (task.load[0], conductance)
    overhead, *extra = sense_cost(task, space)
    added = (extra[0], extra[1])
    noise = task.demands.get("input_noise")
    at = 1e6 if noise is None or noise.at is None else noise.at
    current = np.asarray(1e-6) if counts is None else counts["current"]
    with np.errstate(all="ignore"):
        for _ in range(1 if counts is None else 3):
            if counts is not None:
                sketch = _at_current(sketch, counts, current)
            found = [estimate(chart, sketch, at) for chart in charts]
            needs = [solve_current(one, task.demands, load, added) for one in found]
            needs.append(np.zeros(found[0].gm_total.shape))
            current = np.max(np.stack(np.broadcast_arrays(*needs)), axis=0)
            current = np.where(np.isnan(current), np.inf, current)
        misses = [
            measure_shortfall(
                one, current, task.demands, load, added, space.choices.saturation_margin
            )
            for one in found
        ]
        total = 2 * current * (1 + sketch.direct + sketch.copy) + overhead
        cost = np.log(total + task.supply.reference_current)
        cost = cost + _WEIGHT * np.max(np.stack(misses), axis=0)
        for one in found if counts is not None else ():
            off = np.maximum(_SHARES[0] - one.balance, one.balance - _SHARES[1])
            cost = cost + _WEIGHT * _SHARE_SCALE * np.maximum(off, 0.0)
    return current, np.where(np.isfinite(cost), cost, 99.0)


def _at_current(sketch: Sketch, counts: Mapping[str, Array], current: Array) -> Sketch:
    return replace(
        sketch, pair_unit=current / counts["pair"], mirror_unit=current / counts["load"],
        turn_unit=current * sketch.copy / counts["turn"],
    )  # fmt: skip


def _make_whole(space: Space, sketch: Sketch, current: Array) -> tuple[Sketch, dict[str, Array]]:
    """Round to whole counts; the ratios become what the counts give."""
    flow = np.where(np.isfinite(current), current, 1e-6)
    counts = count_units(space, sketch, flow)
    load, turn = counts["load"], counts["turn"]
    direct, copy = counts["direct"] / load, counts["copy"] / load
    ko = copy * counts["opposite"] / turn
    share = np.clip(1 - ko / direct, -1.0, 0.95)
    whole = replace(sketch, direct=direct, copy=copy, share=share)
    return whole, {"current": flow, **counts}


def count_units(space: Space, sketch: Sketch, current: Array) -> dict[str, Array]:
    """Give whole counts of the signal path.

    Parameters
    ----------
    space : Space
        Bounds of counts.
    sketch : Sketch
        Flat.
    current : ndarray, shape (n,)
        Of one input device [A].

    Returns
    -------
    dict of str to ndarray, shape (n,)
        By place.

    Examples
    --------
    >>> from gmid.amplifier.search.example import example_space
    >>> one = np.ones(1, dtype=int)
    >>> sketch = Sketch(one, one, one, one, 1e-6 * one, 0.5e-6 * one, 0.5e-6 * one, 3.0 * one, one,
    ...                 np.array([0.2]))
    >>> counts = count_units(example_space(), sketch, np.array([1e-6]))
    >>> {place: int(units[0]) for place, units in counts.items()}
    {'pair': 2, 'load': 2, 'direct': 6, 'copy': 2, 'turn': 2, 'opposite': 4, 'control': 2}
    """

    def near(place: str, wanted: Array) -> Array:
        allowed = space.values[f"count.{place}"]
        middle = 0.5 * (allowed[1:] + allowed[:-1])
        return np.asarray(allowed[np.searchsorted(middle, wanted)])

    load = near("load", current / sketch.mirror_unit)
    turn = near("turn", current * sketch.copy / sketch.turn_unit)
    direct = near("direct", sketch.direct * load)
    copy = near("copy", sketch.copy * load)
    per_unit = turn / (copy / load)
    allowed = space.values["count.opposite"]
    most = (1 - _LEAST_SHARE) * direct / load * per_unit
    opposite = allowed[np.maximum(np.searchsorted(allowed, most, side="right") - 1, 0)]
    control = near("control", np.maximum(direct / load * per_unit - opposite, 1.0))
    return {
        "pair": near("pair", current / sketch.pair_unit), "load": load, "direct": direct,
        "copy": copy, "turn": turn, "opposite": opposite, "control": control,
    }  # fmt: skip


def _choose(
    sketch: Sketch, counts: Mapping[str, Array], cost: Array, wanted: int
) -> NDArray[np.intp]:
    """Take the best of every pair of mirror and turn lengths first, then the best of all."""
    columns = [
        sketch.pair_length, sketch.mirror_length, sketch.turn_length, sketch.cascode_length,
    ]  # fmt: skip
    table = np.stack([*columns, *(counts[place] for place in SIGNAL)], axis=-1)
    _, first = np.unique(table, axis=0, return_index=True)
    order = first[np.argsort(cost[first], kind="stable")]
    key = sketch.mirror_length * 100 + sketch.turn_length
    seen: dict[int, int] = {}
    front: list[int] = []
    for k in order:
        group = int(key[k])
        seen[group] = seen.get(group, 0) + 1
        if seen[group] <= _PER_GROUP and len(front) < wanted // 2:
            front.append(int(k))
    taken = set(front)
    rest = [int(k) for k in order if int(k) not in taken][: wanted - len(front)]
    return np.array(front + rest, dtype=np.intp)
