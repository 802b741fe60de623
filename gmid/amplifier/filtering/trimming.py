"""How much of its tolerance the real filter uses, exactly, for the last steps of sizing."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence

import numpy as np

from gmid.amplifier.filtering.positions import place_plans
from gmid.amplifier.filtering.realised import RealisedFilter, realise_filter
from gmid.amplifier.filtering.responses import find_corners
from gmid.amplifier.plan import AmplifierPlan, Supply
from gmid.condition import Condition
from gmid.device.device import Device
from gmid.filters.demand_types import FilterDemands
from gmid.filters.spec import Tolerance


def measure_usage(
    found: FilterDemands, plans: Sequence[AmplifierPlan],
    bench: Iterable[tuple[Condition, Mapping[str, Device]]], supply: Supply, *,
    tolerance: Tolerance,
) -> float:  # fmt: skip
    """Measure the largest used part of passband, stopband and delay in all conditions.

    Parameters
    ----------
    found : FilterDemands
        The filter.
    plans : sequence of AmplifierPlan
        Its amplifiers.
    bench : iterable of (Condition, mapping of str to Device)
        Conditions.
    supply : Supply
        What the amplifiers are fed with.
    tolerance : Tolerance
        Asked for.

    Returns
    -------
    float
        Above 1 where the tolerance is broken, infinite for a filter or a common mode that is
        not stable [-].

    Examples
    --------
    >>> measure_usage.__name__
    'measure_usage'
    """
    by_position = place_plans(plans, found.realisation)
    budget, stick = found.budget, found.plane.fine
    taken = (budget.tuning_db + budget.mismatch_db) / budget.passband_db
    usable = tolerance.passband_db * (1 - taken)
    used = 0.0
    case: RealisedFilter | None = None
    for _, devices in bench:
        case = realise_filter(found.realisation, by_position, devices, supply, start=case)
        tuned, _ = find_corners(found, case)
        for common in (False, True):
            poles = case.poles(common_mode=common)
            if np.nanmax(poles.real) > 0:
                return float("inf")
        seen = stick.measure(
            case.respond(stick.frequency, rscale=tuned.rscale, cscale=tuned.cscale)
        )
        parts = [float(seen.passband_db.max()) / usable]
        parts.append(float(seen.stopband_db.max()) / tolerance.stopband_db)
        if tolerance.delay is not None:
            parts.append(float(seen.delay.max()) / tolerance.delay)
        used = max(used, *parts)
    return used
