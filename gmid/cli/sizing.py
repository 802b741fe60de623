"""``gmid size``: plan, sheet, figures and netlists for a request."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Annotated

import typer

from gmid.cli.output import choose_form, make_progress, say
from gmid.errors import FileTrouble

MAIN_FILES = ("sheet.html", "sheet.md", "sheet.json", "plan.toml", "amplifier.cir")
"""Files that size always writes."""


def size_command(
    request: Annotated[Path, typer.Argument(metavar="REQUEST", help="A request file.")],
    output: Annotated[
        Path, typer.Option("-o", "--output", metavar="DIR", help="Directory to write to.")
    ],
    force: Annotated[bool, typer.Option("--force", help="Replace existing files.")] = False,
    full: Annotated[bool, typer.Option("--full", help="Print the whole sheet.")] = False,
    as_json: Annotated[bool, typer.Option("--json", help="Print the sheet as JSON, SI.")] = False,
    as_csv: Annotated[bool, typer.Option("--csv", help="Print the checks as CSV, SI.")] = False,
) -> None:
    """Size amplifiers for a request.

    For a filter, or for direct demands. Writes sheet.html, sheet.md, sheet.json, plan.toml, the
    netlists and the figures, all of them or none, and prints the verdict. Ends with exit code 3
    where the request cannot be met; what is written is then the nearest plan.

    Example: gmid size request.toml -o out
    """
    from gmid.cli.checking import write_checked
    from gmid.files import make_directory, write_together
    from gmid.tasks.sizing import size

    choose_form(as_json=as_json, as_csv=as_csv)
    _refuse_existing(output, force=force)
    found = size(request, progress=make_progress())
    make_directory(output)
    files: dict[str | Path, str | bytes] = {
        output / name: text for name, text in found.files(output).items()
    }
    write_together(files, force=force)
    write_checked(found.sheet, full=full, as_json=as_json, as_csv=as_csv)
    say(f"{output}: {len(files)} files written; begin with sheet.html.")
    if not found.is_met:
        sys.exit(3)


def _refuse_existing(output: Path, *, force: bool) -> None:
    """Say before the work, not after it, that files would be overwritten."""
    there = [name for name in MAIN_FILES if (output / name).exists()]
    if there and not force:
        raise FileTrouble(
            f"holds {', '.join(there)} already.", where=str(output),
            hint="Use --force to replace them, or another directory.",
        )  # fmt: skip
