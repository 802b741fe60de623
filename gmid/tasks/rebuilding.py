"""The whole filter of a plan file, rebuilt from its request and its amplifiers."""

from __future__ import annotations

from dataclasses import replace

from gmid.errors import DataFault
from gmid.filters.demand_types import FilterDemands
from gmid.request.plans import PlanFile
from gmid.request.process import Bench
from gmid.tasks.demanding import demands


def rebuild_filter(file: PlanFile, bench: Bench) -> FilterDemands:
    """Rebuild the filter that a plan file's amplifiers stand in.

    An active-RC filter follows from its request, a gm-c filter also from its amplifiers: their
    multiples are its transconductances, and their capacitances are part of its own.

    Parameters
    ----------
    file : PlanFile
        With a ``[filter]``, and every amplifier with its positions.
    bench : Bench
        Its devices.

    Returns
    -------
    FilterDemands
        Sections, elements, and how the filter is judged.

    Raises
    ------
    GmidError
        If the request has no filter, or a position no amplifier.

    Examples
    --------
    >>> rebuild_filter.__name__
    'rebuild_filter'
    """
    found = demands(file.request)
    if found.spec.style != "gm-c":
        return found
    if found.spec.capacitor is None:
        raise DataFault(
            "a gm-c filter is rebuilt at the capacitor that it was sized with.",
            where="filter.capacitor", hint="Keep the one that sizing wrote into the plan.",
        )  # fmt: skip
    from gmid.amplifier.filtering.transconductors import refit_elements

    _, devices = next(iter(bench))
    made = refit_elements(found.realisation, file.plans, devices, file.request.supply)
    return replace(found, realisation=made)
