"""Plan files: the request's tables, and every amplifier place by place."""

from __future__ import annotations

import os
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from gmid.amplifier.plan import AmplifierPlan, TransistorPlan
from gmid.documents import Document, read_document, write_document
from gmid.errors import DataFault, Faults, GmidError, UnknownName, advise, raise_faults
from gmid.request.keys import PlanFileKeys, PlanKeys
from gmid.request.reading import build_request, place_fault
from gmid.request.request import Request
from gmid.request.requirements import collect_demands, spell, spell_demand

HEADING = """\
A sized amplifier, place by place. Edit lengths, counts and stacks, then judge it again:
    gmid check THIS_FILE
count is the number of unit transistors in parallel of ONE instance (one side); stack the number
in series.
"""

_ELEMENTS = (
    ("sense_resistance", "ohm"), ("sense_capacitance", "F"),
    ("error_resistance", "ohm"), ("error_capacitance", "F"),
    ("output_capacitance", "F"),
)  # fmt: skip


@dataclass(frozen=True)
class PlanFile:
    """A plan file as read.

    Parameters
    ----------
    request : Request
        Process, supply, margins, and the filter where there is one.
    plans : tuple of AmplifierPlan
        Every distinct amplifier.

    Examples
    --------
    >>> from gmid.amplifier.example import example_plan
    >>> from gmid.request.reading import parse_request
    >>> from gmid.request.request import EXAMPLE
    >>> PlanFile(parse_request(EXAMPLE), (example_plan(),)).plans[0].name
    'a1'
    """

    request: Request
    plans: tuple[AmplifierPlan, ...]


def has_filter(file: PlanFile) -> bool:
    """Tell whether the whole filter can be rebuilt from a plan file.

    Parameters
    ----------
    file : PlanFile
        As read.

    Returns
    -------
    bool
        True where there is a filter and every amplifier says where it stands.

    Examples
    --------
    >>> from gmid.amplifier.example import example_plan
    >>> from gmid.request.reading import parse_request
    >>> from gmid.request.request import EXAMPLE
    >>> has_filter(PlanFile(parse_request(EXAMPLE), (example_plan(),)))
    False
    """
    return file.request.spec is not None and all(plan.positions for plan in file.plans)


def read_plan(path: str | Path) -> PlanFile:
    """Read a plan file.

    Parameters
    ----------
    path : str or Path
        The file.

    Returns
    -------
    PlanFile
        Its request and amplifiers.

    Raises
    ------
    GmidError
        Every fault of the file, each with line and key.

    Examples
    --------
    >>> read_plan("missing.toml")
    Traceback (most recent call last):
    ...
    gmid.errors.FileTrouble: missing.toml: there is no such file.
    """
    document = read_document(path, PlanFileKeys)
    faults: list[GmidError] = []
    request: Request | None = None
    try:
        request = build_request(document, needs_goal=False)
    except GmidError as trouble:
        faults += trouble.faults if isinstance(trouble, Faults) else (trouble,)
    plans: list[AmplifierPlan] = []
    for index, keys in enumerate(document.model.plan):
        faults += _check_devices(document, index, keys)
        try:
            plans.append(_build_plan(keys))
        except GmidError as trouble:
            found = trouble.faults if isinstance(trouble, Faults) else (trouble,)
            faults += [place_fault(document, fault, "plan", index) for fault in found]
    if not document.model.plan:
        faults.append(DataFault("has no [[plan]].", where=document.name))
    names = [keys.name for keys in document.model.plan]
    for index, name in enumerate(names):
        if name in names[:index]:
            faults.append(document.fault(f"{name!r} is there already.", "plan", index, "name"))
    raise_faults(faults)
    assert request is not None
    return PlanFile(request, tuple(plans))


def _check_devices(document: Document[Any], index: int, keys: PlanKeys) -> list[GmidError]:
    devices = document.model.process.devices
    known = [name for name in devices.model_dump().values() if name is not None]
    return [
        UnknownName(
            f"plan.{index}.transistors.{place}.device: {one.device!r} is no device of "
            "[process.devices].",
            where=document.where("plan", index, "transistors", place, "device"),
            hint=advise(one.device, known),
        )
        for place, one in keys.transistors.items()
        if one.device not in known
    ]


