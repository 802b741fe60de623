"""Judging a plan file."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path

from gmid.condition import Condition
from gmid.request.plans import PlanFile, has_filter, read_plan
from gmid.request.process import Bench, open_bench
from gmid.request.request import Request
from gmid.sheet.amplifiers import Reviewed, fill_amplifier, review_plan
from gmid.sheet.assembly import describe_supply, list_cautions, list_provenance
from gmid.sheet.data import AmplifierSheet, FilterSheet, Sheet

Progress = Callable[[str, int, int], None]


@dataclass(frozen=True, eq=False)
class Checked:
    """A plan file, judged.

    Parameters
    ----------
    file : PlanFile
        What was judged.
    reviews : tuple of Reviewed
        Each amplifier in every condition.
    sheet : Sheet
        The result as pure data, without figures.

    Examples
    --------
    >>> Checked.__dataclass_fields__["sheet"].name
    'sheet'
    """

    file: PlanFile
    reviews: tuple[Reviewed, ...]
    sheet: Sheet

    @property
    def is_met(self) -> bool:
        """Whether every check holds, or nothing was demanded."""
        return self.sheet.is_met or not any(plan.demands for plan in self.file.plans)

    def __repr__(self) -> str:
        return f"Checked({self.sheet!r})"

    def _repr_html_(self) -> str:
        return self.sheet._repr_html_()


def check(plan: str | Path | PlanFile, *, progress: Progress | None = None) -> Checked:
    """Judge a plan in every condition.

    Parameters
    ----------
    plan : str, Path or PlanFile
        The plan.
    progress : callable, optional
        Told of each condition.

    Returns
    -------
    Checked
        With the sheet.

    Raises
    ------
    GmidError
        If the plan or its table is at fault, or an amplifier has no bias point.

    Examples
    --------
    >>> check("missing.toml")
    Traceback (most recent call last):
    ...
    gmid.errors.FileTrouble: missing.toml: there is no such file.
    """
    file = plan if isinstance(plan, PlanFile) else read_plan(plan)
    request = file.request
    bench = open_bench(request.process)
    reviews = tuple(
        review_plan(
            one, bench, request.supply, choices=request.choices, matching=request.matching,
            progress=progress,
        )
        for one in file.plans
    )  # fmt: skip
    sheet = assemble_sheet(
        request, [fill_amplifier(one) for one in reviews], bench.conditions,
        digest=bench.table.digest, is_demanded=any(one.demands for one in file.plans),
        filtered=_review_filter(file, bench, progress),
    )  # fmt: skip
    return Checked(file, reviews, sheet)


def _review_filter(file: PlanFile, bench: Bench, progress: Progress | None) -> FilterSheet | None:
    """Put the amplifiers into their filter, where the plan has one and fills every position."""
    request = file.request
    if not has_filter(file):
        return None
    from gmid.amplifier.filtering.reviewing import review_filter
    from gmid.tasks.filter_sizing import fill_reviewed
    from gmid.tasks.rebuilding import rebuild_filter

    def tell(words: str) -> None:
        if progress:
            progress(words, 0, 1)

    found = rebuild_filter(file, bench)
    review = review_filter(found, file.plans, bench, request.supply, progress=tell)
    return fill_reviewed(found, review)


def assemble_sheet(
    request: Request, amplifiers: Sequence[AmplifierSheet], conditions: Sequence[Condition], *,
    digest: str, filtered: FilterSheet | None = None, is_demanded: bool = True, sentence: str = "",
) -> Sheet:  # fmt: skip
    """Put a sheet together from its parts.

    Parameters
    ----------
    request : Request
        What was asked.
    amplifiers : sequence of AmplifierSheet
        Every distinct amplifier.
    conditions : sequence of Condition
        In which they were evaluated.
    digest : str
        Of the table.
    filtered : FilterSheet, optional
        The filter.
    is_demanded : bool
        Whether anything was asked of the amplifiers.
    sentence : str
        To be added to the verdict.

    Returns
    -------
    Sheet
        Pure data, without figures.

    Examples
    --------
    >>> from gmid.request.reading import parse_request
    >>> from gmid.request.request import EXAMPLE
    >>> assemble_sheet(parse_request(EXAMPLE), [], [Condition("tt", 27.0)], digest="0" * 64)
    Sheet('An amplifier', met, 0 amplifiers, 0 checks)
    """
    return Sheet(
        title=request.title,
        amplifiers=tuple(amplifiers),
        filter=filtered,
        supply=describe_supply(request.supply, conditions),
        cautions=list_cautions(conditions, request.matching, has_passives="passives" in request.data
                               or filtered is None),
        provenance=list_provenance(request.process.table, digest, request.name),
        is_demanded=is_demanded or filtered is not None,
        sentence=sentence,
    )  # fmt: skip
