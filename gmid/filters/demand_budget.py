"""What of a tolerance is left for the amplifiers: tuning and mismatch take their part first."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from gmid.errors import NoSolution
from gmid.filters.closed_forms import find_tuning_residual
from gmid.filters.deviation import MEANINGS, Allowance, Yardstick
from gmid.filters.passives import Passives
from gmid.filters.realisation import Realisation
from gmid.filters.responses import find_response, find_stop_edge
from gmid.filters.spec import FilterSpec, Tolerance
from gmid.network import transfer
from gmid.network.pencil import ComplexArray, FloatArray

GRID_SHARE = 0.02
"""Part of the tolerance that is left free for what lies between grid points [-]."""

_DECADES_DOWN = 1e-3
_TUNING_SHARE = 0.2
_MOST_BITS = 10
_SAMPLES = 400
_POINTS = (60, 240, 2000)
_SEED = 20_240_601


@dataclass(frozen=True, kw_only=True)
class Budget:
    """How the tolerance of the passband is shared out.

    Parameters
    ----------
    passband_db : float
        What the user allows [dB].
    grid_db : float
        Left free for what lies between the points of the frequency grid [dB].
    tuning_db : float
        What the steps of the tuning bank cost [dB].
    tuning_bits : int
        Bits of the bank; 0 where there is none.
    tuning_residual : float
        Largest frequency error that it leaves [-].
    mismatch_db : float
        What the mismatch of elements costs in 95 % of cases [dB].

    Examples
    --------
    >>> budget = Budget(passband_db=0.2, grid_db=0.004, tuning_db=0.04, tuning_bits=7,
    ...                 tuning_residual=0.003, mismatch_db=0.0)
    >>> round(budget.usable_db, 3)
    0.156
    """

    passband_db: float
    grid_db: float
    tuning_db: float = 0.0
    tuning_bits: int = 0
    tuning_residual: float = 0.0
    mismatch_db: float = 0.0

    @property
    def usable_db(self) -> float:
        """What is left for the amplifiers and for rounded elements [dB]."""
        return self.passband_db - self.grid_db - self.tuning_db - self.mismatch_db

    def describe(self) -> str:
        """Say in one sentence how the tolerance is shared out."""
        parts = [f"{self.grid_db:.3g} dB between grid points"]
        if self.tuning_bits:
            parts.append(
                f"{self.tuning_db:.3g} dB for a bank of {self.tuning_bits} bits "
                f"(+-{100 * self.tuning_residual:.2g} %)"
            )
        if self.mismatch_db:
            parts.append(f"{self.mismatch_db:.3g} dB for mismatch")
        return f"{self.usable_db:.3g} of {self.passband_db:.3g} dB left after {', '.join(parts)}"


def find_bands(
    spec: FilterSpec, tolerance: Tolerance
) -> tuple[tuple[float, float], tuple[tuple[float, float], ...]]:
    """Return the bands in which a tolerance is checked, with ends that a grid can have.

    Parameters
    ----------
    spec : FilterSpec
        The filter.
    tolerance : Tolerance
        Its `up_to` ends the stopband of a lowpass or bandpass (a decade by default) and the
        passband of a highpass (likewise).

    Returns
    -------
    passband : tuple of float
        [Hz].
    stopbands : tuple of tuple
        None where no attenuation is specified.

    Examples
    --------
    >>> spec = FilterSpec(response="chebyshev", order=5, edge=400e3, ripple_db=0.5)
    >>> find_bands(spec, Tolerance(passband_db=0.2))
    ((400.0, 400000.0), ())
    """
    low, high = spec.passband
    if spec.kind == "lowpass":
        low = high * _DECADES_DOWN
    if spec.kind == "highpass":
        high = max(tolerance.up_to or 10.0 * low, 1.01 * low)
    stop = spec.stop_edge
    if stop is None and spec.response == "elliptic":
        stop = _find_elliptic_stop(spec)
    if stop is None or spec.attenuation_db is None:
        return (low, high), ()
    below, above = stop if isinstance(stop, tuple) else (stop, stop)
    bands = []
    if spec.kind != "lowpass":
        bands.append((0.1 * below, below))
    if spec.kind != "highpass":
        bands.append((above, max(tolerance.up_to or 10.0 * above, 1.01 * above)))
    return (low, high), tuple(bands)


def _find_elliptic_stop(spec: FilterSpec) -> float | tuple[float, float]:
    ratio = find_stop_edge(spec, find_response(spec).order)
    if not isinstance(spec.edge, tuple):
        assert spec.edge is not None
        return spec.edge * ratio if spec.kind == "lowpass" else spec.edge / ratio
    low, high = spec.edge
    half = 0.5 * ratio * (high - low)
    middle = float(np.hypot(half, np.sqrt(low * high)))
    return low * high / (middle + half), middle + half


def make_yardsticks(
    spec: FilterSpec, tolerance: Tolerance, usable_db: float
) -> tuple[Yardstick, Yardstick, Yardstick]:
    """Make the yardsticks of a search: coarse, fine and dense grids.

    Parameters
    ----------
    spec : FilterSpec
        The filter.
    tolerance : Tolerance
        What counts.
    usable_db : float
        What the passband may deviate [dB].

    Returns
    -------
    tuple of Yardstick
        With 60, 240 and 2000 points in the passband.

    Examples
    --------
    >>> spec = FilterSpec(response="chebyshev", order=5, edge=400e3, ripple_db=0.5)
    >>> make_yardsticks(spec, Tolerance(passband_db=0.2), 0.196)[0].allowance.passband_db
    0.196
    """
    allowance = Allowance(
        usable_db, tolerance.counts, max(tolerance.stopband_db, 1e-6),
        None if tolerance.delay is None else tolerance.delay * (1.0 - GRID_SHARE),
    )  # fmt: skip
    passband, stopbands = find_bands(spec, tolerance)
    attenuation = np.inf if spec.attenuation_db is None else spec.attenuation_db
    ideal = find_response(spec)
    one, two, three = (
        Yardstick(ideal, passband, allowance, stopbands=stopbands, attenuation_db=attenuation,
                  points=points)
        for points in _POINTS
    )  # fmt: skip
    return one, two, three


def make_budget(
    spec: FilterSpec, tolerance: Tolerance, passives: Passives, realisation: Realisation, *,
    tuning_bits: int | None = None, mismatch: float = 0.0,
) -> Budget:  # fmt: skip
    """Take the parts of tuning and mismatch off a tolerance.

    Parameters
    ----------
    spec : FilterSpec
        The filter.
    tolerance : Tolerance
        What the user allows.
    passives : Passives
        Their spread makes tuning necessary: of all time constants by the product of both.
    realisation : Realisation
        Whose elements mismatch.
    tuning_bits : int, optional
        Bits of a linear capacitor bank; by default the fewest that cost at most a fifth of the
        tolerance.
    mismatch : float
        Standard deviation of each element, relative [-].

    Returns
    -------
    Budget
        With something left for the amplifiers.

    Raises
    ------
    NoSolution
        If nothing is left; the hint says what would leave something.

    Examples
    --------
    >>> from gmid.filters import realise
    >>> spec = FilterSpec(response="chebyshev", order=5, edge=400e3, ripple_db=0.5)
    >>> budget = make_budget(spec, Tolerance(passband_db=0.2), Passives(resistor_spread=0.2),
    ...                      realise(spec, capacitor=4e-12))
    >>> budget.tuning_bits
    8
    """
    whole = tolerance.passband_db
    stick = make_yardsticks(spec, tolerance, whole)[0]
    spread = (1.0 + passives.resistor_spread) * (1.0 + passives.capacitor_spread) - 1.0
    bits, residual, cost = 0, 0.0, 0.0
    if spread > 0:
        bits, residual, cost = _find_bank(stick, spread, tuning_bits)
    budget = Budget(
        passband_db=whole, grid_db=GRID_SHARE * whole, tuning_db=cost, tuning_bits=bits,
        tuning_residual=residual, mismatch_db=_find_mismatch(stick, realisation, mismatch),
    )  # fmt: skip
    if budget.usable_db <= 0:
        raise NoSolution(
            f"the passband tolerance of {whole:g} dB leaves nothing for the amplifiers: "
            f"{budget.describe()}.", where="tolerance.passband",
            hint=f"Allow more than {1.05 * (whole - budget.usable_db):.2g} dB, or take off the "
            "largest of these parts.",
        )  # fmt: skip
    return budget


def _find_bank(
    stick: Yardstick, spread: float, tuning_bits: int | None
) -> tuple[int, float, float]:
    """Find the bits of a bank, what it leaves, and what that costs in the passband [dB]."""
    choices = range(1, _MOST_BITS + 1) if tuning_bits is None else (tuning_bits,)
    for bits in choices:
        residual = find_tuning_residual(min(spread, 0.99), bits)
        cost = find_shift_cost(stick, residual)
        if cost <= _TUNING_SHARE * stick.allowance.passband_db:
            break
    return bits, residual, cost


def find_shift_cost(stick: Yardstick, shift: float) -> float:
    """Return what a frequency error that stays costs in the passband.

    Parameters
    ----------
    stick : Yardstick
        Of the ideal filter.
    shift : float
        Relative, taken both ways [-].

    Returns
    -------
    float
        Deviation with the frequency error counted, flat gain as the stick says [dB].

    Examples
    --------
    >>> from gmid.filters import FilterSpec, Tolerance
    >>> spec = FilterSpec(response="chebyshev", order=5, edge=400e3, ripple_db=0.5)
    >>> stick = make_yardsticks(spec, Tolerance(passband_db=0.2), 0.2)[0]
    >>> round(find_shift_cost(stick, 1e-3), 3)
    0.024
    """
    counts = "all" if stick.allowance.counts == "all" else "shape"
    plain = Yardstick(
        stick.ideal, stick.passband, replace(stick.allowance, counts=counts, delay=None)
    )
    moved = plain.frequency * np.array([[1.0 - shift], [1.0 + shift]])
    return float(np.max(plain.measure(stick.ideal(moved)).passband_db))


def _find_mismatch(stick: Yardstick, realisation: Realisation, sigma: float) -> float:
    """Return the deviation that mismatch of the elements does not exceed in 95 % of cases."""
    if sigma == 0:
        return 0.0
    ideal, slopes = find_sensitivities(realisation, stick.frequency)
    random = np.random.default_rng(_SEED)
    errors = sigma * random.standard_normal((_SAMPLES, slopes.shape[0]))
    return float(np.quantile(stick.measure(ideal * np.exp(errors @ slopes)).passband_db, 0.95))


def find_sensitivities(
    realisation: Realisation, frequency: FloatArray
) -> tuple[ComplexArray, ComplexArray]:
    """Return the response with ideal amplifiers and its logarithmic slopes over all elements.

    Parameters
    ----------
    realisation : Realisation
        The filter.
    frequency : ndarray of float, shape (nf,)
        [Hz].

    Returns
    -------
    response : ndarray of complex, shape (nf,)
        The transfer [-].
    slopes : ndarray of complex, shape (elements, nf)
        ``d ln H/d ln value`` [-].

    Examples
    --------
    >>> from gmid.filters import FilterSpec, realise
    >>> made = realise(FilterSpec(response="butterworth", order=1, edge=1e6), capacitor=2e-12)
    >>> find_sensitivities(made, np.array([1.0]))[1].real.round(2).ravel().tolist()[:2]
    [-1.0, 1.0]
    """
    step = 1e-4
    names = [element.name for element in realisation.elements]
    table = np.ones((2, len(names), len(names)))
    table[0] += step * np.eye(len(names))
    table[1] -= step * np.eye(len(names))
    factors = {name: table[..., k] for k, name in enumerate(names)}
    up, down = transfer(realisation.network(factors=factors), "vin", realisation.output, frequency)
    middle = transfer(realisation.network(), "vin", realisation.output, frequency)
    return middle, np.log(up / down) / (2 * step)


def advise_meaning(spec: FilterSpec, tolerance: Tolerance, usage: dict[str, float]) -> str:
    """Say which meaning of the tolerance, or how much of it, would make it possible.

    Parameters
    ----------
    spec : FilterSpec
        The filter.
    tolerance : Tolerance
        What cannot be met.
    usage : dict of str to float
        What ideal amplifiers use of it under each meaning [-].

    Returns
    -------
    str
        A hint.

    Examples
    --------
    >>> spec = FilterSpec(response="chebyshev", order=5, edge=400e3, ripple_db=0.5)
    >>> advise_meaning(spec, Tolerance(passband_db=0.1), {"all": 2.0, "shape": 0.5})
    'With counts = "shape" it would be possible, or with 0.22 dB.'
    """
    later = MEANINGS[MEANINGS.index(tolerance.counts) + 1 :]
    fits = [name for name in later if usage.get(name, np.inf) < 1.0]
    enough = 1.1 * usage[tolerance.counts] * tolerance.passband_db
    if fits:
        return f'With counts = "{fits[0]}" it would be possible, or with {enough:.2g} dB.'
    return f"It would be possible with {enough:.2g} dB."
