"""What stands around the signal path: bias, sensing, cascodes and elements, by rules of thumb.

A start for the exact search, which changes all of it.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier.search.sketch import find_inner_drop
from gmid.amplifier.search.space import Rows, Space
from gmid.amplifier.search.starts import Starts, Task

Array = NDArray[np.float64]

_SOURCE = 1.2e-6
_SENSE = 0.35e-6
_FOLLOWER = 0.25e-6
_ROOM = 0.02
_BIAS = 0.25
_INNER = 0.8


def dress(task: Task, space: Space, starts: Starts) -> Rows:
    """Complete the candidates of a form.

    Parameters
    ----------
    task : Task
        What is asked.
    space : Space
        Form and bounds.
    starts : Starts
        Signal paths.

    Returns
    -------
    ndarray of int, shape (n, variables)
        Candidates of `space`.

    Examples
    --------
    >>> from gmid.amplifier.search.example import example_search
    >>> search = example_search()
    >>> ((space, starts),) = search.rank_forms()
    >>> rows = dress(search.task, space, starts)
    >>> rows.shape[1] == len(space.names), bool((rows <= space.largest).all())
    (True, True)
    """
    numbers = _dress_signal(space, starts)
    numbers |= _dress_bias(task, space, starts)
    numbers |= _dress_sense(task, space, starts, numbers)
    if space.form.variant.is_cascoded:
        numbers |= _dress_cascodes(task, space, starts, numbers)
    numbers |= _compensate(task, space, starts, numbers)
    return space.locate(numbers)


def _dress_signal(space: Space, starts: Starts) -> dict[str, Array]:
    lengths = np.asarray(space.lengths)
    sketch = starts.sketch
    found = {
        "length.pair": lengths[sketch.pair_length.astype(np.intp)],
        "length.mirror": lengths[sketch.mirror_length.astype(np.intp)],
        "length.turn": lengths[sketch.turn_length.astype(np.intp)],
    }
    return found | {f"count.{place}": units for place, units in starts.counts.items()}


def _dress_bias(task: Task, space: Space, starts: Starts) -> dict[str, Array]:
    """Give the reference so many units that the tail's current comes in fine steps."""
    reference = task.supply.reference_current
    ratio = 2 * starts.current / reference
    units = np.clip(np.floor(space.choices.largest_count / ratio), 1, 8)
    one = np.ones(starts.current.shape)
    tail = np.ceil(ratio * units)
    found = {
        "length.source": _SOURCE * one, "length.other": _SOURCE * one,
        "count.bias_reference": units, "count.tail": tail,
        "count.bias_mirror": np.maximum(1, np.round(_BIAS * units)), "count.bias_load": 2 * one,
    }  # fmt: skip
    if "follower_tail" in space.places:
        found["count.follower_tail"] = np.maximum(2, np.round(2 * _BIAS * units))
    return found


def _dress_sense(
    task: Task, space: Space, starts: Starts, numbers: Mapping[str, Array]
) -> dict[str, Array]:
    """Give `error_load` two units at about the density of `control`."""
    one = np.ones(starts.current.shape)
    unit = starts.current * starts.sketch.copy / starts.counts["turn"]
    each = task.supply.reference_current / numbers["count.bias_reference"]
    each = each * numbers["count.bias_mirror"] / numbers["count.bias_load"]
    pairs = "sense_tail" in space.places
    wanted = 2 * unit if pairs else 4 * unit
    place = "sense" if pairs else "error"
    found = {
        "length.sense": _SENSE * one, f"count.{place}_tail": np.maximum(1, np.round(wanted / each)),
        f"count.{place}_pair": 2 * one, "count.error_load": 2 * one,
        "sense_resistance": space.choices.largest_sense_resistor * one,
        "sense_capacitance": 10e-15 * one,
    }  # fmt: skip
    if "follower" in space.places:
        found |= {"length.follower": _FOLLOWER * one, "count.follower": 2 * one}
    return found


def _dress_cascodes(
    task: Task, space: Space, starts: Starts, numbers: Mapping[str, Array]
) -> dict[str, Array]:
    """Choose cascodes of the density below them, and diodes that leave that its headroom."""
    one = np.ones(starts.current.shape)
    cascode = starts.sketch.cascode_length
    long = np.asarray(space.lengths)[cascode]
    units = numbers["count.bias_reference"]
    feed = np.maximum(1, np.round(_BIAS * units))
    other = numbers["count.bias_mirror"] / units / numbers["count.bias_load"]
    found = {
        "length.direct_cascode": long, "length.opposite_cascode": long,
        "count.direct_cascode": starts.counts["direct"],
        "count.opposite_cascode": starts.counts["opposite"] + starts.counts["control"],
        "count.bias_direct_feed": feed, "count.bias_opposite_feed": 2 * one,
    }  # fmt: skip
    reference = task.supply.reference_current
    flows = {
        "direct": (feed / units * reference, starts.sketch.mirror_length,
                   starts.sketch.mirror_unit),
        "opposite": (2 * other * reference, starts.sketch.turn_length, starts.sketch.turn_unit),
    }  # fmt: skip
    for side, (flow, which, unit) in flows.items():
        length, count = _choose_diode(task, space, side, flow, (which, cascode), unit)
        found[f"length.bias_{side}"], found[f"count.bias_{side}"] = length, count
    return found


def _choose_diode(
    task: Task, space: Space, side: str, flow: Array, which: tuple[Rows, Rows], unit: Array
) -> tuple[Array, Array]:
    """Find the weakest need: the lowest diode voltage that leaves headroom in all conditions."""
    form = space.form
    lengths = space.values[f"length.bias_{side}"]
    counts = space.values[f"count.bias_{side}"][:6]
    options = [(long, count) for long in range(lengths.size) for count in counts]
    excess = np.full((len(options), flow.size), np.inf)
    draw = task.book.draw
    inner = _INNER * find_inner_drop(task.supply, task.swing)
    for at in range(len(task.bench)):
        below = draw(at, form.devices[side], space.lengths, "edge")
        above = draw(at, form.devices[f"{side}_cascode"], space.lengths, 0.3, vsb=0.2)
        diode = draw(at, form.devices[f"bias_{side}"], tuple(lengths), "diode")
        least = below.read("vdsat", which[0], unit) + space.choices.saturation_margin + _ROOM
        least = np.maximum(least, inner) + above.read("vgs", which[1], unit)
        for k, (long, count) in enumerate(options):
            gate = diode.read("vgs", long, flow * form.stack / count)
            excess[k] = np.minimum(excess[k], gate - least)
    excess = np.where(np.isnan(excess), -9.0, excess)
    enough = np.where(excess >= 0, excess, 10.0 - excess)
    best = np.argmin(enough, axis=0)
    table = np.array([(lengths[long], count) for long, count in options])
    return table[best, 0], table[best, 1]


def _compensate(
    task: Task, space: Space, starts: Starts, numbers: Mapping[str, Array]
) -> dict[str, Array]:
    """Put the loop's unity gain at a sixth of the signal's, its zero at a quarter of that."""
    sketch, current = starts.sketch, starts.current
    total = (2 - sketch.share) * sketch.direct * 15.0 * current
    bandwidth = total / (task.load[0] + 50e-15) / 6.0
    unit = current * sketch.copy / starts.counts["turn"]
    error, control = 16.0 * 2 * unit, 10.0 * unit * starts.counts["control"]
    resistance = bandwidth * (task.load[0] + 50e-15) / (error * control)
    return {
        "error_resistance": resistance, "error_capacitance": 4.0 / (bandwidth * resistance),
    }  # fmt: skip
