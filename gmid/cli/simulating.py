"""``gmid simulate``: the netlists in the reference simulator, beside what the tables predict."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from gmid.cli.output import choose_form, make_progress, write_columns, write_csv, write_json
from gmid.errors import UsageFault

if TYPE_CHECKING:
    from gmid.condition import Condition


def simulate_command(
    plan: Annotated[Path, typer.Argument(metavar="PLAN", help="A plan file, such as size writes.")],
    models: Annotated[
        list[str],
        typer.Option(
            "--models",
            metavar="CONDITION=FILE",
            help="Model cards, such as tt/27=models_tt.inc; once a condition.",
        ),
    ],
    supplies: Annotated[
        bool, typer.Option("--supplies", help="At low and high supply too, not only nominal.")
    ] = False,
    quick: Annotated[
        bool, typer.Option("--quick", help="Leave out noise and the transients.")
    ] = False,
    as_json: Annotated[bool, typer.Option("--json", help="Print as JSON, SI.")] = False,
    as_csv: Annotated[bool, typer.Option("--csv", help="Print as CSV, SI.")] = False,
) -> None:
    """Run the netlists, sheet against simulation.

    Needs the extra gmid[simulate]. FILE holds the model cards of the condition's corner; the
    temperature is set from the condition unless the file sets it.

    Example: gmid simulate out/plan.toml --models tt/27=models_tt.inc
    """
    from gmid.simulation.plans import PARTS
    from gmid.tasks.simulating import QUICK, read_models, simulate

    choose_form(as_json=as_json, as_csv=as_csv)
    found = simulate(
        plan, read_models(split_models(models)), supplies=supplies,
        parts=QUICK if quick else PARTS, progress=make_progress(),
    )  # fmt: skip
    rows = [
        {
            "amplifier": one.amplifier, "condition": one.condition, "figure": figure.name,
            "unit": figure.unit, "sheet": figure.predicted, "simulation": figure.simulated,
            "difference": figure.difference,
        }
        for one in found
        for figure in one.figures
    ]  # fmt: skip
    if as_json:
        write_json({"format": 1, "rows": rows})
    elif as_csv:
        write_csv(rows)
    else:
        _write_rows(rows)


def split_models(words: list[str]) -> dict[Condition, Path]:
    """Part what --models gives into conditions and files.

    Parameters
    ----------
    words : list of str
        ``CONDITION=FILE`` each.

    Returns
    -------
    dict of Condition to Path
        The files.

    Raises
    ------
    UsageFault
        If one does not have that form, or a condition comes twice.

    Examples
    --------
    >>> split_models(["tt"])
    Traceback (most recent call last):
    ...
    gmid.errors.UsageFault: --models tt is not CONDITION=FILE. Such as tt/27=models_tt.inc.
    """
    from gmid.condition import Condition

    found: dict[Condition, Path] = {}
    for word in words:
        name, equals, file = word.partition("=")
        if not equals or not file:
            raise UsageFault(
                f"--models {word} is not CONDITION=FILE.", hint="Such as tt/27=models_tt.inc."
            )
        condition = Condition.parse(name, where="--models")
        if condition in found:
            raise UsageFault(f"--models gives {condition} twice.")
        found[condition] = Path(file)
    return found


def _write_rows(rows: list[dict[str, Any]]) -> None:
    from gmid.sheet.words import spell_value

    heads = ("amplifier", "condition", "figure", "sheet", "simulation", "sheet less simulation")
    cells = []
    for row in rows:
        unit, difference = row["unit"], row["difference"]
        if unit not in ("dB", "deg", "V") and row["simulation"]:
            shown = f"{difference / row['simulation']:+.2%}"
        else:
            shown = spell_value(difference, unit, 3)
        cells.append([
            row["amplifier"], row["condition"], row["figure"], spell_value(row["sheet"], unit, 5),
            spell_value(row["simulation"], unit, 5), shown,
        ])  # fmt: skip
    write_columns(heads, cells)
