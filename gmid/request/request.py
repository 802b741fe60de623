"""What is to be sized, as it flows through the tool."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

from gmid.amplifier.plan import Choices, Matching, Requirement, Supply
from gmid.filters.passives import Passives
from gmid.filters.spec import FilterSpec, Tolerance
from gmid.request.process import Process


@dataclass(frozen=True)
class Request:
    """A request file.

    Parameters
    ----------
    title : str
        Title of the sheet.
    process : Process
        Table, conditions, devices by role.
    supply : Supply
        Voltage, common mode and reference current.
    choices : Choices
        What the search may choose, and the margins to keep.
    matching : mapping of str to Matching
        Mismatch by device.
    demands : mapping of str to Requirement
        What one amplifier must meet, where no filter says it.
    spec : FilterSpec, optional
        The filter.
    tolerance : Tolerance, optional
        How far it may be off; with a filter.
    passives : Passives
        Properties of resistors and capacitors.
    load_capacitance, load_resistance : float
        Of direct demands: from each output to ground [F], and to vcm [ohm].
    name : str
        Name of the file, for messages.
    data : mapping
        The tables as TOML gives them, for writing a plan.

    Examples
    --------
    >>> from gmid.request.reading import parse_request
    >>> parse_request(EXAMPLE).demands["gbw"].value
    20000000.0
    """

    title: str
    process: Process
    supply: Supply
    choices: Choices = field(default_factory=Choices)
    matching: Mapping[str, Matching] = field(default_factory=dict)
    demands: Mapping[str, Requirement] = field(default_factory=dict)
    spec: FilterSpec | None = None
    tolerance: Tolerance | None = None
    passives: Passives = field(default_factory=Passives)
    load_capacitance: float = 0.0
    load_resistance: float = float("inf")
    name: str = "request"
    data: Mapping[str, Any] = field(default_factory=dict, repr=False)


EXAMPLE = """\
format = 1
title = "An amplifier"

[process]
table = "larch180.h5"
[process.devices]
n = "nmos"
p = "pmos"

[supply]
voltage = "1.8 V"
reference_current = "2 uA"

[demands]
gbw = "20 MHz"
load_capacitance = "1 pF"
"""
"""A small request, for examples."""
