"""Sizing: from a request to plans, a sheet, figures and netlists."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

from gmid.amplifier.search.find import find_plan
from gmid.request.plans import PlanFile
from gmid.request.process import Bench, open_bench
from gmid.request.reading import read_request
from gmid.request.request import Request
from gmid.sheet.amplifiers import fill_amplifier, review_plan
from gmid.tasks.checking import assemble_sheet
from gmid.tasks.netlists import write_benches
from gmid.tasks.sized import Sizing

Progress = Callable[[str, int, int], None]


def size(request: str | Path | Request, *, progress: Progress | None = None) -> Sizing:
    """Size the amplifiers that a request asks for.

    Parameters
    ----------
    request : str, Path or Request
        With ``[demands]`` or a ``[filter]``.
    progress : callable, optional
        Told of each step.

    Returns
    -------
    Sizing
        Also where the request cannot be met: then with the nearest plan.

    Raises
    ------
    GmidError
        If the request or its table is at fault.

    Examples
    --------
    >>> size("missing.toml")
    Traceback (most recent call last):
    ...
    gmid.errors.FileTrouble: missing.toml: there is no such file.
    """
    asked = request if isinstance(request, Request) else read_request(request)
    bench = open_bench(asked.process)
    if asked.spec is not None:
        from gmid.tasks.filter_sizing import size_filter_request

        return size_filter_request(asked, bench, progress=progress)
    return size_demands(asked, bench, progress=progress)


def size_demands(asked: Request, bench: Bench, *, progress: Progress | None = None) -> Sizing:
    """Size one amplifier for direct demands.

    Parameters
    ----------
    asked : Request
        With ``[demands]``.
    bench : Bench
        Its devices.
    progress : callable, optional
        Told of each step.

    Returns
    -------
    Sizing
        With one plan.

    Examples
    --------
    >>> size_demands.__name__
    'size_demands'
    """
    from gmid.sheet.plots import draw_figures

    def tell(share: float, words: str) -> None:
        if progress:
            progress(words, round(100 * share), 100)

    found = find_plan(
        asked.demands, load_capacitance=asked.load_capacitance,
        load_resistance=asked.load_resistance, bench=bench, roles=asked.process.devices,
        own_well=asked.process.own_well, supply=asked.supply, choices=asked.choices,
        matching=asked.matching, progress=tell,
    )  # fmt: skip
    review = review_plan(
        found.plan, bench, asked.supply, choices=asked.choices, matching=asked.matching
    )
    amplifier = replace(
        fill_amplifier(review), floor_current=found.floor, ratio_to_floor=found.ratio_to_floor
    )
    sheet = assemble_sheet(
        asked, [amplifier], bench.conditions, digest=bench.table.digest, sentence=found.suggestion
    )
    return Sizing(
        asked, (found.plan,), (review,), replace(sheet, figures=draw_figures(review)),
        bench.table.digest, write_benches(PlanFile(asked, (found.plan,))),
    )  # fmt: skip
