"""``gmid chart``: the usual curves of devices as a figure."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any, Literal

import typer

from gmid.cli.asking import NUMBERS, choose_devices, choose_quantities, read_numbers
from gmid.cli.completing import complete_axis, complete_device, complete_quantities
from gmid.cli.output import choose_form, make_progress, say, write_csv, write_json
from gmid.cli.question import Question, find_unreachable, raise_unreachable
from gmid.errors import UsageFault

if TYPE_CHECKING:
    from gmid.device.device import Device
    from gmid.sheet.charts import Curve

MOST_LENGTHS = 5
"""How many lengths are drawn where none are given."""


def chart_command(
    table: Annotated[Path, typer.Argument(metavar="TABLE", help="A table file.")],
    devices: Annotated[
        list[str],
        typer.Argument(
            metavar="DEVICE...", help="Devices of the table.", autocompletion=complete_device
        ),
    ],
    output: Annotated[
        Path, typer.Option("-o", "--output", metavar="FILE", help="File: .svg, .pdf or .png.")
    ],
    length: Annotated[
        str, typer.Option(metavar="VALUES", help=f"{NUMBERS} By default some of the table's.")
    ] = "",
    vds: Annotated[
        str,
        typer.Option(
            metavar="VALUES",
            help="Drain-source voltages, or diode; half the table's range by default.",
        ),
    ] = "",
    vsb: Annotated[
        str, typer.Option(metavar="VALUES", help="Source-bulk voltages, 0 by default.")
    ] = "",
    against: Annotated[
        str,
        typer.Option(
            metavar="AXIS", help="Horizontal axis: gm-over-id or vgs.", autocompletion=complete_axis
        ),
    ] = "gm-over-id",
    show: Annotated[
        str,
        typer.Option(
            metavar="NAMES",
            help="Quantities, a panel each, such as ft,cgg.",
            autocompletion=complete_quantities,
        ),
    ] = "",
    corner: Annotated[
        str, typer.Option(metavar="NAMES", help="Corners, such as tt,ss; nominal by default.")
    ] = "",
    temp: Annotated[
        str,
        typer.Option(
            metavar="VALUES", help="Temperatures, such as -40,27,125; nominal by default."
        ),
    ] = "",
    condition: Annotated[
        str, typer.Option(metavar="LIST", help="In place of both: such as tt/27,ss/125, or all.")
    ] = "",
    interpolate: Annotated[
        bool, typer.Option("--interpolate", help="Allow temperatures between those of the table.")
    ] = False,
    force: Annotated[bool, typer.Option("--force", help="Replace the file.")] = False,
    as_json: Annotated[bool, typer.Option("--json", help="Print the curves as JSON, SI.")] = False,
    as_csv: Annotated[bool, typer.Option("--csv", help="Print the curves as CSV, SI.")] = False,
) -> None:
    """Draw the usual curves of devices.

    Over gm/Id or vgs, one panel a quantity, one curve a combination of the values given. What
    grows with the width is divided by it.

    Example: gmid chart larch180.h5 nmos -o nmos.svg --length 0.18u,1u
    """
    from gmid.device.opening import open_table
    from gmid.files.whole import writing

    kind, axis = _read_kind(output), _read_axis(against)
    given = read_numbers({
        "--length": (length, "m"), "--vds": ("" if vds == "diode" else vds, "V"),
        "--vsb": (vsb, "V"),
    })  # fmt: skip
    choose_form(as_json=as_json, as_csv=as_csv)
    with writing(output, force=force) as part:  # refuses an existing file before the work
        opened = choose_devices(
            open_table(table), devices,
            corner=corner, temp=temp, condition=condition, interpolate=interpolate,
        )  # fmt: skip
        panels = _panels(opened, show, axis)
        lengths = given.get("--length") or _default_lengths(opened[0])
        drains: list[float] | None = None
        if vds != "diode":
            drains = given.get("--vds") or _default_drain(opened)
        if not vsb:
            say("vsb = 0 V by default.")
        curves = _trace(opened, lengths, drains, given.get("--vsb", [0.0]), panels)
        part.write_bytes(_draw(kind, curves, axis, panels))
    if as_json:
        write_json({
            "format": 1, "file": str(output), "against": axis,
            "curves": [_describe(curve) for curve in curves],
        })  # fmt: skip
    elif as_csv:
        write_csv([row for curve in curves for row in _list_points(curve)])
    say(f"{output}: {len(curves)} curve(s) written.")


def _read_kind(output: Path) -> str:
    from gmid.sheet.figures import FORMATS

    kind = output.suffix.lower().removeprefix(".")
    if kind not in FORMATS:
        raise UsageFault(
            f"a chart cannot be written to {str(output)!r}.",
            hint=f"End the name in {', '.join('.' + known for known in FORMATS)}.",
        )
    return kind


def _read_axis(against: str) -> str:
    from gmid.sheet.charts import AGAINST

    name = against.replace("-", "_")
    if name not in AGAINST:
        known = [axis.replace("_", "-") for axis in AGAINST]
        raise UsageFault(f"--against cannot be {against!r}.", hint=f"Give {' or '.join(known)}.")
    return name


def _panels(devices: Sequence[Device], show: str, against: str) -> list[str]:
    """List the quantities to draw."""
    from gmid.sheet.charts import USUAL

    names = choose_quantities(devices, show, usual=USUAL)
    if not show:
        names = [n for n in names if all(n in (*device.fields, "vgs") for device in devices)]
    names = [name for name in names if name != against]
    if not names:
        raise UsageFault(f"there is nothing to draw against {against}.", hint="Change --show.")
    return names


def _default_lengths(device: Device) -> list[float]:
    """Take lengths of the table, evenly from the shortest to the longest."""
    every: list[float] = device.sweep.length.tolist()
    if len(every) > MOST_LENGTHS:
        last = len(every) - 1
        every = [every[round(i * last / (MOST_LENGTHS - 1))] for i in range(MOST_LENGTHS)]
    listed = ", ".join(f"{length * 1e6:.6g}" for length in every)
    say(f"length = {listed} um by default, from the table of {device.name}.")
    return every


def _default_drain(devices: Sequence[Device]) -> list[float]:
    vds = 0.5 * min(float(device.sweep.vds[-1]) for device in devices)
    say(f"vds = {vds:.6g} V by default, half the table's largest.")
    return [vds]


def _trace(
    devices: Sequence[Device],
    lengths: list[float],
    drains: list[float] | None,
    bulks: list[float],
    quantities: Sequence[str],
) -> list[Curve]:
    """Follow every combination; all that the table does not cover is named at once."""
    from gmid.sheet.charts import trace_curve

    values = {"length": lengths, "vsb": bulks} | ({"vds": drains} if drains else {})
    faults = []
    for device in devices:
        drive = {"drive": [float(device.sweep.vds[0] if drains is None else device.sweep.vgs[0])]}
        faults += find_unreachable(device, Question("vgs", None, drains is None, values | drive))
    raise_unreachable(faults)
    choices: Sequence[float | Literal["diode"]] = drains or ("diode",)
    wanted: list[tuple[Device, float, float, float | Literal["diode"]]] = [
        (device, length, vsb, vds)
        for device in devices
        for length in lengths
        for vsb in bulks
        for vds in choices
    ]
    progress = make_progress()
    curves = []
    for done, (device, length, vsb, vds) in enumerate(wanted):
        progress(f"{device.name} {device.condition}", done, len(wanted))
        curves.append(trace_curve(device, length=length, vds=vds, vsb=vsb, quantities=quantities))
    return curves


def _draw(kind: str, curves: Sequence[Curve], against: str, quantities: Sequence[str]) -> bytes:
    from gmid.sheet.charts import draw_chart
    from gmid.sheet.figures import drawing, save_figure

    with drawing():
        return save_figure(draw_chart(curves, against=against, quantities=quantities), kind)


def _describe(curve: Curve) -> dict[str, Any]:
    """Tell a curve; what is not finite becomes None."""
    import math

    corner, _, temperature = curve.condition.partition("/")
    return {
        "device": curve.device, "corner": corner, "temperature": float(temperature),
        "length": curve.length, "vsb": curve.vsb,
        "vds": "diode" if curve.vds is None else curve.vds, "width": curve.width,
        **{
            name: [value if math.isfinite(value) else None for value in column.tolist()]
            for name, column in curve.values.items()
        },
    }  # fmt: skip


def _list_points(curve: Curve) -> list[dict[str, Any]]:
    told = _describe(curve)
    columns = {name: value for name, value in told.items() if isinstance(value, list)}
    same = {name: value for name, value in told.items() if name not in columns}
    return [
        same | dict(zip(columns, row, strict=True)) for row in zip(*columns.values(), strict=True)
    ]
