"""Candidates before they have counts, and the charts that closed forms read for them."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier.plan import Supply
from gmid.amplifier.search.charts import Chart, ChartBook
from gmid.amplifier.search.space import Space

Array = NDArray[np.float64]
Rows = NDArray[np.intp]

_CASCODE_DROP = 0.2
_LEAST_DROP = 0.2
_INNER_SHARE = 0.8
_INNER_RANGE = (0.15, 0.40)


@dataclass(frozen=True, eq=False)
class Sketch:
    """Candidates before counts: lengths, currents of units, ratios; all of them broadcast.

    Parameters
    ----------
    pair_length, mirror_length, turn_length, cascode_length : ndarray of int, shape (...)
        Which length of the list.
    pair_unit, mirror_unit, turn_unit : ndarray, shape (...)
        Current of one unit [A].
    direct, copy : ndarray, shape (...)
        Their currents over that of `load` [-].
    share : ndarray, shape (...)
        Current of `control` over that of `direct` [-].

    Examples
    --------
    >>> one = np.ones(1)
    >>> which = np.zeros(1, dtype=int)
    >>> sketch = Sketch(which, which, which, which, one, one, one, 2 * one, one, 0.2 * one)
    >>> sketch.take(np.array([0])).direct
    array([2.])
    """

    pair_length: Rows
    mirror_length: Rows
    turn_length: Rows
    cascode_length: Rows
    pair_unit: Array
    mirror_unit: Array
    turn_unit: Array
    direct: Array
    copy: Array
    share: Array

    def flatten(self) -> Sketch:
        """Give all combinations as one axis."""
        parts = np.broadcast_arrays(*(getattr(self, one.name) for one in fields(self)))
        return Sketch(*(np.ravel(part) for part in parts))

    def take(self, index: NDArray[np.intp]) -> Sketch:
        """Take some of a flat sketch.

        Parameters
        ----------
        index : ndarray of int
            Which.

        Returns
        -------
        Sketch
            Of those.
        """
        return Sketch(*(getattr(self, one.name)[index] for one in fields(self)))


@dataclass(frozen=True, eq=False)
class Charts:
    """Charts of all groups at one point.

    Parameters
    ----------
    charts : mapping of str to Chart
        By group and way of biasing.
    voltage : float
        Supply [V].
    own_level, input_level : float
        Output and input common mode, from the rail of the input pair's sources [V].

    Examples
    --------
    >>> Charts({}, 1.8, 0.9, 0.9).voltage
    1.8
    """

    charts: Mapping[str, Chart]
    voltage: float
    own_level: float
    input_level: float


def find_inner_drop(supply: Supply, swing: float) -> float:
    """Say how much of the supply the mirrors below cascodes may have.

    Parameters
    ----------
    supply : Supply
        Its low voltage and common mode count.
    swing : float
        Peak differential output [V].

    Returns
    -------
    float
        vds [V].

    Examples
    --------
    >>> round(find_inner_drop(Supply(1.8, 2e-6, tolerance=0.1), 0.4), 3)
    0.328
    """
    low = float(supply.voltages[0])
    level = float(supply.common_mode.at(low))
    left = min(level, low - level) - 0.5 * swing - _CASCODE_DROP
    return float(np.clip(_INNER_SHARE * left, *_INNER_RANGE))


def draw_charts(
    space: Space, book: ChartBook, condition: int, supply: Supply, voltage: float, swing: float
) -> Charts:
    """Draw the charts of a form at one point.

    Parameters
    ----------
    space : Space
        Form and lengths.
    book : ChartBook
        Charts of the bench.
    condition : int
        Which condition.
    supply : Supply
        Its levels count.
    voltage : float
        Supply [V].
    swing : float
        Peak differential output [V].

    Returns
    -------
    Charts
        For `estimate`.

    Examples
    --------
    >>> from gmid.amplifier.search.example import example_charts
    >>> sorted(example_charts().charts)
    ['copy', 'direct', 'mirror', 'opposite', 'pair', 'sense', 'source', 'turn']
    """
    form = space.form
    levels = [float(level.at(voltage)) for level in (supply.common_mode, supply.input_level)]
    if form.variant.input_pair == "p":
        levels = [voltage - level for level in levels]
    own = levels[0]
    cascoded = form.variant.is_cascoded
    lifted = 0.0 if form.bulk("pair") == "source" else 0.3
    inner = round(find_inner_drop(supply, swing), 3)
    wanted: list[tuple[str, str, str | float, float]] = [
        ("pair", "pair", 0.35, lifted), ("mirror", "load", "diode", 0.0),
        ("direct", "direct", inner if cascoded else voltage - own, 0.0),
        ("copy", "copy", 0.6 * voltage, 0.0), ("turn", "turn", "diode", 0.0),
        ("opposite", "opposite", inner if cascoded else own, 0.0), ("source", "tail", 0.3, 0.0),
        ("sense", "sense_pair" if "sense_pair" in space.places else "error_pair", 0.4, 0.3),
    ]  # fmt: skip
    if cascoded:
        wanted += [
            ("direct_cascode", "direct_cascode", _leave(voltage - own, inner), 0.2),
            ("opposite_cascode", "opposite_cascode", _leave(own, inner), 0.2),
        ]
    charts = {
        name: book.draw(condition, form.devices[place], space.lengths, way, vsb=vsb)
        for name, place, way, vsb in wanted
    }
    return Charts(charts, voltage, *levels)


def _leave(total: float, inner: float) -> float:
    """Give what is left for a cascode at rest [V]."""
    return max(round(total - inner, 3), _LEAST_DROP)


def spread(values: Sequence[float] | Array, axis: int, dimensions: int = 5) -> Array:
    """Lay values along one axis of a grid.

    Parameters
    ----------
    values : sequence of float or ndarray
        Values.
    axis, dimensions : int
        Which axis, of how many.

    Returns
    -------
    ndarray
        With length 1 on the other axes.

    Examples
    --------
    >>> spread([1.0, 2.0], 1, 3).shape
    (1, 2, 1)
    """
    shape = [1] * dimensions
    shape[axis] = -1
    return np.reshape(np.asarray(values), shape)
