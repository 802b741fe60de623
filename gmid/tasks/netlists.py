"""Netlists of a plan file."""

from __future__ import annotations

from pathlib import Path

from gmid.amplifier.decks import write_netlists
from gmid.amplifier.predicting import predict
from gmid.request.plans import PlanFile, has_filter, read_plan
from gmid.request.process import open_bench


def netlists(plan: str | Path | PlanFile) -> dict[str, str]:
    """Write subcircuits and test benches.

    Parameters
    ----------
    plan : str, Path or PlanFile
        The plan.

    Returns
    -------
    dict of str to str
        Text by file name.

    Raises
    ------
    GmidError
        If the plan or its table is at fault.

    Examples
    --------
    >>> netlists("missing.toml")
    Traceback (most recent call last):
    ...
    gmid.errors.FileTrouble: missing.toml: there is no such file.
    """
    file = plan if isinstance(plan, PlanFile) else read_plan(plan)
    found = write_benches(file)
    if has_filter(file):
        from gmid.amplifier.filtering.decks import write_filter_deck
        from gmid.amplifier.filtering.positions import place_plans
        from gmid.tasks.rebuilding import rebuild_filter

        made = rebuild_filter(file, open_bench(file.request.process)).realisation
        found["filter.cir"] = write_filter_deck(
            made, place_plans(file.plans, made), file.request.supply
        )
    return found


def write_benches(file: PlanFile) -> dict[str, str]:
    """Write subcircuits and benches of the amplifiers alone.

    Parameters
    ----------
    file : PlanFile
        As read.

    Returns
    -------
    dict of str to str
        Text by file name.

    Examples
    --------
    >>> write_benches.__name__
    'write_benches'
    """
    request = file.request
    _, devices = next(iter(open_bench(request.process)))
    gbw = {
        one.name: float(predict(one, devices, request.supply).signal.gbw.max())
        for one in file.plans
    }
    return write_netlists(file.plans, request.supply, devices, gbw=gbw)
