"""``gmid query``: operating points from a table."""

from __future__ import annotations

import math
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from gmid.cli.asking import NUMBERS, choose_devices, choose_quantities, read_numbers
from gmid.cli.completing import complete_device, complete_quantities
from gmid.cli.output import (
    choose_form,
    say,
    write_blocks,
    write_columns,
    write_csv,
    write_json,
)
from gmid.cli.question import find_unreachable, make_question, raise_unreachable
from gmid.errors import OutOfReach, UsageFault
from gmid.sweep.listing import format_column

if TYPE_CHECKING:
    from gmid.cli.question import Question
    from gmid.device.device import Device

SHOWN = (
    "id", "gm", "gds", "gmb", "gm_over_id", "current_density", "intrinsic_gain", "ft", "vdsat",
    "cgg", "cgd", "cdd", "noise_thermal", "noise_flicker",
)  # fmt: skip
"""Quantities listed without --show; JSON and CSV give all."""

_DRIVE = "Drive: "
_UNITS = {
    "--length": "m", "--vds": "V", "--vsb": "V", "--vgs": "V", "--gm-over-id": "1/V",
    "--current-density": "A/m", "--vdsat": "V", "--id": "A", "--gm": "S", "--width": "m",
    "--count": "",
}  # fmt: skip


def query_command(
    table: Annotated[Path, typer.Argument(metavar="TABLE", help="A table file.")],
    device: Annotated[
        str,
        typer.Argument(
            metavar="DEVICE", help="A device of the table.", autocompletion=complete_device
        ),
    ],
    length: Annotated[
        str, typer.Option(metavar="VALUES", help=f"Channel lengths, such as 0.18u,0.5u. {NUMBERS}")
    ],
    vds: Annotated[
        str,
        typer.Option(
            metavar="VALUES",
            help="Drain-source voltages, or diode for vds = vgs; magnitudes for p.",
        ),
    ],
    gm_over_id: Annotated[
        str, typer.Option(metavar="VALUES", help=_DRIVE + "gm/Id, such as 5:25:5.")
    ] = "",
    vgs: Annotated[str, typer.Option(metavar="VALUES", help=_DRIVE + "gate-source voltages.")] = "",
    current_density: Annotated[
        str, typer.Option(metavar="VALUES", help=_DRIVE + "Id/W, such as 1uA/um.")
    ] = "",
    vdsat: Annotated[str, typer.Option(metavar="VALUES", help=_DRIVE + "edge of saturation.")] = "",
    id: Annotated[
        str,
        typer.Option(
            metavar="VALUES", help="Currents to scale to; with --count or --width a drive."
        ),
    ] = "",
    gm: Annotated[str, typer.Option(metavar="VALUES", help="Transconductances to scale to.")] = "",
    width: Annotated[str, typer.Option(metavar="VALUES", help="Total widths to scale to.")] = "",
    count: Annotated[
        str, typer.Option(metavar="VALUES", help="Numbers of unit transistors to scale to.")
    ] = "",
    vsb: Annotated[
        str, typer.Option(metavar="VALUES", help="Source-bulk voltages, 0 by default.")
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
    show: Annotated[
        str,
        typer.Option(
            metavar="NAMES",
            help="Quantities to list, such as gm,cgg, or all.",
            autocompletion=complete_quantities,
        ),
    ] = "",
    as_json: Annotated[bool, typer.Option("--json", help="Print as JSON, SI.")] = False,
    as_csv: Annotated[bool, typer.Option("--csv", help="Print as CSV, SI.")] = False,
) -> None:
    """Answer bias questions from a table.

    One row for every combination of the values given. Give one drive, and at most one thing to
    scale to; without that, answers are for one unit transistor. The last of corner, temperature,
    length, vsb, vds, drive, scale varies fastest.

    Example: gmid query larch180.h5 nmos --gm-over-id 15 --length 1u --vds 0.6
    """
    texts = (length, "" if vds == "diode" else vds, vsb, vgs, gm_over_id, current_density,
             vdsat, id, gm, width, count)  # fmt: skip
    question = _read_question(texts, diode=vds == "diode")
    choose_form(as_json=as_json, as_csv=as_csv)
    from gmid.device.opening import open_table

    devices = choose_devices(
        open_table(table), [device],
        corner=corner, temp=temp, condition=condition, interpolate=interpolate,
    )  # fmt: skip
    wanted = choose_quantities(devices, show, usual=None if as_json or as_csv else SHOWN)
    asked = [name for name in question.asked if name in devices[0].fields]
    wanted = list(dict.fromkeys([*asked, *wanted] if show else wanted))
    answer = collect_answers(devices, question, wanted)
    if not vsb:
        say("vsb = 0 V by default.")
    if question.scale is None:
        say(f"Values of one unit transistor, W = {devices[0].unit.width * 1e6:.6g} um, by default.")
    if as_json:
        write_json({"format": 1, "device": device, "rows": _list_rows(answer)})
    elif as_csv:
        write_csv(_flatten_rows(answer))
    else:
        _print(answer, question, device, show)


def collect_answers(
    devices: Sequence[Device], question: Question, wanted: Sequence[str]
) -> dict[str, list[Any]]:
    """Ask every device and put the answers one below the other.

    Parameters
    ----------
    devices : sequence of Device
        One device in its conditions.
    question : Question
        What to ask each.
    wanted : sequence of str
        Quantities, besides the bias.

    Returns
    -------
    dict of str to list
        Columns ``corner temperature``, the bias, those wanted, and ``notes``.

    Raises
    ------
    OutOfReach
        Naming every combination that some table does not cover.

    Examples
    --------
    >>> from gmid.device.device import Device
    >>> from gmid.device.example import example_sweep
    >>> asked = make_question({"length": [1e-6], "vds": [0.6], "gm_over_id": [15.0, 25.0]})
    >>> answer = collect_answers([Device(example_sweep())], asked, ["id"])
    >>> [round(vgs, 3) for vgs in answer["vgs"]]
    [0.49, 0.343]
    """
    import numpy as np

    from gmid.device.operating_point import BIAS

    points = question.combine()
    parts: list[dict[str, list[Any]]] = []
    faults: list[OutOfReach] = []
    for device in devices:
        try:
            point = question.ask(device, points)
        except OutOfReach:
            faults += find_unreachable(device, question)
            continue
        with np.errstate(divide="ignore", invalid="ignore"):
            values = point.read([*BIAS, *(name for name in wanted if name in device.fields)])
        columns = {name: column.tolist() for name, column in values.items()}
        size = point.shape[0]
        nothing = [None] * size
        parts.append({
            "corner": [device.condition.corner] * size,
            "temperature": [device.condition.temperature] * size,
            **{name: columns.get(name, nothing) for name in (*BIAS, *wanted)},
            "notes": [list(device.notes)] * size,
        })  # fmt: skip
    raise_unreachable(faults)
    return {name: [value for part in parts for value in part[name]] for name in parts[0]}


def _read_question(texts: Sequence[str], *, diode: bool) -> Question:
    """Turn the numeric options, in the order of `_UNITS`, into a question."""
    options = {
        option: (text, unit) for (option, unit), text in zip(_UNITS.items(), texts, strict=True)
    }
    if "diode" in options["--vds"][0]:
        raise UsageFault(
            "--vds is either voltages or diode, not a mixture.", hint="Ask for each by itself."
        )
    given = {name[2:].replace("-", "_"): v for name, v in read_numbers(options).items()}
    for name in ("length", *(() if diode else ("vds",))):
        if name not in given:
            raise UsageFault(f"--{name} is empty.", hint="Give at least one value.")
    return make_question(given, diode=diode)


def _list_rows(answer: dict[str, list[Any]]) -> list[dict[str, Any]]:
    """Turn columns into rows; what the table lacks is absent, what is not finite None."""
    return [
        {
            name: None if isinstance(value, float) and not math.isfinite(value) else value
            for name, value in zip(answer, row, strict=True)
            if value is not None and value != []
        }
        for row in zip(*answer.values(), strict=True)
    ]


def _flatten_rows(answer: dict[str, list[Any]]) -> list[dict[str, Any]]:
    """Turn columns into rows that all have the same keys."""
    names = [name for name in answer if name != "notes" or any(answer[name])]
    rows = _list_rows(answer | {"notes": ["; ".join(told) for told in answer["notes"]]})
    return [{name: row.get(name) for name in names} for row in rows]


def _print(answer: dict[str, list[Any]], question: Question, device: str, show: str) -> None:
    """Print for people: columns, blocks of them in a narrow window, a list for a single row."""
    import sys

    asked = ("corner", "temperature", *question.asked)
    heads: dict[str, str] = {"corner": "corner"}
    cells: dict[str, list[str]] = {"corner": answer["corner"]}
    for name in [name for name in answer if name not in ("corner", "notes")]:
        digits = 6 if name in asked else 4
        heads[name], cells[name] = format_column(name, answer[name], digits=digits)
    if any(answer["notes"]):
        heads["notes"], cells["notes"] = "notes", ["; ".join(told) for told in answer["notes"]]
    if sys.stdout.isatty() and len(answer["corner"]) == 1:
        _print_list(answer, device)
    else:
        if sys.stdout.isatty():
            _print_heading(heads, cells, asked, device)
        names = list(heads)
        keys = [names.index(name) for name in asked if name in names]
        rows = list(zip(*cells.values(), strict=True))
        write_blocks(list(heads.values()), rows, keys=keys)
    if not show:
        say("More with --show all, --json or --csv.")


def _print_heading(
    heads: dict[str, str], cells: dict[str, list[str]], asked: Sequence[str], device: str
) -> None:
    """Tell what is the same in every row in one line, and take it out of the columns."""
    import shutil
    import textwrap

    same = [n for n in heads if n in (*asked, "notes") and len(set(cells[n])) == 1]
    words = [device]
    for name in same:
        head, value = heads.pop(name), cells.pop(name)[0]
        symbol, _, unit = head.partition(" [")
        words.append(value if name in ("corner", "notes") else f"{symbol} {value} {unit[:-1]}")
    text = ", ".join(word.strip() for word in words)
    typer.echo(textwrap.fill(text, shutil.get_terminal_size().columns))


def _print_list(answer: dict[str, list[Any]], device: str) -> None:
    """Write one operating point as a list with the meaning of each quantity."""
    from gmid.nomenclature import QUANTITIES

    rows = [["device", device, ""], ["corner", answer["corner"][0], ""]]
    for name in [name for name in answer if name in QUANTITIES]:
        head, (value,) = format_column(name, answer[name], digits=5)
        unit = head.partition(" [")[2][:-1]
        rows.append([QUANTITIES[name].symbol, f"{value} {unit}", QUANTITIES[name].meaning])
    rows += [["note", "", note] for note in answer["notes"][0]]
    write_columns(["", "value", "meaning"], rows)
