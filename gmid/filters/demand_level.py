"""Impedance level of a filter with the noise of its amplifiers, and about what these need."""

from __future__ import annotations

from dataclasses import dataclass
from functools import partial

import numpy as np

from gmid.filters.demand_budget import make_budget
from gmid.filters.demand_family import Family
from gmid.filters.demand_filter import Own, Search, Split
from gmid.filters.elements import AmplifierModel
from gmid.filters.impedance import choose_capacitor
from gmid.filters.passives import Passives
from gmid.filters.realisation import Realisation
from gmid.filters.spec import FilterSpec, Tolerance
from gmid.network.pencil import FloatArray

_GAIN_COST = 1.1  # gm_total with the gain that is asked for, over that with infinite gain


@dataclass(frozen=True, eq=False)
class Estimate:
    """About what the amplifiers of a filter need, without gain, signals, noise and margins.

    Parameters
    ----------
    realisation : Realisation
        Sections and elements.
    gm_total, excess_pole : ndarray of float, shape (K,)
        In the order of the positions [S], [Hz].

    Examples
    --------
    >>> from gmid.filters import realise
    >>> made = realise(FilterSpec(response="butterworth", order=1, edge=1e6), capacitor=2e-12)
    >>> Estimate(made, np.array([1e-3]), np.array([1e8])).gm_total.tolist()
    [0.001]
    """

    realisation: Realisation
    gm_total: FloatArray
    excess_pole: FloatArray


def estimate_demands(
    spec: FilterSpec, tolerance: Tolerance, passives: Passives | None = None, *,
    realisation: Realisation | None = None, phase_margin: float = 60.0, split: Split = "each",
    own: Own | None = None, noise_factor: float = 5.0, temperature: float = 27.0,
) -> Estimate:  # fmt: skip
    """Estimate gm_total and excess-phase poles, in a fraction of the time of `demands_of`.

    Parameters
    ----------
    spec : FilterSpec
        The filter, active-RC.
    tolerance : Tolerance
        How far it may be off, and what counts.
    passives : Passives, optional
        What the elements are like; ideal by default.
    realisation : Realisation, optional
        Sections and elements already chosen.
    phase_margin : float
        Of each amplifier's own loop [deg].
    split : str or mapping of str to float
        See `demands_of`.
    own : AmplifierModel or mapping of str to AmplifierModel, optional
        Own capacitances of the amplifiers.
    noise_factor : float
        Of the amplifiers while the capacitor is chosen [-].
    temperature : float
        At which noise counts [degC].

    Returns
    -------
    Estimate
        What infinite gain needs on a coarse grid, and a tenth more for finite gain.

    Raises
    ------
    NoSolution
        If no amplifier can meet the tolerance.

    Examples
    --------
    >>> spec = FilterSpec(response="butterworth", order=2, edge=1e6, capacitor=2e-12)
    >>> found = estimate_demands(spec, Tolerance(passband_db=0.2, counts="tuned-shape"))
    >>> bool((found.gm_total > 50e-6).all())
    True
    """
    given = passives or Passives()
    known: Family | None = None
    if realisation is None:
        realisation, known = choose_level(
            spec, tolerance, given, split=split, phase_margin=phase_margin,
            noise_factor=noise_factor, temperature=temperature, own=own,
        )  # fmt: skip
    budget = make_budget(spec, tolerance, given, realisation)
    search = Search(spec, tolerance, given, realisation, budget, phase_margin, own)
    search.refuse_impossible()
    family = search.weight(split) if known is None else search.adopt(known)
    u = search.plane.find_reach(family, search.guess) / _GAIN_COST
    return Estimate(realisation, 1.0 / (family.gm * u), 1.0 / (2 * np.pi * family.lag * u))


def choose_level(
    spec: FilterSpec, tolerance: Tolerance, passives: Passives, *, split: Split,
    phase_margin: float, noise_factor: float, temperature: float, own: Own | None,
) -> tuple[Realisation, Family | None]:  # fmt: skip
    """Choose the capacitor with the noise of the amplifiers that this capacitor needs.

    Parameters
    ----------
    spec, tolerance, passives
        The filter, how far it may be off, and what its elements are like.
    split, phase_margin, noise_factor, temperature, own
        See `demands_of`.

    Returns
    -------
    realisation : Realisation
        At its impedance level.
    family : Family or None
        The amplifiers as they were weighted for it, if they were.

    Examples
    --------
    >>> spec = FilterSpec(response="butterworth", order=2, edge=1e6, capacitor=2e-12)
    >>> made, _ = choose_level(
    ...     spec, Tolerance(passband_db=0.2), Passives(), split="each", phase_margin=60.0,
    ...     noise_factor=5.0, temperature=27.0, own=None,
    ... )
    >>> made.capacitor
    2e-12
    """
    spread = passives.resistor_spread
    scale = np.array([1.0, 1.0 - spread, 1.0 + spread]) if spread else np.ones(1)
    choose = partial(
        choose_capacitor, spec, passives=passives, temperature=temperature, rscale=scale,
        cscale=1.0 / scale,
    )  # fmt: skip
    if spec.style == "gm-c":
        return choose(amplifiers=AmplifierModel(noise_factor=noise_factor)).realisation, None
    first = choose().realisation
    if spec.capacitor is not None or spec.snr_db is None:
        return first, None
    budget = make_budget(spec, tolerance, passives, first)
    search = Search(spec, tolerance, passives, first, budget, phase_margin, own)
    search.refuse_impossible()
    family = search.weight(split)
    # about what infinite gain needs and a tenth more
    gms = _GAIN_COST / family.at(search.plane.find_reach(family, search.guess), 0.0).gm

    def scaled(made: Realisation) -> dict[str, AmplifierModel]:
        # gm goes with the capacitor
        return {
            place.name: AmplifierModel(
                gm_total=gm * made.capacitor / first.capacitor, noise_factor=noise_factor
            )
            for place, gm in zip(made.amplifiers, gms, strict=True)
        }

    return choose(amplifiers=scaled).realisation, family
