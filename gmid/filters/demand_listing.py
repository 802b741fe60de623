"""How demands tell themselves in a notebook and as data frames."""

from __future__ import annotations

from typing import TYPE_CHECKING

from gmid.sweep.listing import list_html, make_frame, spell_range

if TYPE_CHECKING:
    from gmid.filters.demand_types import Demand, FilterDemands
    from gmid.sweep.listing import DataFrame

MAIN = ("gm_total", "intrinsic_gain", "excess_pole", "load_capacitance", "load_resistance",
        "output_current")  # fmt: skip
"""Demands that are shown side by side, one row an amplifier."""


def list_demand(one: Demand) -> str:
    """Write the demand on one amplifier as a small HTML table.

    Parameters
    ----------
    one : Demand
        With all its requirements.

    Returns
    -------
    str
        HTML.

    Examples
    --------
    >>> from gmid.filters.demand_loads import Load
    >>> from gmid.filters.demand_types import Demand, Requirement
    >>> one = Demand("A1", 1, Load(position="A1"), {"gm_total": Requirement(1e-3, "S", "why")})
    >>> "1 mS" in list_demand(one)
    True
    """
    rows = [
        (name, spell_range(need.value, need.unit), need.because)
        for name, need in one.requirements.items()
    ]
    title = f"Demand on amplifier {one.position}, section {one.section}"
    return list_html(title, ("demand", "value", "because"), rows)


def list_demands(found: FilterDemands) -> str:
    """Write a filter's demands as a small HTML table, one row an amplifier.

    Parameters
    ----------
    found : FilterDemands
        Of a filter.

    Returns
    -------
    str
        HTML; `to_frame` has them all, with the reasons.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, Tolerance
    >>> from gmid.filters.demand import demands_of
    >>> spec = FilterSpec(response="butterworth", order=2, edge=1e6, capacitor=2e-12)
    >>> "A2" in list_demands(demands_of(spec, Tolerance(passband_db=0.2, counts="shape")))
    True
    """
    names = [name for name in MAIN if any(name in one.requirements for one in found.demands)]
    rows = [
        (one.position, str(one.section), *(
            spell_range(one[name].value, one[name].unit) if name in one.requirements else "-"
            for name in names
        ))
        for one in found.demands
    ]  # fmt: skip
    notes = (
        f"sum of gm_total {spell_range(found.gm_sum, 'S')}, "
        f"bound by {found.point.worst.binding} {found.point.corner}",
    )
    return list_html(f"Demands of {found.spec!r}", ("amplifier", "section", *names), rows,
                     notes=notes)  # fmt: skip


def frame_demands(found: FilterDemands) -> DataFrame:
    """Put a filter's demands into a data frame.

    Parameters
    ----------
    found : FilterDemands
        Of a filter.

    Returns
    -------
    DataFrame
        Columns ``amplifier section demand value unit because``, SI.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, Tolerance
    >>> from gmid.filters.demand import demands_of
    >>> spec = FilterSpec(response="butterworth", order=2, edge=1e6, capacitor=2e-12)
    >>> found = demands_of(spec, Tolerance(passband_db=0.2, counts="shape"))
    >>> frame_demands(found).amplifier.unique().tolist()
    ['A1', 'A2']
    """
    rows = [
        (one.position, one.section, name, need.value, need.unit, need.because)
        for one in found.demands
        for name, need in one.requirements.items()
    ]
    names = ("amplifier", "section", "demand", "value", "unit", "because")
    return make_frame({name: [row[i] for row in rows] for i, name in enumerate(names)})
