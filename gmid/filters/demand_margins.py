"""Phase margins of the amplifiers' own loops inside the filter, exact."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np

from gmid.filters.demand_family import Family
from gmid.filters.demand_loads import Load
from gmid.filters.demand_ports import Ports, Reciprocals
from gmid.filters.demand_search import Point
from gmid.network import measure_loop
from gmid.network.pencil import ComplexArray, FloatArray

_SLACK = 1.0
_FAR = 1e3


def _loop(ports: Ports, real: Reciprocals, k: int) -> Callable[[FloatArray], ComplexArray]:
    def evaluate(frequency: FloatArray) -> ComplexArray:
        f = np.asarray(frequency, dtype=np.float64)
        return ports.find_loop_gain(real, k, f.ravel()).reshape(f.shape)

    return evaluate


def _find_band(real: Reciprocals, load: Load, k: int) -> tuple[float, float]:
    speed = load.beta / (2 * np.pi * float(real.gm[k]) * load.pole_capacitance)
    # a loop that nothing loads crosses 1 far above
    return speed / _FAR, speed * _FAR**3


def find_margins(ports: Ports, real: Reciprocals, loads: Sequence[Load]) -> FloatArray:
    """Measure the phase margin of each amplifier's own loop, all others at work.

    Parameters
    ----------
    ports : Ports
        The filter.
    real : Reciprocals
        The amplifiers, of shape (K,).
    loads : sequence of Load
        What each sees.

    Returns
    -------
    ndarray of float, shape (K,)
        Not-a-number where the loop gain does not fall through 1 [deg].

    Examples
    --------
    >>> from gmid.filters import AmplifierModel, FilterSpec, Passives, realise
    >>> from gmid.filters.demand_loads import find_loads
    >>> made = realise(FilterSpec(response="butterworth", order=1, edge=1e6), capacitor=2e-12,
    ...                passives=Passives(bottom_plate=0.1))
    >>> loads = find_loads(made)
    >>> speed = 1e-3 / (2 * 3.14159 * loads[0].stability_capacitance)
    >>> real = Reciprocals.of(AmplifierModel(gm_total=1e-3, excess_pole=1.5 * speed))
    >>> find_margins(Ports(made), real, loads).round().tolist()
    [61.0]
    """
    margins = [
        measure_loop(_loop(ports, real, k), band=_find_band(real, load, k), sign=1).phase_margin
        for k, load in enumerate(loads)
    ]
    return np.asarray(margins, dtype=np.float64)


def raise_poles(
    ports: Ports, point: Point, loads: Sequence[Load], phase_margin: float
) -> Family | None:
    """Ask for a faster excess pole where the exact margin falls short of the wanted one.

    Parameters
    ----------
    ports : Ports
        The filter.
    point : Point
        Its amplifiers.
    loads : sequence of Load
        What each sees.
    phase_margin : float
        Wanted [deg].

    Returns
    -------
    Family or None
        With faster poles; None where no loop lacks more than a degree, or a pole would not
        help.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, Tolerance
    >>> from gmid.filters.demand import demands_of
    >>> spec = FilterSpec(response="butterworth", order=2, edge=1e6, capacitor=2e-12)
    >>> found = demands_of(spec, Tolerance(passband_db=0.2, counts="tuned-shape"))
    >>> loads = [one.load for one in found.demands]
    >>> raise_poles(found.plane.ports[0], found.point, loads, 60.0) is None
    True
    """
    real = point.amplifiers
    found = find_margins(ports, real, loads)
    factor = np.ones(found.size)
    for k, load in enumerate(loads):
        if found[k] < phase_margin - _SLACK:
            factor[k] = _find_factor(ports, real, k, load, phase_margin)
    if np.all(factor == 1.0):
        return None
    family = point.family
    return Family(family.gm, family.lag * factor, family.is_fixed)


def _find_factor(ports: Ports, real: Reciprocals, k: int, load: Load, phase_margin: float) -> float:
    """Return the factor on 1/pole that gives the margin, all else as it is; 1 without one."""
    best, low, high = 1.0, 0.0, 1.0
    for _ in range(24):
        middle = 0.5 * (low + high)
        scale = np.where(np.arange(real.pole.size) == k, middle, 1.0)
        tried = Reciprocals(real.gm, real.gain, real.pole * scale, real.load)
        margin = measure_loop(
            _loop(ports, tried, k), band=_find_band(real, load, k), sign=1
        ).phase_margin
        if float(margin) >= phase_margin:
            best, low = middle, middle
        else:
            high = middle
    return best
