"""How much of its tolerance the real filter uses, exactly, for the last steps of sizing."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np

from gmid.amplifier.filtering.realised import RealisedFilter
from gmid.amplifier.filtering.responses import find_corners
from gmid.filters.demand_types import FilterDemands
from gmid.filters.spec import Tolerance


def measure_usage(
    found: FilterDemands, cases: Iterable[RealisedFilter], *, tolerance: Tolerance
) -> float:
    """Measure the largest used part of passband, stopband and delay in all conditions.

    Parameters
    ----------
    found : FilterDemands
        The filter.
    cases : iterable of RealisedFilter
        It with its amplifiers, in every condition.
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
    budget, stick = found.budget, found.plane.fine
    taken = (budget.tuning_db + budget.mismatch_db) / budget.passband_db
    usable = tolerance.passband_db * (1 - taken)
    used = 0.0
    for case in cases:
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
