"""The table a designer opens: which devices and conditions it holds, and their sweeps."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import TYPE_CHECKING

from gmid.condition import Condition
from gmid.errors import UnknownName, advise
from gmid.sweep.model import Sweep
from gmid.table.reading import read_sweep
from gmid.table.store import (
    IndexEntry,
    OpenedTable,
    combine_digests,
    get_text,
    group_name,
    read_index,
)

if TYPE_CHECKING:
    from gmid.sweep.listing import DataFrame


@dataclass(frozen=True)
class Table:
    """Grid data of a process: devices in their conditions, from one file.

    Parameters
    ----------
    path : Path
        The table file.
    process : str
        Name of the process.
    entries : tuple of IndexEntry
        One for each device in each condition, in the order of import.

    Examples
    --------
    >>> Table(Path("t.h5"), "larch180", ())
    Table(larch180: no devices; t.h5)
    """

    path: Path
    process: str
    entries: tuple[IndexEntry, ...]

    @property
    def devices(self) -> list[str]:
        """Names of the devices, in the order of import."""
        return list(dict.fromkeys(entry.device for entry in self.entries))

    @cached_property
    def digest(self) -> str:
        """Hash of all that the table holds (SHA-256, hexadecimal)."""
        return combine_digests(self.entries)

    def conditions(self, device: str | None = None) -> list[Condition]:
        """List the conditions of a device, or those that all devices share.

        Parameters
        ----------
        device : str, optional
            Device name.

        Returns
        -------
        list of Condition
            In the order of import.

        Raises
        ------
        UnknownName
            If there is no such device.

        Examples
        --------
        >>> Table(Path("t.h5"), "larch180", ()).conditions()
        []
        """
        if device is None:
            every = [set(self.conditions(name)) for name in self.devices]
            found = dict.fromkeys(entry.condition for entry in self.entries)
            return [condition for condition in found if all(condition in some for some in every)]
        if device not in self.devices:
            raise UnknownName(
                f"there is no device {device!r}.",
                where=str(self.path),
                hint=advise(device, self.devices),
            )
        return [entry.condition for entry in self.entries if entry.device == device]

    def nominal(self, device: str) -> Condition:
        """Tell a device's nominal condition: the one marked so, else the first imported.

        Parameters
        ----------
        device : str
            Device name.

        Returns
        -------
        Condition
            Corner and temperature.

        Raises
        ------
        UnknownName
            If there is no such device.

        Examples
        --------
        >>> entry = IndexEntry("nmos", Condition("tt", 27.0), False, "00")
        >>> Table(Path("t.h5"), "larch180", (entry,)).nominal("nmos")
        Condition('tt/27')
        """
        conditions = self.conditions(device)
        marked = [e.condition for e in self.entries if e.device == device and e.nominal]
        return (marked or conditions)[0]

    def find(
        self, device: str, *, corner: str | None = None, temperature: float | None = None
    ) -> Condition:
        """Find the condition of a device that a corner and a temperature mean.

        Parameters
        ----------
        device : str
            Device name.
        corner : str, optional
            The nominal one by default.
        temperature : float, optional
            In degrees Celsius; the nominal one by default, or the corner's only one.

        Returns
        -------
        Condition
            One that the table holds.

        Raises
        ------
        UnknownName
            If the table does not hold it; what it holds is listed.

        Examples
        --------
        >>> entry = IndexEntry("nmos", Condition("ss", 125.0), False, "00")
        >>> Table(Path("t.h5"), "larch180", (entry,)).find("nmos", corner="ss")
        Condition('ss/125')
        """
        conditions = self.conditions(device)
        nominal = self.nominal(device)
        wanted = nominal.corner if corner is None else corner
        same = [condition for condition in conditions if condition.corner == wanted]
        if not same:
            corners = list(dict.fromkeys(condition.corner for condition in conditions))
            raise UnknownName(
                f"{device} has no corner {wanted!r}.",
                where=str(self.path),
                hint=advise(wanted, corners),
            )
        if temperature is None and len(same) == 1:
            return same[0]
        degrees = nominal.temperature if temperature is None else temperature
        for condition in same:
            if condition.temperature == degrees:
                return condition
        listed = ", ".join(f"{condition.temperature:g}" for condition in same)
        raise UnknownName(
            f"{device} has no table at {wanted}/{degrees:g}.",
            where=str(self.path),
            hint=f"At corner {wanted} there are tables at {listed} C.",
        )

    def sweep(self, device: str, condition: Condition | None = None) -> Sweep:
        """Take one device's grid data in one condition; quantities are read when asked for.

        Parameters
        ----------
        device : str
            Device name.
        condition : Condition, optional
            The nominal one by default; its supply does not matter.

        Returns
        -------
        Sweep
            With lazy values.

        Raises
        ------
        UnknownName
            If the table does not hold it.
        DataFault
            If the file is damaged.

        Examples
        --------
        >>> Table(Path("t.h5"), "larch180", ()).sweep("nmos")
        Traceback (most recent call last):
        ...
        gmid.errors.UnknownName: t.h5: there is no device 'nmos'. There are none.
        """
        if condition is None:
            condition = self.nominal(device)
        else:
            condition = self.find(
                device, corner=condition.corner, temperature=condition.temperature
            )
        return read_sweep(self.path, group_name(device, condition))

    def to_frame(self) -> DataFrame:
        """List what the table holds as a data frame.

        Returns
        -------
        DataFrame
            Columns ``device corner temperature nominal digest``, one row for each device in
            each condition.

        Examples
        --------
        >>> entry = IndexEntry("nmos", Condition("tt", 27.0), True, "00")
        >>> Table(Path("t.h5"), "larch180", (entry,)).to_frame()["corner"].tolist()
        ['tt']
        """
        from gmid.sweep.listing import make_frame

        columns = {
            "device": [entry.device for entry in self.entries],
            "corner": [entry.condition.corner for entry in self.entries],
            "temperature": [entry.condition.temperature for entry in self.entries],
            "nominal": [e.condition == self.nominal(e.device) for e in self.entries],
            "digest": [entry.digest for entry in self.entries],
        }
        return make_frame(columns, units={"temperature": "degC"})

    def _repr_html_(self) -> str:
        from gmid.sweep.listing import list_html

        rows = []
        for device in self.devices:
            nominal = self.nominal(device)
            others = [str(one) for one in self.conditions(device) if one != nominal]
            rows.append((device, str(nominal), " ".join(others)))
        title = f"Table of process {self.process}"
        return list_html(
            title, ("device", "nominal", "other conditions"), rows, notes=(str(self.path),)
        )

    def __repr__(self) -> str:
        held = ", ".join(
            f"{device} in {len(self.conditions(device))} condition(s)" for device in self.devices
        )
        return f"Table({self.process}: {held or 'no devices'}; {self.path})"


def open_grid_data(path: str | Path) -> Table:
    """Open a table file for its grid data.

    Parameters
    ----------
    path : str or Path
        The file.

    Returns
    -------
    Table
        The table; its numbers stay on disk until asked for.

    Raises
    ------
    FileTrouble
        If there is no such file.
    DataFault
        If it is no device table, of another format, or damaged.

    Examples
    --------
    >>> open_grid_data("missing.h5")
    Traceback (most recent call last):
    ...
    gmid.errors.FileTrouble: missing.h5: there is no such file.
    """
    path = Path(path)
    with OpenedTable(path) as root:
        return Table(path, get_text(root, "process"), tuple(read_index(root)))
