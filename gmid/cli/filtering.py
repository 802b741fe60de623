"""``gmid filter``: sections, elements, and what each amplifier must meet."""

from __future__ import annotations

import shutil
import sys
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from gmid.cli.output import choose_form, write_csv, write_json

if TYPE_CHECKING:
    from gmid.filters.demand_types import FilterDemands
    from gmid.request.request import Request
    from gmid.sheet.blocks import Block


def filter_command(
    request: Annotated[
        Path, typer.Argument(metavar="REQUEST", help="A request file with a [filter].")
    ],
    figure: Annotated[
        Path | None,
        typer.Option(
            "-o", "--output", metavar="DIR", help="Directory for the figures; none by default."
        ),
    ] = None,
    full: Annotated[
        bool, typer.Option("--full", help="Every demand of every amplifier with its reason.")
    ] = False,
    force: Annotated[bool, typer.Option("--force", help="Replace existing files.")] = False,
    as_json: Annotated[bool, typer.Option("--json", help="Print as JSON, SI.")] = False,
    as_csv: Annotated[bool, typer.Option("--csv", help="Print the demands as CSV, SI.")] = False,
) -> None:
    """Say what a filter asks of its amplifiers.

    Sections, element values, and for each amplifier the demands, each with the bound that sets
    it. No table is needed.

    Example: gmid filter request.toml
    """
    from gmid.request.reading import read_request
    from gmid.sheet.data import to_plain
    from gmid.sheet.filters import fill_filter, list_demands
    from gmid.tasks.demanding import demands

    choose_form(as_json=as_json, as_csv=as_csv)
    asked = read_request(request)
    found = demands(asked)
    if figure is not None:
        _write_figures(found, figure, force=force)
    if as_json:
        write_json({
            "format": 1, "title": asked.title, "filter": to_plain(fill_filter(found)),
            "amplifiers": list_demands(found),
        })  # fmt: skip
    elif as_csv:
        write_csv([
            {"amplifier": one["name"], "demand": name, **demand}
            for one in list_demands(found)
            for name, demand in one["demands"].items()
        ])  # fmt: skip
    else:
        from gmid.sheet.terminal import write_terminal

        width = shutil.get_terminal_size((120, 40)).columns
        sys.stdout.write(write_terminal(_lay_out(asked, found, full=full), width=width))


def _write_figures(found: FilterDemands, folder: Path, *, force: bool) -> None:
    from gmid.files import make_directory, write_together
    from gmid.sheet.filter_figures import draw_filter_figures

    make_directory(folder)
    drawn = draw_filter_figures(found)
    write_together({folder / f"{name}.svg": text for name, text in drawn.items()}, force=force)


def _lay_out(asked: Request, found: FilterDemands, *, full: bool) -> list[Block]:
    from gmid.sheet.blocks import Heading
    from gmid.sheet.demands import lay_out_demands, lay_out_reasons, lay_out_shifts
    from gmid.sheet.filter_outline import lay_out_filter
    from gmid.sheet.filters import fill_filter

    return [
        Heading(asked.title, 1),
        *lay_out_filter(fill_filter(found)),
        *lay_out_demands(found),
        *lay_out_reasons(found, full=full),
        *lay_out_shifts(found),
    ]
