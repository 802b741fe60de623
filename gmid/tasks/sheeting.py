"""The sheet of a plan, with its figures."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

from gmid.request.plans import PlanFile
from gmid.sheet.data import Sheet
from gmid.sheet.plots import draw_figures
from gmid.tasks.checking import check

Progress = Callable[[str, int, int], None]


def sheet(plan: str | Path | PlanFile, *, progress: Progress | None = None) -> Sheet:
    """Make the sheet of a plan, figures included; a notebook shows it as a page.

    Parameters
    ----------
    plan : str, Path or PlanFile
        The plan.
    progress : callable, optional
        Told of each condition.

    Returns
    -------
    Sheet
        Pure data, and the figures as SVG text.

    Raises
    ------
    GmidError
        As `gmid.check`.

    Examples
    --------
    >>> sheet("missing.toml")
    Traceback (most recent call last):
    ...
    gmid.errors.FileTrouble: missing.toml: there is no such file.
    """
    found = check(plan, progress=progress)
    figures: dict[str, str] = {}
    for one in found.reviews:
        figures |= draw_figures(one)
    return replace(found.sheet, figures=figures)
