"""``gmid show``: what a table holds."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from gmid.cli.auditing import audit_rows, merge_notes, write_import_figures
from gmid.cli.output import write_columns, write_csv, write_json

if TYPE_CHECKING:
    from gmid.sweep.model import Sweep
    from gmid.table.table import Table


def show_command(
    table: Annotated[Path, typer.Argument(metavar="TABLE", help="A table file.")],
    audit: Annotated[
        bool, typer.Option("--audit", help="Also what the imports converted, derived, doubted.")
    ] = False,
    figures: Annotated[
        Path | None,
        typer.Option(metavar="DIR", help="Also draw gm against the slope of the current."),
    ] = None,
    force: Annotated[bool, typer.Option("--force", help="Replace figures there.")] = False,
    as_json: Annotated[bool, typer.Option("--json", help="Print as JSON.")] = False,
    as_csv: Annotated[bool, typer.Option("--csv", help="Print one CSV row a sweep.")] = False,
) -> None:
    """Show what a table holds.

    Devices, conditions, axes, quantities, where each sweep came from, and with --audit what its
    import converted, flipped, derived and doubted.

    Example: gmid show tables/larch180.h5
    """
    from gmid.table.table import open_grid_data

    opened = open_grid_data(table)
    sweeps = [opened.sweep(entry.device, entry.condition) for entry in opened.entries]
    if figures is not None:
        write_import_figures(figures, sweeps, force=force)
    if as_json:
        write_json(
            {
                "format": 1,
                "process": opened.process,
                "digest": opened.digest,
                "sweeps": [_describe(sweep) for sweep in sweeps],
            }
        )
    elif as_csv:
        write_csv([_flat(sweep) for sweep in sweeps])
    else:
        _print(opened, sweeps, audit=audit)


def _describe(sweep: Sweep) -> dict[str, Any]:
    return {
        "device": sweep.device,
        "corner": sweep.condition.corner,
        "temperature": sweep.condition.temperature,
        "nominal": sweep.nominal,
        "polarity": sweep.unit.polarity,
        "width": sweep.unit.width,
        "fingers": sweep.unit.fingers,
        "netlist": sweep.unit.netlist,
        "axes": {name: axis.tolist() for name, axis in sweep.axes.items()},
        "quantities": list(sweep.values),
        "derived": dict(sweep.derived),
        "sources": sweep.provenance.get("sources", []),
        "audit": [{"level": level, "note": text} for level, text in _audit(sweep)],
    }


def _flat(sweep: Sweep) -> dict[str, Any]:
    row = {
        key: value
        for key, value in _describe(sweep).items()
        if isinstance(value, (str, int, float))
    }
    for name, axis in sweep.axes.items():
        row |= {f"{name}_first": axis[0], f"{name}_last": axis[-1], f"{name}_points": axis.size}
    row["quantities"] = " ".join(sweep.values)
    return row


def _audit(sweep: Sweep) -> list[list[str]]:
    return list(sweep.provenance.get("audit", []))


def _print(table: Table, sweeps: list[Sweep], *, audit: bool) -> None:
    from gmid.quantity import format_quantity

    typer.echo(f"Table of process {table.process}, {table.path}")
    typer.echo(f"digest {table.digest[:16]}\n")
    typer.echo("Devices (quantities are those of one unit transistor)")
    firsts = [next(s for s in sweeps if s.device == device) for device in table.devices]
    write_columns(
        ["device", "type", "unit width", "fingers", "conditions, nominal first"],
        [
            [
                s.device,
                f"{s.unit.polarity}-channel",
                format_quantity(s.unit.width, "m"),
                str(s.unit.fingers),
                _conditions(table, s.device),
            ]
            for s in firsts
        ],
    )
    typer.echo("\nAxes")
    write_columns(["axis", "from", "to", "points", "values", "devices"], _axis_rows(firsts))
    typer.echo("\nQuantities")
    write_columns(
        ["device", "held", "derived"],
        [
            [
                s.device,
                " ".join(n for n in s.values if n not in s.derived),
                " ".join(s.derived) or "none",
            ]
            for s in firsts
        ],
    )
    typer.echo("\nSources")
    write_columns(
        ["device", "condition", "files", "layout", "rows", "first hash", "doubts"],
        [_source_row(s) for s in sweeps],
    )
    if audit:
        typer.echo("\nAudit")
        notes = merge_notes(audit_rows(sweeps))
        columns = ["device", "conditions", "audit", "note"]
        write_columns(columns, [[note[name] for name in columns] for note in notes])
    else:
        typer.echo("\nWith --audit: what the imports converted, flipped, derived and doubted.")


def _axis_rows(sweeps: list[Sweep]) -> list[list[str]]:
    """Describe each axis once for all devices that share it."""
    from gmid.quantity import format_quantity

    shared: dict[tuple[str, tuple[float, ...]], list[str]] = {}
    for sweep in sweeps:
        for name, axis in sweep.axes.items():
            shared.setdefault((name, tuple(axis.tolist())), []).append(sweep.device)
    return [
        [
            name,
            format_quantity(axis[0], _unit(name)),
            format_quantity(axis[-1], _unit(name)),
            str(len(axis)),
            _values(list(axis), name),
            " ".join(devices),
        ]
        for (name, axis), devices in shared.items()
    ]


def _unit(name: str) -> str:
    return "m" if name == "length" else "V"


def _values(values: list[float], name: str) -> str:
    """Write axis values in um or V, the middle left out where there are many."""
    scale = 1e6 if name == "length" else 1.0
    words = [f"{value * scale:.6g}" for value in values]
    if len(words) > 9:
        words = [*words[:4], "...", *words[-3:]]
    return f"{' '.join(words)} {'um' if name == 'length' else 'V'}"


def _conditions(table: Table, device: str) -> str:
    nominal = table.nominal(device)
    others = [c for c in table.conditions(device) if c != nominal]
    return " ".join(str(condition) for condition in (nominal, *others))


def _source_row(sweep: Sweep) -> list[str]:
    sources = sweep.provenance.get("sources", [])
    names = [source["name"] for source in sources]
    layouts = dict.fromkeys(source["layout"] for source in sources)
    doubts = sum(1 for level, _ in _audit(sweep) if level == "doubtful")
    return [
        sweep.device,
        str(sweep.condition),
        names[0] + (f" and {len(names) - 1} more" if len(names) > 1 else "") if names else "-",
        " ".join(layouts) or "-",
        str(sum(source["rows"] for source in sources)),
        sources[0]["sha256"][:12] if sources else "-",
        str(doubts),
    ]
