"""``gmid import``: recipes (or plain CSVs) into a table."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from gmid.cli.auditing import audit_rows, merge_notes, write_import_figures
from gmid.cli.output import make_progress, say, write_columns, write_csv, write_json
from gmid.errors import GmidError, UsageFault, raise_faults

if TYPE_CHECKING:
    from gmid.sweep.coverage import Trail
    from gmid.sweep.model import Sweep
    from gmid.sweep.recipe import Recipe

_DIRECT = "For CSV files without a recipe: "


def import_command(
    recipes: Annotated[
        list[Path],
        typer.Argument(
            metavar="RECIPE...",
            help="Recipe files, or CSV files whose columns bear the standard names.",
        ),
    ],
    output: Annotated[Path, typer.Option("-o", "--output", help="The table, new or to add to.")],
    device: Annotated[str, typer.Option(help=_DIRECT + "name of the device.")] = "",
    polarity: Annotated[str, typer.Option(help=_DIRECT + "n or p.")] = "",
    width: Annotated[str, typer.Option(help=_DIRECT + "total width simulated, such as 2um.")] = "",
    fingers: Annotated[int, typer.Option(help=_DIRECT + "gate fingers.")] = 1,
    corner: Annotated[str, typer.Option(help=_DIRECT + "process corner.")] = "",
    temp: Annotated[str, typer.Option(help=_DIRECT + "temperature, such as 27C.")] = "",
    netlist: Annotated[str, typer.Option(help=_DIRECT + "template of a SPICE device line.")] = "",
    process: Annotated[str, typer.Option(help=_DIRECT + "name of the process.")] = "",
    compact: Annotated[
        bool, typer.Option("--compact", help="Store 32-bit compressed numbers (rounding 6e-8).")
    ] = False,
    figures: Annotated[
        Path | None,
        typer.Option(
            metavar="DIR",
            help="Also draw gm against the slope of the current, and maps of missing points, "
            "even where the import fails.",
        ),
    ] = None,
    force: Annotated[
        bool, typer.Option("--force", help="Replace a device and condition, or figures, there.")
    ] = False,
    as_json: Annotated[bool, typer.Option("--json", help="Print the audit as JSON.")] = False,
    as_csv: Annotated[bool, typer.Option("--csv", help="Print the audit as CSV.")] = False,
) -> None:
    """Turn sweeps into a table.

    Read, check, grid and store them; print the audit. No table is written where anything is wrong.

    Example: gmid import larch180.toml -o larch180.h5
    """
    from gmid.table.saving import save_sweeps

    direct = {
        "device": device,
        "polarity": polarity,
        "width": width,
        "corner": corner,
        "temp": temp,
        "netlist": netlist,
        "process": process,
    }
    loaded = _load_recipes(recipes, direct, fingers)
    names = list(dict.fromkeys(recipe.process for recipe in loaded))
    if len(names) > 1:
        raise UsageFault(
            f"the recipes are of different processes: {', '.join(names)}.",
            hint="Import them into tables of their own.",
        )
    sweeps = _import_all(loaded, figures, force=force)
    table = save_sweeps(
        output, sweeps, process=names[0], replace=force, compact=compact, waiting=say
    )
    rows = audit_rows(sweeps)
    if as_json:
        write_json(
            {
                "format": 1,
                "table": str(table.path),
                "process": table.process,
                "digest": table.digest,
                "audit": rows,
            }
        )
    elif as_csv:
        write_csv(rows)
    else:
        shown = merge_notes(rows)
        write_columns(list(shown[0]), [list(row.values()) for row in shown])
        say(f"{output}: {len(sweeps)} sweep(s) stored, {len(table.entries)} in the table.")


def _import_all(recipes: list[Recipe], figures: Path | None, *, force: bool) -> list[Sweep]:
    """Read and check the sweeps; draw the figures of what was found, faulty or not."""
    from gmid.sweep.coverage import Trail
    from gmid.sweep.importing import import_recipe

    trail = Trail()
    sweeps: list[Sweep] = []
    try:
        for recipe in recipes:
            sweeps += import_recipe(recipe, progress=make_progress(), trail=trail)
    except GmidError as fault:
        if figures is not None:
            _draw_beside(fault, figures, trail, force=force)
        raise
    if figures is not None:
        write_import_figures(figures, trail.sweeps, trail.coverages, force=force)
    return sweeps


def _draw_beside(fault: GmidError, figures: Path, trail: Trail, *, force: bool) -> None:
    """Draw what a failed import came to; where that fails too, both are told."""
    if not trail.coverages:
        say(f"{figures}: no figure, for the import did not come as far as a grid.")
        return
    try:
        write_import_figures(figures, trail.sweeps, trail.coverages, force=force)
    except GmidError as trouble:
        raise_faults([fault, trouble])


def _load_recipes(paths: list[Path], direct: dict[str, str], fingers: int) -> list[Recipe]:
    from gmid.sweep.recipe_file import read_recipe

    plain = [path for path in paths if path.suffix.lower() != ".toml"]
    if plain and len(plain) < len(paths):
        raise UsageFault("recipes and data files cannot be mixed in one import.")
    if plain:
        return [_direct_recipe(plain, direct, fingers)]
    given = [name for name, text in direct.items() if text]
    if given:
        raise UsageFault(
            f"--{given[0]} goes with data files, not with a recipe.", hint="Write it in the recipe."
        )
    return [read_recipe(path) for path in paths]


def _direct_recipe(paths: list[Path], direct: dict[str, str], fingers: int) -> Recipe:
    """Make the recipe that a command line of its own stands for."""
    from gmid.quantity import parse_quantity
    from gmid.sweep.model import UnitTransistor
    from gmid.sweep.recipe import Recipe, SweepRecipe, ValueSource
    from gmid.sweep.recipe_file import check_name

    missing = [
        name
        for name in ("device", "polarity", "width", "corner", "temp", "process")
        if not direct[name]
    ]
    if missing:
        raise UsageFault(
            f"without a recipe, {', '.join('--' + name for name in missing)} must be given.",
            hint="Or write a recipe: gmid new recipe",
        )
    if direct["polarity"] not in ("n", "p"):
        raise UsageFault(f"--polarity must be n or p, not {direct['polarity']!r}.")
    unit = UnitTransistor(
        direct["polarity"],
        parse_quantity(direct["width"], "m", where="--width"),
        fingers,
        direct["netlist"] or None,
    )
    entry = SweepRecipe(
        device=check_name(direct["device"], "--device"),
        unit=unit,
        files=tuple(paths),
        corner=ValueSource(value=direct["corner"]),
        temperature=ValueSource(value=parse_quantity(direct["temp"], "degC", where="--temp")),
        where="command line",
    )
    words = " ".join(f"--{name} {text}" for name, text in direct.items() if text)
    return Recipe(direct["process"], (entry,), f"{words} --fingers {fingers}", "command line")
