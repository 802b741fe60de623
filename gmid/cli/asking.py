"""What ``query`` and ``chart`` share: options into numbers, conditions into devices."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING

from gmid.cli.output import say
from gmid.errors import DataFault, GmidError, UsageFault, raise_faults

if TYPE_CHECKING:
    from gmid.condition import Condition
    from gmid.device.device import Device
    from gmid.device.opening import DeviceTable

NUMBERS = "A value, a list a,b,c or a range start:stop:step, both ends in."
"""How the help of every numeric option begins."""

_ALWAYS = ("length", "width", "count", "vgs", "vds", "vsb", "temperature")
"""What every answer shows anyway."""


def read_numbers(options: Mapping[str, tuple[str, str]]) -> dict[str, list[float]]:
    """Read the numeric options of a command line.

    Parameters
    ----------
    options : mapping of str to (str, str)
        Option as typed, such as ``--vds``; its text, empty where it was not given; its unit.

    Returns
    -------
    dict of str to list of float
        In SI, for the options that were given.

    Raises
    ------
    UsageFault
        Naming every option that could not be read.

    Examples
    --------
    >>> read_numbers({"--length": ("0.5u,1u", "m"), "--vgs": ("", "V")})
    {'--length': [5e-07, 1e-06]}
    """
    from gmid.quantity import parse_quantities

    found, faults = {}, []
    for option, (text, unit) in options.items():
        if not text:
            continue
        try:
            found[option] = parse_quantities(text, unit, where=option)
        except DataFault as fault:
            faults.append(str(fault))
    if faults:
        raise UsageFault("\n".join(faults))
    return found


def choose_devices(
    table: DeviceTable,
    names: list[str],
    *,
    corner: str,
    temp: str,
    condition: str,
    interpolate: bool,
) -> list[Device]:
    """Open the devices that the options about conditions mean, saying the defaults taken.

    Parameters
    ----------
    table : DeviceTable
        The table asked.
    names : list of str
        Names of devices.
    corner, temp : str, keyword-only
        Corners and temperatures; all combinations are meant, the nominal one by default.
    condition : str, keyword-only
        In their place: a list such as ``tt/27,ss/125``, or ``all``.
    interpolate : bool, keyword-only
        Whether temperatures between those of the table may be interpolated.

    Returns
    -------
    list of Device
        Device by device, corner by corner, the temperature fastest.

    Raises
    ------
    UsageFault
        If the options contradict each other or cannot be read.
    GmidError
        Naming every device and condition that is not there.

    Examples
    --------
    >>> from pathlib import Path
    >>> from gmid.device.opening import DeviceTable
    >>> empty = DeviceTable(Path("t.h5"), "ash90", ())
    >>> choose_devices(empty, ["nmos"], corner="", temp="", condition="", interpolate=False)
    Traceback (most recent call last):
    ...
    gmid.errors.UnknownName: t.h5: there is no device 'nmos'. There are none.
    """
    pairs = _read_conditions(corner, temp, condition)
    devices: list[Device] = []
    faults: dict[str, GmidError] = {}
    told: dict[str, None] = {}
    for name in names:
        try:
            nominal = table.nominal(name)
            every = [(held.corner, held.temperature) for held in table.conditions(name)]
        except GmidError as fault:
            faults[str(fault)] = fault
            continue
        for where, degrees in pairs or every:
            try:
                device = table.device(
                    name, corner=where, temperature=degrees, interpolate=interpolate
                )
            except GmidError as fault:
                faults[str(fault)] = fault
                continue
            devices.append(device)
            told[_tell_default(device, where, degrees, nominal)] = None
    raise_faults(faults.values())
    for text in filter(None, told):
        say(text)
    for device in devices:
        for note in device.notes:
            say(f"{device.name} {device.condition}: {note}.")
    return devices


def _read_conditions(
    corner: str, temp: str, condition: str
) -> list[tuple[str | None, float | None]]:
    """List corners with temperatures; None stands for a default, no entry for all there are."""
    from gmid.condition import Condition

    if condition and (corner or temp):
        raise UsageFault("--condition already says corner and temperature.", hint="Leave out one.")
    if condition == "all":
        return []
    if condition:
        try:
            read = [Condition.parse(part, where="--condition") for part in condition.split(",")]
        except DataFault as fault:
            raise UsageFault(str(fault)) from None
        return [(one.corner, one.temperature) for one in read]
    corners = [word.strip() for word in corner.split(",")] if corner else [None]
    degrees = read_numbers({"--temp": (temp, "degC")}).get("--temp", [None])
    return [(where, warmth) for where in corners for warmth in degrees]


def _tell_default(
    device: Device, corner: str | None, temperature: float | None, nominal: Condition
) -> str:
    """Word which condition was taken where it was not given in full; empty where it was."""
    taken = []
    if corner is None:
        taken.append(f"corner {device.condition.corner} (nominal)")
    if temperature is None:
        degrees = device.condition.temperature
        why = "nominal" if degrees == nominal.temperature else "the only one there"
        taken.append(f"temperature {degrees:g} C ({why})")
    return f"{device.name}: {' and '.join(taken)} by default." if taken else ""


def choose_quantities(
    devices: Sequence[Device], show: str, *, usual: Sequence[str] | None = None
) -> list[str]:
    """Choose the quantities to compute.

    Parameters
    ----------
    devices : sequence of Device
        Those asked.
    show : str
        Names with commas between them, ``all``, or empty.
    usual : sequence of str, keyword-only
        What is taken for empty, as far as any device has it; all by default.

    Returns
    -------
    list of str
        Names, each once, without those that every answer shows anyway but vgs.

    Raises
    ------
    UnknownName
        If a name is unknown, or some table lacks it.

    Examples
    --------
    >>> from gmid.device.device import Device
    >>> from gmid.device.example import example_sweep
    >>> choose_quantities([Device(example_sweep())], "", usual=["gm", "vth"])
    ['gm']
    """
    from gmid.errors import UnknownName, advise
    from gmid.nomenclature import QUANTITIES

    there = list(dict.fromkeys(name for device in devices for name in device.fields))
    if show == "all" or (usual is None and not show):
        return there
    if not show:
        return [name for name in usual or () if name in (*there, "vgs")]
    names = list(dict.fromkeys(name.strip() for name in show.split(",")))
    for name in names:
        known = [*there, *_ALWAYS]
        if name not in QUANTITIES:
            raise UnknownName(
                f"{name!r} is not a quantity.", where="--show", hint=advise(name, known)
            )
        for device in devices:
            if name not in (*device.fields, *_ALWAYS):
                raise UnknownName(
                    f"the table has no {name} for {device.name} {device.condition}.",
                    where="--show",
                    hint=advise(name, known),
                )
    return [name for name in names if name in (*there, "vgs")]
