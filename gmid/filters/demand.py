"""From a filter to what each of its amplifiers must meet."""

from __future__ import annotations

import numpy as np

from gmid.errors import UsageFault
from gmid.filters.common_mode import find_common_mode_limit
from gmid.filters.demand_budget import find_bands, make_budget
from gmid.filters.demand_family import Family
from gmid.filters.demand_filter import Own, Search, Split
from gmid.filters.demand_level import choose_level
from gmid.filters.demand_loads import Load
from gmid.filters.demand_search import Point
from gmid.filters.demand_shifts import find_shifts
from gmid.filters.demand_signals import Signals, find_harmonic, find_signals, share_noise
from gmid.filters.demand_texts import Findings, make_demands
from gmid.filters.demand_types import FilterDemands, TradeOff
from gmid.filters.distortion import WEAK_INVERSION
from gmid.filters.passives import Passives
from gmid.filters.realisation import Realisation
from gmid.filters.search import Boundary
from gmid.filters.spec import FilterSpec, Tolerance
from gmid.network.pencil import FloatArray

SPLITS = ("each", "alike")
"""Whether every amplifier has its own gm_total, or all the same."""


def demands_of(
    spec: FilterSpec, tolerance: Tolerance, passives: Passives | None = None, *,
    realisation: Realisation | None = None, intrinsic_gain: float | None = None,
    phase_margin: float = 60.0, split: Split = "each",
    own: Own | None = None, noise_factor: float = 5.0, temperature: float = 27.0,
    tuning_bits: int | None = None, mismatch: float = 0.0,
    divisor: float = WEAK_INVERSION, amplifier_spread: float = 0.1,
) -> FilterDemands:  # fmt: skip
    """Find what each amplifier of a filter must meet.

    Parameters
    ----------
    spec : FilterSpec
        The filter.
    tolerance : Tolerance
        How far it may be off, and what counts.
    passives : Passives, optional
        What the elements are like; ideal by default.
    realisation : Realisation, optional
        Sections and elements already chosen; by default `choose_capacitor` chooses them, with
        the noise of the amplifiers counted.
    intrinsic_gain : float, optional
        gm over own output conductance of the amplifiers [-]; by default where bandwidth costs a
        tenth more than with infinite gain.
    phase_margin : float
        Of each amplifier's own loop [deg].
    split : str or mapping of str to float
        ``each``: error split for the least sum of gm_total; ``alike``: one gm_total for all; a
        mapping: gm_total in these proportions, by position.
    own : AmplifierModel or mapping of str to AmplifierModel, optional
        Own input and output capacitances of the amplifiers, as far as they are known.
    noise_factor : float
        Of the amplifiers while the capacitor is chosen [-].
    temperature : float
        At which noise counts [degC].
    tuning_bits : int, optional
        Bits of the tuning bank, see `make_budget`.
    mismatch : float
        Standard deviation of each element, relative [-].
    divisor : float
        d of the cubic term of the amplifiers, see `gmid.filters.distortion` [-].
    amplifier_spread : float
        Of gm and loss either way, where elements are corrected for the nominal amplifier; it
        takes a bias that tracks the resistors [-].

    Returns
    -------
    FilterDemands
        Demands, trade-off, shifts and all that explains them.

    Raises
    ------
    NoSolution
        If no amplifier can meet the tolerance, or the intrinsic gain asked for is too small; the
        hint says which meaning or how much tolerance would make it possible.
    DataFault
        If the filter cannot be realised.

    Examples
    --------
    >>> spec = FilterSpec(response="butterworth", order=2, edge=1e6, capacitor=2e-12)
    >>> found = demands_of(spec, Tolerance(passband_db=0.2, counts="tuned-shape"))
    >>> bool(0.97 < found.point.dense <= 1.0)
    True
    """
    if isinstance(split, str) and split not in SPLITS:
        raise UsageFault(f"split = {split!r}?", hint=f"Choose {' or '.join(SPLITS)}.")
    given = passives or Passives()
    known: Family | None = None
    if realisation is None:
        realisation, known = choose_level(
            spec, tolerance, given, split=split, phase_margin=phase_margin,
            noise_factor=noise_factor, temperature=temperature, own=own,
        )  # fmt: skip
    budget = make_budget(
        spec, tolerance, given, realisation, tuning_bits=tuning_bits, mismatch=mismatch
    )
    search = Search(spec, tolerance, given, realisation, budget, phase_margin, own)
    search.refuse_impossible()
    family = search.weight(split) if known is None else search.adopt(known)
    boundary = search.plane.trace(family, search.guess)
    point, margins = search.find_point(family, boundary, intrinsic_gain)
    if spec.correct_elements == "nominal":
        point, margins = search.correct(point, amplifier_spread)
    return _finish(
        search, point, boundary, margins, is_gain_given=intrinsic_gain is not None,
        temperature=temperature, divisor=divisor,
    )  # fmt: skip


