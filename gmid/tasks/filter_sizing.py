"""Sizing the amplifiers of a filter."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace

import numpy as np

from gmid.amplifier.filtering.decks import write_filter_deck
from gmid.amplifier.filtering.responses import FilterResponse
from gmid.amplifier.filtering.reviewing import FilterReview
from gmid.amplifier.filtering.sizing import FilterSizing, size_filter
from gmid.filters.demand_report import ResponseCurve
from gmid.filters.demand_types import FilterDemands
from gmid.quantity import format_quantity
from gmid.request.plans import PlanFile
from gmid.request.process import Bench
from gmid.request.request import Request
from gmid.sheet.amplifiers import Reviewed, fill_amplifier, fill_checks
from gmid.sheet.data import FilterSheet, ResponseRow
from gmid.sheet.filter_figures import draw_realised
from gmid.sheet.filters import fill_filter
from gmid.sheet.plots import draw_figures
from gmid.tasks.checking import assemble_sheet
from gmid.tasks.netlists import write_benches
from gmid.tasks.sized import Sizing

Progress = Callable[[str, int, int], None]

_MOST_CURVES = 8
"""That can be told apart in one figure."""


def size_filter_request(
    asked: Request, bench: Bench, *, progress: Progress | None = None
) -> Sizing:
    """Size every amplifier of a request's filter.

    Parameters
    ----------
    asked : Request
        With a ``[filter]`` and ``[tolerance]``.
    bench : Bench
        Its devices.
    progress : callable, optional
        Told of each step.

    Returns
    -------
    Sizing
        With one plan for each distinct amplifier.

    Raises
    ------
    GmidError
        If the filter cannot be realised, or no amplifier can keep its tolerance.

    Examples
    --------
    >>> size_filter_request.__name__
    'size_filter_request'
    """
    assert asked.spec is not None
    assert asked.tolerance is not None

    def tell(share: float, words: str) -> None:
        if progress:
            progress(words, round(100 * share), 100)

    found = size_filter(
        asked.spec, asked.tolerance, asked.passives, bench=bench, roles=asked.process.devices,
        own_well=asked.process.own_well, supply=asked.supply, choices=asked.choices,
        matching=asked.matching, progress=tell,
    )  # fmt: skip
    reviews = tuple(
        Reviewed(
            plan, dict(zip(bench.conditions, predictions, strict=True)), checks, asked.choices,
            asked.matching,
        )
        for plan, predictions, checks in zip(
            found.plans, found.predictions, found.amplifier_checks, strict=True
        )
    )  # fmt: skip
    figures = draw_realised(found.demands, _choose_curves(found))
    for one in reviews:
        figures |= draw_figures(one)
    filtered = fill_reviewed(found.demands, found.review, facts=_list_facts(found))
    sheet = assemble_sheet(
        asked, [fill_amplifier(one) for one in reviews], bench.conditions,
        digest=bench.table.digest, filtered=filtered, sentence=found.suggestion,
    )  # fmt: skip
    settled = fix_capacitor(asked, found)
    decks = write_benches(PlanFile(settled, found.plans))
    decks["filter.cir"] = write_filter_deck(
        found.demands.realisation, found.by_position, asked.supply
    )
    return Sizing(
        settled, found.plans, reviews, replace(sheet, figures=figures), bench.table.digest, decks
    )


def fill_reviewed(
    found: FilterDemands, review: FilterReview, *, facts: Sequence[tuple[str, str]] = ()
) -> FilterSheet:
    """Fill the filter's part of a sheet with what the real amplifiers make of it.

    Parameters
    ----------
    found : FilterDemands
        The filter.
    review : FilterReview
        With its amplifiers.
    facts : sequence of (str, str)
        More lines of its table.

    Returns
    -------
    FilterSheet
        Pure data.

    Examples
    --------
    >>> fill_reviewed.__name__
    'fill_reviewed'
    """
    lines = [
        ("supply current of all amplifiers", format_quantity(review.supply_current, "A")),
        ("the largest in any condition", format_quantity(review.largest_current, "A")),
        *facts,
    ]
    if review.noise_shares:
        ranked = sorted(review.noise_shares.items(), key=lambda pair: -pair[1])[:6]
        shares = ", ".join(f"{name} {share:.1%}" for name, share in ranked)
        lines.append(("who makes the output noise", shares))
    rows = [
        ResponseRow(
            condition=one.condition, tuned=one.tuned,
            frequency=tuple(float(f) for f in one.frequency),
            gain_db=tuple(float(g) for g in one.gain_db),
            deviation_db=tuple(float(d) for d in one.deviation_db),
        )
        for one in review.responses
    ]  # fmt: skip
    return fill_filter(found, response=rows, checks=fill_checks(review.checks), facts=lines)


def _list_facts(found: FilterSizing) -> list[tuple[str, str]]:
    over = f"{found.review.largest_current / found.floor:.2f} times"
    return [
        ("over the floor of all amplifiers", f"{over} {format_quantity(found.floor, 'A')}"),
        *(("decided on the way", note) for note in found.notes),
    ]


def fix_capacitor(asked: Request, found: FilterSizing) -> Request:
    """Write the capacitor that was chosen into a request, so that its plan can be judged alone.

    Parameters
    ----------
    asked : Request
        Perhaps with ``capacitor = "auto"``.
    found : FilterSizing
        What was chosen.

    Returns
    -------
    Request
        With the capacitor as a number.

    Examples
    --------
    >>> fix_capacitor.__name__
    'fix_capacitor'
    """
    from gmid.request.requirements import spell

    assert asked.spec is not None
    capacitor = found.demands.realisation.capacitor
    table = {**asked.data["filter"], "capacitor": spell(capacitor, "F")}
    return replace(
        asked,
        spec=asked.spec.with_values(capacitor=capacitor),
        data={**asked.data, "filter": table},
    )


def _choose_curves(found: FilterSizing) -> list[ResponseCurve]:
    """Take the tuned response of every condition, at the passives' nominal corner."""
    low, high = found.demands.plane.fine.passband
    best: dict[str, FilterResponse] = {}
    for one in found.review.responses:
        held = best.get(one.condition)
        if one.tuned and (held is None or abs(one.rscale - 1) < abs(held.rscale - 1)):
            best[one.condition] = one
    curves = []
    for name, one in list(best.items())[:_MOST_CURVES]:
        inside = (one.frequency >= low) & (one.frequency <= high)
        deviation = np.where(inside, one.deviation_db, np.nan)
        curves.append(ResponseCurve(name, one.frequency, one.gain_db, deviation, 0.0, False))
    return curves
