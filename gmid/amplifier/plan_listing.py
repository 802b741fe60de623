"""How a plan tells itself in a notebook and as a data frame."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from gmid.sweep.listing import list_html, make_frame, spell_range

if TYPE_CHECKING:
    from gmid.amplifier.plan import AmplifierPlan
    from gmid.sweep.listing import DataFrame


def list_plan(plan: AmplifierPlan) -> str:
    """Write a plan as a small HTML table, one row a place.

    Parameters
    ----------
    plan : AmplifierPlan
        One candidate, or a batch, of which the ends are shown.

    Returns
    -------
    str
        HTML.

    Examples
    --------
    >>> from gmid.amplifier.example import example_plan
    >>> "bias_reference" in list_plan(example_plan())
    True
    """
    rows = [
        (place, one.device, spell_range(one.length, "m"), spell_range(one.count, ""),
         str(one.stack), one.bulk)
        for place, one in plan.transistors.items()
    ]  # fmt: skip
    load = spell_range(plan.load_capacitance, "F")
    if np.all(np.isfinite(plan.load_resistance)):
        load += f" and {spell_range(plan.load_resistance, 'ohm')}"
    notes = [f"each output drives {load}; all counts times {plan.multiple}"]
    if plan.demands:
        notes.append(f"demands on {', '.join(plan.demands)}")
    return list_html(
        f"Plan {plan.name}: {plan.variant}",
        ("place", "device", "length", "count", "stack", "bulk"), rows, notes=notes,
    )  # fmt: skip


def frame_plan(plan: AmplifierPlan) -> DataFrame:
    """Put the transistors of a plan into a data frame.

    Parameters
    ----------
    plan : AmplifierPlan
        One candidate.

    Returns
    -------
    DataFrame
        Columns ``place device length count stack bulk``, SI; counts without `multiple`.

    Examples
    --------
    >>> from gmid.amplifier.example import example_plan
    >>> frame_plan(example_plan()).place[0]
    'pair'
    """
    rows = [
        (place, one.device, one.length, one.count, one.stack, one.bulk)
        for place, one in plan.transistors.items()
    ]
    names = ("place", "device", "length", "count", "stack", "bulk")
    columns = {name: [row[i] for row in rows] for i, name in enumerate(names)}
    return make_frame(columns, units={"length": "m"})