def _finish(
    search: Search, point: Point, boundary: Boundary, margins: FloatArray, *,
    is_gain_given: bool, temperature: float, divisor: float,
) -> FilterDemands:  # fmt: skip
    spec, made, ports = search.spec, search.realisation, search.plane.ports[0]
    real = point.amplifiers
    models = dict(zip([p.name for p in made.amplifiers], real.models(), strict=True))
    signals: Signals | None = None
    harmonic, drive = None, 1.0
    if spec.swing is not None:
        top = 10.0 * find_bands(spec, search.tolerance)[0][1]
        if spec.kind == "highpass":
            top *= 0.1
        signals = find_signals(made, ports, spec.swing, real, top)
        harmonic, drive = find_harmonic(spec, ports, real, signals, divisor=divisor)
    noise = share_noise(spec, made, models, temperature=temperature)
    alone = [
        float(search.plane.measure(real.only(k, keep_gm=point.family.is_fixed)))
        for k in range(len(models))
    ]
    found = Findings(
        spec=spec, tolerance=search.tolerance, budget=search.budget, realisation=made,
        loads=search.loads, point=point, shares=np.array(alone),
        least_gain=float(1.0 / boundary.v[-1]), is_gain_given=is_gain_given,
        phase_margin=search.phase_margin, margins=margins,
        common_mode=find_common_mode_limit(made), signals=signals, drive=drive, noise=noise,
        temperature=temperature,
    )  # fmt: skip
    return FilterDemands(
        spec=spec, tolerance=search.tolerance, realisation=made, budget=search.budget,
        demands=make_demands(found), point=point, trade_off=_trade(boundary, point, search.loads),
        shifts=find_shifts(made, models, search.loads), common_mode=found.common_mode,
        noise=None if noise is None or not noise.passive.shares else noise.passive,
        harmonic=harmonic, plane=search.plane,
    )  # fmt: skip


def _trade(boundary: Boundary, point: Point, loads: tuple[Load, ...]) -> TradeOff:
    """Turn the boundary into gain against bandwidth, scaled so that it meets the exact point."""
    family = point.family
    kept = boundary.u > 0
    u, v = boundary.u[kept], boundary.v[kept]
    u = u * point.u / np.interp(point.v, v, u)
    with np.errstate(divide="ignore"):
        gain = 1.0 / v
    if family.is_fixed:
        sums = np.mean(1.0 / family.lag) / u / (2 * np.pi)
        bandwidth, chosen = sums, float(np.mean(1.0 / family.lag) / point.u / (2 * np.pi))
    else:
        size = np.array([load.accuracy_capacitance for load in loads])
        sums, chosen = np.sum(1.0 / family.gm) / u, float(np.sum(1.0 / family.gm) / point.u)
        bandwidth = np.mean(1.0 / family.gm / size) / u / (2 * np.pi)
    return TradeOff(
        gain, np.asarray(sums), np.asarray(bandwidth), float(1.0 / boundary.v[-1]),
        (1.0 / point.v, chosen),
    )  # fmt: skip
