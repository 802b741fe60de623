"""``gmid inspect``: what a sweep file is, what is in it, and a recipe for it."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from gmid.cli.output import say, write_columns, write_json
from gmid.errors import FileTrouble, GmidError, raise_faults

if TYPE_CHECKING:
    from gmid.sweep.inspecting import ColumnView, GroupView, Inspection


def inspect_command(
    files: Annotated[
        list[Path], typer.Argument(metavar="FILE...", help="Sweep files of any known layout.")
    ],
    recipe: Annotated[
        Path | None, typer.Option("--recipe", help="Draft a recipe into this file.")
    ] = None,
    layout: Annotated[str, typer.Option(help="Force a layout.")] = "auto",
    force: Annotated[bool, typer.Option("--force", help="Overwrite the recipe.")] = False,
    as_json: Annotated[bool, typer.Option("--json", help="Print as JSON.")] = False,
) -> None:
    """Recognise sweep files.

    Tells layout, tables, columns, ranges and guessed roles of each.

    Example: gmid inspect nmos.raw --recipe nmos.toml
    """
    from gmid.sweep.inspecting import inspect_file

    if recipe is not None and recipe.exists() and not force:
        raise FileTrouble(
            "it exists already.", where=str(recipe), hint="Use --force to overwrite it."
        )
    found: list[Inspection] = []
    faults: list[GmidError] = []
    for path in files:
        try:
            found.append(inspect_file(path, layout=layout))
        except GmidError as fault:
            faults.append(fault)
    if recipe is not None and not faults:
        _write_recipe(found, recipe)
    if as_json:
        write_json({"format": 1, "files": [_as_plain(entry) for entry in found],
                    "faults": [str(fault) for fault in faults]})  # fmt: skip
    else:
        for entry in found:
            _show(entry)
    raise_faults(faults)


def _write_recipe(found: list[Inspection], recipe: Path) -> None:
    from gmid.files import write_text
    from gmid.sweep.drafting import count_questions, draft_recipe

    text = draft_recipe(found, folder=recipe.parent)
    write_text(recipe, text, force=True)
    asked = count_questions(text)
    if asked:
        say(f"{recipe}: drafted; {asked} question(s) are left open in it as comments.")
    else:
        say(f"{recipe}: drafted, nothing is left open.")


def _show(entry: Inspection) -> None:
    from gmid.sweep.roles import find_devices

    judged = f"layout {entry.layout} (confidence {entry.confidence:.2f}"
    if entry.runner_up is not None:
        judged += f"; next {entry.runner_up[0]}, {entry.runner_up[1]:.2f}"
    packed = ", gzip" if entry.packed else ""
    _line(f"{entry.name}: {judged}), {entry.encoding}{packed}")
    for group in entry.groups:
        _line(f"  {_headline(group)}")
        rows = [_row(column) for column in group.columns]
        write_columns(["  column", "unit", "kind", "from", "to", "values", "role"], rows)
        devices = find_devices(group.tables[0].columns)
        if len(devices) > 1:
            _line(f"  devices: {', '.join(devices)}")


def _line(text: str) -> None:
    sys.stdout.write(f"{text}\n")


def _headline(group: GroupView) -> str:
    count = len(group.tables)
    words = "1 table" if count == 1 else f"{count} tables"
    first = group.tables[0]
    title = first.meta.get("plot") or first.meta.get("title", "").split("\n")[0]
    runs = f", the scale begins {group.restarts} times" if group.restarts > 1 else ""
    named = f": {title}" if title else ""
    return f"{words}, {group.rows} rows from line {first.line_of(0)} on{runs}{named}"


def _row(column: ColumnView) -> list[str]:
    role = column.role
    words = ", ".join(column.words[:4])
    low = "" if column.low is None else f"{column.low:.6g}"
    high = "" if column.high is None else f"{column.high:.6g}"
    name = f"{role.sign}{role.name}" if role.name else ""
    sure = "" if role.certain or not role.name else " ?"
    return [f"  {column.name}", column.unit or "", column.kind, low or words, high,
            str(column.distinct), f"{name}{sure}"]  # fmt: skip


def _as_plain(entry: Inspection) -> dict[str, Any]:
    return {
        "name": entry.name,
        "layout": entry.layout,
        "confidence": entry.confidence,
        "runner_up": list(entry.runner_up) if entry.runner_up else None,
        "encoding": entry.encoding,
        "gzip": entry.packed,
        "tables": [_group_as_plain(group) for group in entry.groups],
    }


def _group_as_plain(group: GroupView) -> dict[str, Any]:
    return {
        "count": len(group.tables),
        "rows": group.rows,
        "first_line": group.tables[0].line_of(0),
        "restarts": group.restarts,
        "meta": dict(group.tables[0].meta),
        "columns": [
            {
                "name": column.name,
                "unit": column.unit,
                "kind": column.kind,
                "from": column.low,
                "to": column.high,
                "values": column.distinct,
                "role": f"{column.role.sign}{column.role.name}" or None,
                "certain": column.role.certain,
                "device": column.role.device or None,
            }
            for column in group.columns
        ],
    }
