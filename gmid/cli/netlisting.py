"""``gmid netlist``: the subcircuit of a plan and its test benches."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from gmid.cli.output import say, write_json


def netlist_command(
    plan: Annotated[Path, typer.Argument(metavar="PLAN", help="A plan file, such as size writes.")],
    output: Annotated[
        Path, typer.Option("-o", "--output", metavar="DIR", help="Directory to write to.")
    ],
    force: Annotated[bool, typer.Option("--force", help="Replace existing files.")] = False,
    as_json: Annotated[bool, typer.Option("--json", help="Print the files as JSON.")] = False,
) -> None:
    """Write subcircuit and test benches of a plan.

    Plain SPICE. Every bench includes models.inc, which is yours: the model cards of one corner
    and the line .options temp=. All files appear, or none.

    Example: gmid netlist out/plan.toml -o netlists
    """
    from gmid.files import make_directory, write_together
    from gmid.tasks.netlists import netlists

    files = netlists(plan)
    make_directory(output)
    write_together({output / name: text for name, text in files.items()}, force=force)
    if as_json:
        write_json({"format": 1, "directory": str(output), "files": sorted(files)})
    say(f"{output}: {', '.join(sorted(files))}.")
