"""Demands with their reasons: from numbers of the search to `Demand` of each amplifier."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from gmid.filters.common_mode import CommonModeLimit
from gmid.filters.demand_budget import Budget
from gmid.filters.demand_loads import Load
from gmid.filters.demand_search import Point
from gmid.filters.demand_signals import NoiseShare, Signals
from gmid.filters.demand_types import Demand, Requirement
from gmid.filters.elements import Position
from gmid.filters.realisation import Realisation
from gmid.filters.spec import FilterSpec, Tolerance
from gmid.network.pencil import FloatArray
from gmid.network.stamps import BOLTZMANN, ZERO_CELSIUS

_MEANING = {
    "all": "every deviation counts",
    "shape": "flat gain aside",
    "tuned-shape": "flat gain and a common shift aside",
}


@dataclass(frozen=True, eq=False)
class Findings:
    """All that was found about the amplifiers of one filter.

    Parameters
    ----------
    spec : FilterSpec
        The filter.
    tolerance : Tolerance
        What it may be off.
    budget : Budget
        What is left for amplifiers.
    realisation : Realisation
        Its elements.
    loads : tuple of Load
        What each amplifier sees.
    point : Point
        The amplifiers.
    shares : ndarray of float, shape (K,)
        Used part of the tolerance with one amplifier alone real [-].
    least_gain : float
        Intrinsic gain that infinite bandwidth needs [-].
    is_gain_given : bool
        Whether the intrinsic gain was asked for.
    phase_margin : float
        Wanted for each amplifier's loop [deg].
    margins : ndarray of float, shape (K,)
        Exact ones, not-a-number in gm-c [deg].
    common_mode : CommonModeLimit
        What the common mode allows.
    signals : Signals, optional
        At the largest swing.
    drive : float
        Largest currents over signal currents, for linearity [-].
    noise : NoiseShare, optional
        What noise is allowed.
    temperature : float
        Of the noise [degC].

    Examples
    --------
    >>> Findings.__dataclass_fields__["drive"].name
    'drive'
    """

    spec: FilterSpec
    tolerance: Tolerance
    budget: Budget
    realisation: Realisation
    loads: tuple[Load, ...]
    point: Point
    shares: FloatArray
    least_gain: float
    is_gain_given: bool
    phase_margin: float
    margins: FloatArray
    common_mode: CommonModeLimit
    signals: Signals | None
    drive: float
    noise: NoiseShare | None
    temperature: float


def make_demands(found: Findings) -> tuple[Demand, ...]:
    """Put demands and reasons together.

    Parameters
    ----------
    found : Findings
        The numbers.

    Returns
    -------
    tuple of Demand
        One for each position.

    Examples
    --------
    >>> from gmid.filters.demand import demands_of
    >>> spec = FilterSpec(response="butterworth", order=1, edge=1e6, capacitor=2e-12)
    >>> one = demands_of(spec, Tolerance(passband_db=0.1)).demands[0]
    >>> one["phase_margin"].because
    'of its loop in the filter, with the excess pole asked for; 60 deg are wanted'
    """
    demands = []
    for k, place in enumerate(found.realisation.amplifiers):
        requirements = {
            **_small_signal(found, k), **_load(found, k, place), **_large_signal(found, k),
        }  # fmt: skip
        demands.append(Demand(place.name, place.section, found.loads[k], requirements))
    return tuple(demands)


def _describe_bound(found: Findings) -> str:
    point = found.point
    part = point.worst.binding
    meaning = f"{found.tolerance.counts}, {_MEANING[found.tolerance.counts]}"
    limit = {
        "passband": f"the passband tolerance of {found.tolerance.passband_db:g} dB ({meaning}; "
        f"{found.budget.describe()})",
        "stopband": f"the stopband, which may lose {found.tolerance.stopband_db:g} dB",
        "delay": f"the group delay, which may be off by {100 * (found.tolerance.delay or 0):g} %",
        "shift": f"the frequency shift: at most {100 * point.worst.allowance.shift:g} % are left "
        f"aside as tunable ({meaning})",
        "gain": f"the flat gain: at most {point.worst.allowance.gain_db:g} dB are left aside "
        f"({meaning})",
    }[part]
    return f"{limit}; worst {_CORNERS.get(point.corner, f'with {point.corner}')}"


_CORNERS = {
    "as asked": "with exactly these amplifiers",
    "infinite gain": "with more gain than asked, where errors no longer cancel",
    "infinite bandwidth": "with more bandwidth than asked, where errors no longer cancel",
    "slow, more loss": "with slower amplifiers of more loss than the elements are corrected for",
    "slow, less loss": "with slower amplifiers of less loss than the elements are corrected for",
    "fast, more loss": "with faster amplifiers of more loss than the elements are corrected for",
    "fast, less loss": "with faster amplifiers of less loss than the elements are corrected for",
    "no excess phase": "with less excess phase than asked, where errors no longer cancel",
}


def _small_signal(found: Findings, k: int) -> dict[str, Requirement]:
    real, load = found.point.amplifiers, found.loads[k]
    gm, intrinsic = float(1.0 / real.gm[k]), float(1.0 / real.gain[k])
    pole = float(1.0 / (2 * np.pi * real.pole[k]))
    go = gm / intrinsic
    whole = go + load.output_conductance
    bound = _describe_bound(found)
    alone = f"this amplifier alone would use {100 * found.shares[k]:.3g} %"
    is_gm_c = found.realisation.style == "gm-c"
    place = found.realisation.amplifiers[k]
    if is_gm_c:
        why_gm = f"the value of {place.element} in the filter"
        why_pole = f"{bound}; {alone}"
    else:
        why_gm = f"{bound}; {alone}"
        why_pole = _explain_pole(found, k)
    why_gain = (
        "as it was given" if found.is_gain_given
        else "bandwidth then costs about a tenth more than with infinite gain"
    )  # fmt: skip
    named = {
        "gm_total": Requirement(gm, "S", why_gm),
        "intrinsic_gain": Requirement(
            intrinsic, "", f"{why_gain}; {found.least_gain:.4g} is the least; {bound}"
        ),
        "output_conductance": Requirement(go, "S", "gm_total over the intrinsic gain"),
        "excess_pole": Requirement(pole, "Hz", why_pole),
        "dc_gain": Requirement(
            gm / whole, "", f"gm_total into its load: {100 * go / whole:.3g} % of the conductance "
            "is the amplifier's own, the rest are resistors of the filter",
        ),
    }  # fmt: skip
    if not is_gm_c:
        named["phase_margin"] = Requirement(
            float(found.margins[k]), "deg", "of its loop in the filter, with the excess pole asked "
            f"for; {found.phase_margin:g} deg are wanted",
        )  # fmt: skip
    return named


def _explain_pole(found: Findings, k: int) -> str:
    load = found.loads[k]
    if load.pole_capacitance > load.stability_capacitance:
        return (
            f"a phase margin of {found.phase_margin:g} deg; the output drives hardly any "
            "capacitance but its own feedback, so a twentieth of C_acc is counted as its load"
        )
    return (
        f"a phase margin of {found.phase_margin:g} deg at the loop bandwidth "
        f"beta gm/(2 pi C_stab), C_stab = {load.stability_capacitance * 1e12:.4g} pF, "
        f"beta = {load.beta:.3g}"
    )


def _list_loads(realisation: Realisation, place: Position) -> str:
    names = [
        element.name for element in realisation.elements
        if place.output in element.nodes and element.kind != "transconductor"
    ]  # fmt: skip
    if place.output == realisation.output and realisation.load_capacitance:
        names.append("the load")
    return ", ".join(names)


def _load(found: Findings, k: int, place: Position) -> dict[str, Requirement]:
    load, names = found.loads[k], _list_loads(found.realisation, place)
    gm = float(1.0 / found.point.amplifiers.gm[k])
    acc, stab, bench = (
        load.accuracy_capacitance, load.stability_capacitance, load.bench_capacitance,
    )  # fmt: skip
    named = {
        "accuracy_capacitance": Requirement(
            acc, "F", f"C_acc = CL + CF, which accuracy counts: {names}"
        ),
        "accuracy_gbw": Requirement(
            gm / (2 * np.pi * acc), "Hz", f"gm_total/(2 pi C_acc) at {acc * 1e12:.4g} pF"
        ),
        "stability_capacitance": Requirement(
            stab, "F", "C_stab = CL + (1 - beta) CF, which bandwidth and stability count"
        ),
        "load_capacitance": Requirement(
            bench, "F", "per side on the bench, CL + (1 - beta) CF; the amplifier's own not counted"
        ),
        "load_resistance": Requirement(
            load.bench_resistance, "ohm", f"per side on the bench, 1/sum G at the output: {names}"
        ),
        "beta": Requirement(load.beta, "", "CF/(CF + Cx) at the virtual ground"),
    }  # fmt: skip
    if not np.isfinite(load.bench_resistance):
        del named["load_resistance"]
    gbw = _find_gbw(found, k)
    if np.isfinite(gbw):
        named["gbw"] = Requirement(
            gbw, "Hz", f"gain 1 into the bench load of {bench * 1e12:.4g} pF, excess pole counted"
        )
    return named


def _find_gbw(found: Findings, k: int) -> float:
    """Return where the gain into the bench load crosses 1 [Hz]."""
    real, load = found.point.amplifiers, found.loads[k]
    gm = float(1.0 / real.gm[k])
    g = gm * float(real.gain[k]) + load.output_conductance
    c, lag = load.bench_capacitance, float(real.pole[k])
    if gm <= g:
        return float("nan")
    # (g^2 + w^2 c^2)(1 + w^2 lag^2) = gm^2, a quadratic in w^2
    a, b, d = (c * lag) ** 2, c**2 + (g * lag) ** 2, g**2 - gm**2
    square = -d / b if a == 0 else (np.sqrt(b * b - 4 * a * d) - b) / (2 * a)
    return float(np.sqrt(square) / (2 * np.pi)) if b > 0 else float("nan")


def _large_signal(found: Findings, k: int) -> dict[str, Requirement]:
    named: dict[str, Requirement] = {}
    if found.signals is not None:
        swing, peak = float(found.signals.swing[k]), float(found.signals.current[k])
        named["swing"] = Requirement(
            swing,
            "V",
            f"peak, differential, at a swing of {found.spec.swing:g} V of the largest node",
        )
        why = (
            f"peak per side, of a sine at {found.signals.frequency[k]:.4g} Hz into all that the "
            "output drives"
        )
        if found.drive > 1.0:
            why = (
                f"linearity: {found.drive:.3g} times the signal current of {peak * 1e6:.3g} uA, "
                f"for a third harmonic of {found.spec.harmonic_limit_db:g} dB at "
                f"{found.spec.harmonic_frequency:.4g} Hz"
            )
        named["output_current"] = Requirement(found.drive * peak, "A", why)
    if found.noise is not None:
        named["input_noise"] = _noise(found, found.noise, k)
    limit = found.common_mode
    if np.isfinite(limit.gain):
        named["common_mode_gain"] = Requirement(limit.gain, "", f"below this: {limit.describe()}")
    return named


def _noise(found: Findings, noise: NoiseShare, k: int) -> Requirement:
    kelvin = found.temperature + ZERO_CELSIUS
    gm = float(1.0 / found.point.amplifiers.gm[k])
    density = float(np.sqrt(8 * BOLTZMANN * kelvin * noise.factor / gm))
    passive = 100 * float(noise.passive.power) / noise.allowed if noise.passive.shares else 0.0
    if noise.factor == 0:
        why = f"the passive elements alone make {passive:.4g} % of the noise that is allowed"
    else:
        why = (
            f"an snr of {found.spec.snr_db:g} dB: the passive elements take {passive:.3g} %, the "
            f"rest is a noise factor of {noise.factor:.3g} for all amplifiers alike"
        )
    return Requirement(density, "V/rtHz", f"white, differential; {why}")