def _build_plan(keys: PlanKeys) -> AmplifierPlan:
    transistors = {
        place: TransistorPlan(
            one.device, one.length, _whole(one.count), _whole(one.stack), one.bulk
        )
        for place, one in keys.transistors.items()
    }
    given = {name: getattr(keys, name) for name, _ in _ELEMENTS if getattr(keys, name) is not None}
    return AmplifierPlan(
        keys.name,
        transistors,
        load_capacitance=keys.load_capacitance,
        load_resistance=keys.load_resistance,
        input_pair=keys.input_pair,
        output=keys.output,
        common_mode_sense=keys.common_mode_sense,
        positions=keys.positions,
        multiple=keys.multiple,
        demands=collect_demands(keys.demands),
        **given,
    )


def _whole(value: float) -> Any:
    """Leave a number as it is where it is not whole, for the plan to refuse."""
    return int(value) if float(value).is_integer() else value


def write_plan(
    request: Request, plans: Sequence[AmplifierPlan], folder: str | Path, *, digest: str = ""
) -> str:
    """Write a plan file's text.

    Parameters
    ----------
    request : Request
        Its tables are repeated, with paths relative to `folder`.
    plans : sequence of AmplifierPlan
        Single candidates.
    folder : str or Path
        Where the file will lie.
    digest : str
        Of the table, so that a changed one is noticed.

    Returns
    -------
    str
        TOML that `read_plan` reads.

    Examples
    --------
    >>> from gmid.amplifier.example import example_plan
    >>> from gmid.request.reading import parse_request
    >>> from gmid.request.request import EXAMPLE
    >>> text = write_plan(parse_request(EXAMPLE), [example_plan()], ".")
    >>> text.splitlines()[-1]
    'bias_load = { device = "pmos", length = "2 um", count = 2 }'
    """
    data: dict[str, Any] = {
        key: value for key, value in request.data.items() if key not in ("plan", "demands")
    }
    data["format"] = 1
    process = {**data["process"], "table": _relative(request.process.table, Path(folder))}
    if digest:
        process["digest"] = digest[:16]
    data["process"] = process
    data["plan"] = [spell_plan(plan) for plan in plans]
    return write_document(data, heading=HEADING, tables=("devices", "demands", "transistors"))


def _relative(table: Path, folder: Path) -> str:
    try:
        return Path(os.path.relpath(table, folder)).as_posix()
    except ValueError:
        return table.resolve().as_posix()


def spell_plan(plan: AmplifierPlan) -> dict[str, Any]:
    """Spell an amplifier as the keys of ``[[plan]]``.

    Parameters
    ----------
    plan : AmplifierPlan
        A single candidate.

    Returns
    -------
    dict
        Plain data.

    Examples
    --------
    >>> from gmid.amplifier.example import example_plan
    >>> spell_plan(example_plan())["transistors"]["pair"]
    {'device': 'nmos', 'length': '500 nm', 'count': 4}
    """
    found: dict[str, Any] = {
        "name": plan.name,
        **({"positions": list(plan.positions)} if plan.positions else {}),
        "multiple": int(plan.multiple),
        "input_pair": plan.input_pair,
        "output": plan.output,
        "common_mode_sense": plan.common_mode_sense,
        "load_capacitance": spell(float(np.asarray(plan.load_capacitance)), "F"),
    }
    if np.isfinite(plan.load_resistance):
        found["load_resistance"] = spell(float(np.asarray(plan.load_resistance)), "ohm")
    for key, unit in _ELEMENTS:
        value = float(np.asarray(getattr(plan, key)))
        if value > 0:
            found[key] = spell(value, unit)
    found["transistors"] = {
        place: _spell_transistor(one) for place, one in plan.transistors.items()
    }
    if plan.demands:
        found["demands"] = {
            name: spell_demand(name, demand) for name, demand in plan.demands.items()
        }
    return found


def _spell_transistor(one: TransistorPlan) -> Mapping[str, Any]:
    found: dict[str, Any] = {
        "device": one.device,
        "length": spell(float(np.asarray(one.length)), "m"),
        "count": int(np.asarray(one.count)),
    }
    if one.stack != 1:
        found["stack"] = int(one.stack)
    if one.bulk != "rail":
        found["bulk"] = one.bulk
    return found
