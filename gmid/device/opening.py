"""The table a designer asks: `open_table` gives it, and it gives devices ready for queries."""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path

from gmid.condition import Condition
from gmid.device.device import Device
from gmid.errors import OutOfReach, UnknownName
from gmid.table.table import Table, open_grid_data


@dataclass(frozen=True)
class DeviceTable(Table):
    """A table whose devices answer queries; `open_table` makes it.

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
    >>> DeviceTable(Path("t.h5"), "larch180", ())
    DeviceTable(larch180: no devices; t.h5)
    """

    _made: dict[tuple[str, Condition], Device] = field(
        default_factory=dict, init=False, repr=False, compare=False
    )

    def device(
        self,
        name: str,
        *,
        corner: str | None = None,
        temperature: float | None = None,
        interpolate: bool = False,
    ) -> Device:
        """Take a device in a condition, ready for queries.

        Parameters
        ----------
        name : str
            Device name.
        corner : str, keyword-only
            Process corner, the nominal one by default.
        temperature : float, keyword-only
            In degrees Celsius; the nominal one by default, or the corner's only one.
        interpolate : bool, keyword-only
            Whether a temperature between those of the table may be interpolated; the notes of
            the device then say so.

        Returns
        -------
        Device
            Kept, so that the next call gives the same one.

        Raises
        ------
        UnknownName
            If the table does not hold it; the nearest name, or what there is, is told.
        OutOfReach
            If the temperature is to be interpolated and lies outside those of the corner.

        Examples
        --------
        >>> DeviceTable(Path("t.h5"), "larch180", ()).device("nmos")
        Traceback (most recent call last):
        ...
        gmid.errors.UnknownName: t.h5: there is no device 'nmos'. There are none.
        """
        if temperature is not None and not self._holds(name, corner, temperature):
            between = self._between(name, corner, temperature)
            if between and interpolate:
                return self._blend(name, between, temperature)
            if between:
                listed = ", ".join(f"{held.temperature:g}" for held in between)
                raise UnknownName(
                    f"{name} has no table at {between[0].corner}/{temperature:g}.",
                    where=str(self.path),
                    hint=f"Take one of {listed} C, or ask for interpolation between them.",
                )
            if interpolate:
                self._refuse(name, corner, temperature)
        condition = self.find(name, corner=corner, temperature=temperature)
        if (name, condition) not in self._made:
            self._made[name, condition] = Device(self.sweep(name, condition))
        return self._made[name, condition]

    def _corner(self, name: str, corner: str | None) -> list[Condition]:
        """List the conditions of a device at a corner, the coldest first."""
        wanted = self.nominal(name).corner if corner is None else corner
        same = [held for held in self.conditions(name) if held.corner == wanted]
        return sorted(same, key=lambda held: held.temperature)

    def _holds(self, name: str, corner: str | None, temperature: float) -> bool:
        return any(held.temperature == temperature for held in self._corner(name, corner))

    def _between(self, name: str, corner: str | None, temperature: float) -> list[Condition]:
        """List a corner's conditions if the temperature lies between them."""
        held = self._corner(name, corner)
        inside = held and held[0].temperature < temperature < held[-1].temperature
        return held if inside else []

    def _refuse(self, name: str, corner: str | None, temperature: float) -> None:
        """Raise the error for a temperature that cannot be interpolated; unknown names pass."""
        held = self._corner(name, corner)
        if not held:
            return
        ends = [f"{held[end].temperature:g}" for end in (0, -1)]
        covers = f"covers {ends[0]} to {ends[1]} C" if len(held) > 1 else f"holds {ends[0]} C alone"
        raise OutOfReach(
            f"{temperature:g} C is out of reach for {name} {held[0].corner}: the table {covers}.",
            where=str(self.path),
        )

    def _blend(self, name: str, between: list[Condition], temperature: float) -> Device:
        condition = Condition(between[0].corner, temperature)
        if (name, condition) not in self._made:
            sweeps = [self.sweep(name, held) for held in between]
            self._made[name, condition] = Device.between(sweeps, temperature)
        return self._made[name, condition]

    def __repr__(self) -> str:
        return f"Device{super().__repr__()}"


def open_table(path: str | Path) -> DeviceTable:
    """Open a table file for queries.

    Parameters
    ----------
    path : str or Path
        The file, as ``gmid import`` writes it.

    Returns
    -------
    DeviceTable
        Its numbers stay on disk until asked for.

    Raises
    ------
    FileTrouble
        If there is no such file.
    DataFault
        If it is no device table, of another format, or damaged.

    Examples
    --------
    >>> import tempfile
    >>> from gmid.device.example import example_sweep
    >>> from gmid.table.saving import save_sweeps
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     path = Path(folder) / "invented.h5"
    ...     _ = save_sweeps(path, [example_sweep()], process="invented")
    ...     nmos = open_table(path).device("nmos")
    ...     point = nmos.at(gm_over_id=15, length=1e-6, vds=0.6).scaled(id=10e-6)
    >>> float(point.width.round(9)), float(point.vgs.round(3))
    (7.545e-06, 0.49)
    """
    grid_data = open_grid_data(path)
    return DeviceTable(grid_data.path, grid_data.process, grid_data.entries)
