"""Process of a request: its table, and the devices of each role in each condition."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from pathlib import Path

from gmid.condition import Condition
from gmid.device import DeviceTable, open_table
from gmid.device.device import Device
from gmid.errors import DataFault, GmidError, UnknownName, advise, raise_faults

ROLES = ("n", "p", "pair", "follower", "cascode")
"""Roles of ``[process.devices]``; the last three are optional flavours."""


@dataclass(frozen=True)
class Process:
    """Where the devices come from.

    Parameters
    ----------
    table : Path
        Table file.
    devices : mapping of str to str
        Names in the table by role, `n` and `p` at least.
    conditions : tuple of Condition
        Empty for all that every device has.
    own_well : tuple of str
        Devices whose bulk may go to the source.
    digest : str, optional
        What the table's digest must be.
    where : mapping of str to str
        Place of keys in the file, for messages.

    Examples
    --------
    >>> Process(Path("larch180.h5"), {"n": "nmos", "p": "pmos"}).own_well
    ()
    """

    table: Path
    devices: Mapping[str, str]
    conditions: tuple[Condition, ...] = ()
    own_well: tuple[str, ...] = ()
    digest: str | None = None
    where: Mapping[str, str] = field(default_factory=dict, repr=False)


@dataclass(frozen=True)
class Bench:
    """The devices of a request, opened: what every condition offers.

    Parameters
    ----------
    table : DeviceTable
        The table.
    names : tuple of str
        Devices in use.
    conditions : tuple of Condition
        In the order of the request.
    process : Process
        Where it came from.
    """

    table: DeviceTable
    names: tuple[str, ...]
    conditions: tuple[Condition, ...]
    process: Process
    _opened: dict[Condition, dict[str, Device]] = field(default_factory=dict, repr=False)

    def devices(self, condition: Condition) -> dict[str, Device]:
        """Open the devices of one condition, once.

        Parameters
        ----------
        condition : Condition
            One of `conditions`.

        Returns
        -------
        dict of str to Device
            By name in the table.
        """
        if condition not in self._opened:
            self._opened[condition] = {
                name: self.table.device(
                    name, corner=condition.corner, temperature=condition.temperature
                )
                for name in self.names
            }
        return self._opened[condition]

    def __iter__(self) -> Iterator[tuple[Condition, dict[str, Device]]]:
        for condition in self.conditions:
            yield condition, self.devices(condition)


def open_bench(process: Process) -> Bench:
    """Open the table of a request and find its devices and conditions.

    Parameters
    ----------
    process : Process
        What the request names.

    Returns
    -------
    Bench
        Devices are read when they are first used.

    Raises
    ------
    GmidError
        If the table cannot be opened or has changed, or lacks a device or a condition.

    Examples
    --------
    >>> open_bench(Process(Path("missing.h5"), {"n": "nmos", "p": "pmos"}))
    Traceback (most recent call last):
    ...
    gmid.errors.FileTrouble: missing.h5: there is no such file.
    """
    table = open_table(process.table)
    where = dict(process.where)
    faults: list[GmidError] = []
    if process.digest is not None and not table.digest.startswith(process.digest):
        faults.append(
            DataFault(
                f"{process.table} has changed since the plan was made: its digest is "
                f"{table.digest[:16]}, not {process.digest}.",
                where=where.get("digest"),
                hint="Size again, or remove the key digest to check the plan on the new table.",
            )
        )
    for role, name in process.devices.items():
        faults += _check_device(table, role, name, where.get(f"devices.{role}"))
    raise_faults(faults)
    names = tuple(dict.fromkeys(process.devices.values()))
    common = [
        condition
        for condition in table.conditions(names[0])
        if all(condition in table.conditions(name) for name in names)
    ]
    spelled = [str(condition) for condition in common]
    for condition in process.conditions:
        if condition not in common:
            faults.append(
                UnknownName(
                    f"{process.table} does not have {', '.join(names)} in {condition}.",
                    where=where.get("conditions"),
                    hint=advise(str(condition), spelled),
                )
            )
    if not common:
        faults.append(DataFault(f"{process.table}: {' and '.join(names)} share no condition."))
    raise_faults(faults)
    return Bench(table, names, process.conditions or tuple(common), process)


def _check_device(table: DeviceTable, role: str, name: str, where: str | None) -> list[GmidError]:
    if name not in table.devices:
        return [
            UnknownName(
                f"the table has no device {name!r}.", where=where, hint=advise(name, table.devices)
            )
        ]
    polarity = table.sweep(name).unit.polarity
    if role in ("n", "p") and polarity != role:
        return [DataFault(f"{name!r} is a {polarity}-channel device.", where=where)]
    return []
