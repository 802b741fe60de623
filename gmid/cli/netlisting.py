"""``gmid netlist``: the subcircuit of a plan and its test benches."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from gmid.cli.output import say


def netlist_command(
    plan: Annotated[Path, typer.Argument(help="A plan file, such as size writes.")],
    output: Annotated[Path, typer.Option("-o", "--output", help="Directory to write to.")],
    force: Annotated[bool, typer.Option("--force", help="Replace existing files.")] = False,
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
    say(f"{output}: {', '.join(sorted(files))}.")
