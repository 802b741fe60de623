"""The impedance level of a filter set by the noise of its sized amplifiers."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence

import numpy as np

from gmid.amplifier.filtering.positions import place_plans
from gmid.amplifier.filtering.realised import realise_filter
from gmid.amplifier.filtering.responses import find_corners
from gmid.amplifier.plan import AmplifierPlan, Supply
from gmid.condition import Condition
from gmid.device.device import Device
from gmid.filters.demand_types import FilterDemands
from gmid.filters.impedance import choose_capacitor
from gmid.filters.realisation import Realisation

MARGIN_DB = 0.02
"""By which the level is set beyond the signal-to-noise ratio asked for [dB]."""

LARGEST_STEP = 1.5
"""By which the level grows at most at a time [-]."""

_WORTH = 0.85  # noise power over what is allowed


def measure_noise_balance(
    found: FilterDemands, plans: Sequence[AmplifierPlan],
    bench: Iterable[tuple[Condition, Mapping[str, Device]]], supply: Supply,
) -> tuple[float, float]:  # fmt: skip
    """Measure the noise of a filter where it is worst.

    Parameters
    ----------
    found : FilterDemands
        The filter, with a noise band.
    plans : sequence of AmplifierPlan
        Its amplifiers.
    bench : iterable of (Condition, mapping of str to Device)
        Conditions; only the hottest ones count.
    supply : Supply
        What the amplifiers are fed with.

    Returns
    -------
    passive, active : float
        Mean squares at the output from its elements and from its amplifiers [V^2].

    Examples
    --------
    >>> measure_noise_balance.__name__
    'measure_noise_balance'
    """
    assert found.spec.noise_band is not None
    opened = list(bench)
    hottest = max(condition.temperature for condition, _ in opened)
    by_position = place_plans(plans, found.realisation)
    worst = (0.0, 0.0)
    for condition, devices in opened:
        if condition.temperature < hottest:
            continue
        case = realise_filter(found.realisation, by_position, devices, supply)
        tuned, _ = find_corners(found, case)
        noise = case.noise(found.spec.noise_band, rscale=tuned.rscale, cscale=tuned.cscale)
        active = np.asarray(sum(noise.shares[name] for name in by_position))
        k = np.unravel_index(int(np.argmax(noise.power)), noise.power.shape)
        if noise.power[k] > sum(worst):
            worst = (float(noise.power[k] - active[k]), float(active[k]))
    return worst


def level_filter(
    found: FilterDemands, plans: Sequence[AmplifierPlan],
    bench: Iterable[tuple[Condition, Mapping[str, Device]]], supply: Supply, *,
    lower: bool = False, keep_amplifiers: bool = False,
) -> Realisation:  # fmt: skip
    """Choose the level at which a filter with given amplifiers has the wanted ratio.

    The noise of the elements falls with the level, that of the amplifiers stays.

    Parameters
    ----------
    found : FilterDemands
        The filter at its present level.
    plans : sequence of AmplifierPlan
        Its amplifiers.
    bench : iterable of (Condition, mapping of str to Device)
        Conditions.
    supply : Supply
        What the amplifiers are fed with.
    lower : bool
        Also go down where the ratio is much better than asked; the amplifiers are then taken to
        shrink with the level.
    keep_amplifiers : bool
        Go down as far as the noise of these amplifiers allows.

    Returns
    -------
    Realisation
        Rounded to units; the present one where a capacitor is given or no ratio is asked for.

    Raises
    ------
    DataFault
        If a bound of the elements is in the way.

    Examples
    --------
    >>> level_filter.__name__
    'level_filter'
    """
    spec, made = found.spec, found.realisation
    if spec.capacitor is not None or spec.snr_db is None or spec.swing is None:
        return made
    allowed = spec.swing**2 / 2 / 10 ** ((spec.snr_db + MARGIN_DB) / 10)
    passive, active = measure_noise_balance(found, plans, bench, supply)
    whole, left = (passive + active) / allowed, allowed - active
    if whole <= 1.0:
        if keep_amplifiers:
            ratio = passive / left
        elif lower and whole < _WORTH:
            ratio = whole
        else:
            return made
    else:
        # where the amplifiers leave too little, everything has to grow
        ratio = min(passive / left if left > 0.2 * allowed else whole, LARGEST_STEP)
    level = _keep_bounds(found, made.capacitor * ratio)
    if level == made.capacitor:
        return made
    return choose_capacitor(
        spec.with_values(capacitor=level, snr_db=None), passives=made.passives,
        sections=made.sections,
    ).realisation  # fmt: skip


def _keep_bounds(found: FilterDemands, wanted: float) -> float:
    """Keep a level within what elements can be, in whole units where there are any."""
    from gmid.filters.impedance import find_bounds
    from gmid.filters.realise import realise

    spec, made = found.spec, found.realisation
    free = spec.with_values(
        source_resistance=0.0, load_capacitance=0.0, load_resistance=float("inf"), capacitor=None
    )
    probe = realise(free, capacitor=1e-12, passives=made.passives, sections=made.sections)
    lower, upper = find_bounds(spec, probe)
    unit = made.passives.unit_capacitor
    if unit is not None:
        wanted = float(np.ceil(wanted / unit - 1e-6) * unit)
    return float(np.clip(wanted, lower.value * (1 + 1e-9), upper.value))
