"""``gmid import``: recipes (or plain CSVs) into a table."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from gmid.cli.output import make_progress, say, write_columns, write_csv, write_json
from gmid.errors import UsageFault

if TYPE_CHECKING:
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
    force: Annotated[
        bool, typer.Option("--force", help="Replace a device and condition already there.")
    ] = False,
    as_json: Annotated[bool, typer.Option("--json", help="Print the audit as JSON.")] = False,
    as_csv: Annotated[bool, typer.Option("--csv", help="Print the audit as CSV.")] = False,
) -> None:
    """Turn sweeps into a table.

    Read, check, grid and store them; print the audit. Nothing is written where anything is wrong.

    Example: gmid import larch180.toml -o larch180.h5
    """
    from gmid.sweep.importing import import_recipe
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
    sweeps: list[Sweep] = []
    for recipe in loaded:
        sweeps += import_recipe(recipe, progress=make_progress())
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
        shown = _merge(rows)
        write_columns(list(shown[0]), [list(row.values()) for row in shown])
        say(f"{output}: {len(sweeps)} sweep(s) stored, {len(table.entries)} in the table.")


def audit_rows(sweeps: list[Sweep]) -> list[dict[str, Any]]:
    """List the audit of sweeps, one row a note.

    Parameters
    ----------
    sweeps : list of Sweep
        With their provenance.

    Returns
    -------
    list of dict
        With ``device corner temperature level note``.

    Examples
    --------
    >>> audit_rows([])
    []
    """
    return [
        {
            "device": sweep.device,
            "corner": sweep.condition.corner,
            "temperature": sweep.condition.temperature,
            "level": level,
            "note": text,
        }
        for sweep in sweeps
        for level, text in sweep.provenance["audit"]
    ]


def _merge(rows: list[dict[str, Any]]) -> list[dict[str, str]]:
    """Tell a note that many conditions share once."""
    shared: dict[tuple[str, str, str], list[str]] = {}
    for row in rows:
        where = f"{row['corner']}/{row['temperature']:g}"
        shared.setdefault((row["device"], row["level"], row["note"]), []).append(where)
    return [
        {"device": device, "conditions": " ".join(where), "audit": level, "note": note}
        for (device, level, note), where in shared.items()
    ]


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
