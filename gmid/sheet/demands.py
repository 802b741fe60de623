"""Lays out what a filter asks of its amplifiers, and why."""

from __future__ import annotations

from gmid.filters.demand_types import Demand, FilterDemands
from gmid.sheet.blocks import Block, Grid, Heading
from gmid.sheet.words import spell_name, spell_value

_MAIN = (
    ("gm_total", "gm_total"),
    ("intrinsic_gain", "gm/go"),
    ("excess_pole", "excess pole"),
    ("accuracy_capacitance", "C acc."),
    ("load_capacitance", "C bench"),
    ("load_resistance", "R bench"),
    ("dc_gain", "A0 bench"),
    ("output_current", "current"),
    ("swing", "swing"),
    ("input_noise", "noise"),
    ("common_mode_gain", "CM gain"),
)


def lay_out_demands(found: FilterDemands) -> list[Block]:
    """Tabulate the demands, one row an amplifier.

    Parameters
    ----------
    found : FilterDemands
        The filter.

    Returns
    -------
    list of Block
        Heading and table.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, Tolerance
    >>> from gmid.filters.demand import demands_of
    >>> spec = FilterSpec(response="butterworth", order=2, edge=1e6, capacitor=2e-12)
    >>> found = demands_of(spec, Tolerance(passband_db=0.2, counts="shape"))
    >>> lay_out_demands(found)[1].heads[:3]
    ('amplifier', 'section', 'gm_total')
    """
    known = [pair for pair in _MAIN if any(pair[0] in one.requirements for one in found.demands)]
    rows = tuple(
        (one.position, str(one.section), *(_spell(one, name) for name, _ in known))
        for one in found.demands
    )
    heads = ("amplifier", "section", *(head for _, head in known))
    caption = (
        "What each amplifier must meet, per side: accuracy counts C acc. = CL + CF, bandwidth and "
        "stability C bench = CL + (1 - beta) CF."
    )
    return [Heading("Amplifiers"), Grid(heads, rows, caption)]


def _spell(one: Demand, name: str) -> str:
    if name not in one.requirements:
        return "-"
    need = one.requirements[name]
    return spell_value(need.value, need.unit)


def lay_out_reasons(found: FilterDemands, *, full: bool) -> list[Block]:
    """Give the reasons: of every demand of every amplifier, or of the one that needs most.

    Parameters
    ----------
    found : FilterDemands
        The filter.
    full : bool
        All amplifiers.

    Returns
    -------
    list of Block
        Tables with the reasons.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, Tolerance
    >>> from gmid.filters.demand import demands_of
    >>> spec = FilterSpec(response="butterworth", order=2, edge=1e6, capacitor=2e-12)
    >>> found = demands_of(spec, Tolerance(passband_db=0.2, counts="shape"))
    >>> len(lay_out_reasons(found, full=True)), len(lay_out_reasons(found, full=False))
    (4, 2)
    """
    largest = max(found.demands, key=lambda one: one["gm_total"].value)
    blocks: list[Block] = []
    for one in found.demands if full else (largest,):
        rows = tuple(
            (spell_name(name), spell_value(need.value, need.unit), need.because)
            for name, need in one.requirements.items()
        )
        most = "" if full else ", which needs the most gm"
        blocks.append(Heading(f"Why: amplifier {one.position} of section {one.section}{most}"))
        blocks.append(Grid(("must have", "value", "because"), rows))
    return blocks


def lay_out_shifts(found: FilterDemands) -> list[Block]:
    """Set exact shifts of each section beside those of the closed forms.

    Parameters
    ----------
    found : FilterDemands
        The filter.

    Returns
    -------
    list of Block
        Heading and table.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, Tolerance
    >>> from gmid.filters.demand import demands_of
    >>> spec = FilterSpec(response="butterworth", order=2, edge=1e6, capacitor=2e-12)
    >>> found = demands_of(spec, Tolerance(passband_db=0.2, counts="shape"))
    >>> lay_out_shifts(found)[1].rows[0][1]
    '1 MHz'
    """
    rows = tuple(
        (
            str(one.section), spell_value(one.f0, "Hz"), f"{one.exact_frequency:+.3%}",
            f"{one.closed_frequency:+.3%}", *_spell_q(one.q, one.exact_q, one.closed_q),
            "yes" if one.is_trusted else "no",
        )
        for one in found.shifts
    )  # fmt: skip
    heads = (
        "section", "f0", "shift", "closed form", "Q", "with them", "closed form", "in its range",
    )  # fmt: skip
    return [
        Heading("What such amplifiers do to each section"),
        Grid(heads, rows, "Exactly, and by the closed forms where they are in their range."),
    ]


def _spell_q(*values: float) -> tuple[str, ...]:
    return tuple(f"{value:.4g}" if value else "-" for value in values)
